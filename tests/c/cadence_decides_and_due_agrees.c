/*
 * The cadence of the config decides which steps are measured; limno_due says beforehand what limno_mark will do, also in
 * the first step after a restart; a checkpoint is always measured and the grid goes on as before.
 */
#define _GNU_SOURCE
#include "check.h"

static struct universe all;
static uint64_t measured[1000];
static size_t count;

static void run_steps(limno_run *run, uint64_t from, uint64_t to, double length, uint64_t checkpoint, int every_other_synchronised)
{
    for (uint64_t step = from; step <= to; step++) {
        limno_clock clock = clock_of(step, length * (double)step);
        limno_standing before = LIMNO_STANDING_INIT, after = LIMNO_STANDING_INIT;
        int32_t due = -1;
        clock.step_length = length;
        clock.checkpoint = step == checkpoint;
        clock.synchronised = !every_other_synchronised || step % 2 == 0;
        EXPECT(run, limno_due(run, &clock, &due), LIMNO_OK);
        EXPECT(run, limno_how_it_stands(run, &before), LIMNO_OK);
        EXPECT(run, limno_mark(run, &clock), LIMNO_OK);
        if (due)
            lend_universe(run, &all);
        else /* not looked at: a step that is not measured costs next to nothing */
            EXPECT(run, limno_lend(run, "gas", "mass", (void *)8, 100, 8, LIMNO_F64), LIMNO_OK);
        EXPECT(run, limno_sound(run, "gas"), LIMNO_OK);
        EXPECT(run, limno_enter(run), LIMNO_OK);
        EXPECT(run, limno_how_it_stands(run, &after), LIMNO_OK);
        CHECK(after.rows - before.rows == (uint64_t)due, "step %llu: due %d, but %llu rows", (unsigned long long)step, (int)due,
              (unsigned long long)(after.rows - before.rows));
        if (due) measured[count++] = step;
    }
}

static void check_measured(int line, const char *name, const uint64_t *expected, size_t number)
{
    struct sheet *sheet = read_back(series_path(name), "run");
    int same = count == number && sheet->rows >= number;
    for (size_t i = 0; i < count && i < number; i++) same &= measured[i] == expected[i] && cell(sheet, expected[i], "step") != NULL;
    if (!same) {
        char text[400] = "";
        for (size_t i = 0; i < count && i < 40; i++)
            snprintf(text + strlen(text), sizeof text - strlen(text), " %llu", (unsigned long long)measured[i]);
        check_fail(line, "%s: measured:%s", name, text);
    }
    count = 0;
}
#define MEASURED(name, ...)                                                                       \
    do {                                                                                          \
        const uint64_t expected_[] = {__VA_ARGS__};                                               \
        check_measured(__LINE__, name, expected_, sizeof expected_ / sizeof *expected_);          \
    } while (0)

static void test(void)
{
    fill_universe(&all);
    const char *steps = CHECK_BASE "[cadence]\nevery_steps = 10\n" CHECK_GAUGES;
    limno_run *run = open_alone(steps, "steps");
    run_steps(run, 3, 45, 1.0, 0, 0);
    EXPECT(run, limno_close(run), LIMNO_OK);
    MEASURED("steps", 3, 10, 20, 30, 40);
    struct sheet *sheet = read_back(series_path("steps"), "run");
    CELL(sheet, 10, "steps", 7);
    CELL(sheet, 40, "steps", 10);
    CELL(sheet, 40, "stars_formed", 40 - 40); /* all are born before 10 */
    CELL(sheet, 10, "stars_formed", STARS - 13); /* births at every quarter, from 3 on */

    /* A restart from a checkpoint goes on in the same grid. */
    run = open_alone(steps, "restart");
    run_steps(run, 1, 14, 1.0, 12, 0);
    EXPECT(run, limno_close(run), LIMNO_OK);
    run = open_alone(steps, "restart");
    run_steps(run, 13, 21, 1.0, 0, 0);
    EXPECT(run, limno_close(run), LIMNO_OK);
    MEASURED("restart", 1, 10, 12, 20);

    run = open_alone(CHECK_BASE "[cadence]\nevery_time = 2.5\n" CHECK_GAUGES, "time");
    run_steps(run, 1, 12, 1.0, 6, 0);
    EXPECT(run, limno_close(run), LIMNO_OK);
    MEASURED("time", 1, 3, 5, 6, 8, 10);

    run = open_alone(CHECK_BASE "[cadence]\nevery_steps = 3\nsynchronised_only = true\n" CHECK_GAUGES, "together");
    run_steps(run, 1, 14, 1.0, 7, 1);
    EXPECT(run, limno_close(run), LIMNO_OK);
    /* Only even steps are synchronised; the checkpoint at 7 is measured all the same. */
    MEASURED("together", 2, 4, 6, 7, 10, 12);
}
