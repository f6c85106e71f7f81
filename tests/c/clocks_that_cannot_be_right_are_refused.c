/*
 * A clock that is not finite, goes backwards, does not count on, or has flags other than 0 and 1 is refused with the
 * reason; the step is not measured, and the next one is.
 *
 * variants: clang fast
 */
#define _GNU_SOURCE
#include "check.h"

static struct universe all;

/* Made at run time, so that a compiler that believes there are none does not think them away. */
static double number_from(uint64_t bits)
{
    double number;
    memcpy(&number, &bits, sizeof number);
    return number;
}

static void test(void)
{
    const double not_a_number = number_from(0x7ff8000000000000), signalling = number_from(0x7ff0000000000001),
                 infinite = number_from(0x7ff0000000000000), minus_infinite = number_from(0xfff0000000000000);
    limno_clock clock;
    int32_t due = 7;
    fill_universe(&all);
    limno_run *run = open_alone(check_config, "clocks");
    GOOD_STEP(run, 10, &all);

#define CLOCK(number, ...) clock = clock_of(number, 20.0), __VA_ARGS__
#define WRONG(...)                                                              \
    REFUSED(run, limno_due(run, &clock, &due), LIMNO_BAD_CLOCK, __VA_ARGS__);   \
    REFUSED(run, limno_mark(run, &clock), LIMNO_BAD_CLOCK, __VA_ARGS__);        \
    REFUSED(run, limno_sound(run, "gas"), LIMNO_BAD_ORDER, "clock", "refused"); \
    EXPECT(run, limno_enter(run), LIMNO_OK)
    CLOCK(20, clock.time = not_a_number);
    WRONG("step 20", "finite");
    CLOCK(20, clock.time = signalling);
    WRONG("step 20", "finite");
    CLOCK(20, clock.time = infinite);
    WRONG("step 20", "finite");
    CLOCK(20, clock.time = minus_infinite);
    WRONG("step 20", "finite");
    CLOCK(20, clock.step_length = not_a_number);
    WRONG("step 20", "step length");
    CLOCK(20, clock.step_length = infinite);
    WRONG("step 20", "step length");
    CLOCK(20, clock.step_length = -1.0);
    WRONG("step 20", "step length", "-1");
    CLOCK(20, clock.time = 9.5);
    WRONG("step 20", "goes back", "10", "9.5");
    CLOCK(20, clock.time = -1e300);
    WRONG("goes back");
    CLOCK(10, (void)0);
    WRONG("step number does not grow", "10");
    CLOCK(9, (void)0);
    WRONG("step number does not grow", "9", "10");
    CLOCK(0, (void)0);
    WRONG("step number does not grow");
    CLOCK(UINT64_MAX, (void)0); /* -1 as it arrives here */
    WRONG("step");
    CLOCK(20, clock.synchronised = 2);
    WRONG("`synchronised` is 2", "0 or 1");
    CLOCK(20, clock.synchronised = -1);
    WRONG("`synchronised` is -1");
    CLOCK(20, clock.checkpoint = INT32_MIN);
    WRONG("`checkpoint`", "0 or 1");
    CHECK(due == 7, "an answer was written: %d", (int)due);

    /* What looks odd and is right: equal times, a gap in the numbers, a step length of 0, the largest number. */
    CLOCK(21, clock.time = 10.0, clock.step_length = 0.0);
    EXPECT(run, limno_mark(run, &clock), LIMNO_OK);
    lend_universe(run, &all);
    EXPECT(run, limno_enter(run), LIMNO_OK);
    CLOCK((uint64_t)1 << 63, clock.time = 1e300);
    EXPECT(run, limno_mark(run, &clock), LIMNO_OK);
    lend_universe(run, &all);
    EXPECT(run, limno_enter(run), LIMNO_OK);
    CLOCK(UINT64_MAX - 1, clock.time = 1.7e308);
    EXPECT(run, limno_mark(run, &clock), LIMNO_OK);
    lend_universe(run, &all);
    EXPECT(run, limno_enter(run), LIMNO_OK);
    EXPECT(run, limno_close(run), LIMNO_OK);

    struct sheet *sheet = read_back(series_path("clocks"), "run");
    CHECK(sheet->rows == 4, "found %zu rows", sheet->rows);
    CELL(sheet, 21, "steps", 17);
    CELL(sheet, 21, "time", 10);
    CELL(sheet, 21, "black_holes", HOLES);
    CELL(sheet, (uint64_t)1 << 63, "black_holes", HOLES);
    CELL(sheet, UINT64_MAX - 1, "baryon_mass_drift", 0);

    /* Where the universe expands the time has its bounds. */
    limno_run *expanding = open_alone("[units]\nlength = \"a kpc\"\nmass = \"Msun\"\nvelocity = \"km/s\"\n"
                                      "velocity_form = \"peculiar\"\n[cosmology]\nhubble = 70\nomega_matter = 0.3\nomega_lambda = 0.7\n"
                                      "[time]\ncoordinate = \"a\"\n[volume]\nnone = true\n[gauges]\nmass_budget = true\n",
                                      "expanding");
    const double wrong[] = {0.0, -0.5, 1e10, -0.0};
    for (size_t i = 0; i < sizeof wrong / sizeof *wrong; i++) {
        clock = clock_of(1, wrong[i]);
        REFUSED(expanding, limno_mark(expanding, &clock), LIMNO_BAD_CLOCK, "step 1", "scale factor");
        EXPECT(expanding, limno_enter(expanding), LIMNO_OK);
    }
    clock = clock_of(1, 0.05);
    EXPECT(expanding, limno_mark(expanding, &clock), LIMNO_OK);
    lend_universe(expanding, &all);
    EXPECT(expanding, limno_enter(expanding), LIMNO_OK);
    EXPECT(expanding, limno_close(expanding), LIMNO_OK);
    sheet = read_back(series_path("expanding"), "run");
    CHECK(sheet->rows == 1, "found %zu rows", sheet->rows);
    CELL(sheet, 1, "scale_factor", 0.05);
    CELL(sheet, 1, "steps", 5);
}
