/*
 * Calls out of order say so and change nothing else: the marked step and every later one are measured as usual.
 *
 * variants: clang valgrind sanitizer
 */
#define _GNU_SOURCE
#include "check.h"

static struct universe all;

static void test(void)
{
    limno_clock clock = clock_of(1, 1.0);
    limno_array array = LIMNO_ARRAY_INIT;
    int32_t layout = -1, due = -1;
    fill_universe(&all);
    limno_run *run = open_alone(check_config, "order");

    /* Before the first mark. */
    REFUSED(run, limno_enter(run), LIMNO_BAD_ORDER, "limno_mark");
    REFUSED(run, limno_lend(run, "gas", "mass", &all.gas[0].mass, GASES, sizeof all.gas[0], LIMNO_F32), LIMNO_BAD_ORDER,
            "limno_mark");
    REFUSED(run, limno_sound(run, "gas"), LIMNO_BAD_ORDER, "limno_mark");
    array.scalar = LIMNO_F32, array.stride = sizeof all.gas[0];
    EXPECT(run, limno_describe(run, "gas", "mass", &array, &layout), LIMNO_OK);
    REFUSED(run, limno_lend_again(run, layout, &all.gas[0].mass, GASES), LIMNO_BAD_ORDER, "limno_mark");
    REFUSED(run, limno_lend_again(run, layout + 1, &all.gas[0].mass, GASES), LIMNO_BAD_ARGUMENT, "never described");
    REFUSED(run, limno_lend_again(run, -7, &all.gas[0].mass, GASES), LIMNO_BAD_ARGUMENT, "-7");

    /* Two marks: the first counts. */
    EXPECT(run, limno_due(run, &clock, &due), LIMNO_OK);
    CHECK(due == 1, "found %d", (int)due);
    EXPECT(run, limno_mark(run, &clock), LIMNO_OK);
    REFUSED(run, limno_mark(run, &clock), LIMNO_BAD_ORDER, "step 1", "limno_enter");
    clock = clock_of(2, 2.0);
    REFUSED(run, limno_mark(run, &clock), LIMNO_BAD_ORDER, "step 1", "limno_enter");
    lend_universe(run, &all);
    EXPECT(run, limno_enter(run), LIMNO_OK);
    REFUSED(run, limno_enter(run), LIMNO_BAD_ORDER, "limno_mark");

    GOOD_STEP(run, 2, &all);

    /* A mark in error may be made good. */
    clock = clock_of(3, NAN);
    REFUSED(run, limno_mark(run, &clock), LIMNO_BAD_CLOCK, "step 3", "finite");
    REFUSED(run, limno_lend(run, "gas", "mass", &all.gas[0].mass, GASES, sizeof all.gas[0], LIMNO_F32), LIMNO_BAD_ORDER,
            "clock");
    GOOD_STEP(run, 3, &all);
    EXPECT(run, limno_close(run), LIMNO_OK);

    /* After the last. */
    REFUSED(NULL, limno_close(run), LIMNO_CLOSED, "closed");
    REFUSED(NULL, limno_mark(run, &clock), LIMNO_CLOSED, "closed");
    REFUSED(NULL, limno_enter(run), LIMNO_CLOSED, "closed");

    struct sheet *sheet = read_back(series_path("order"), "run");
    CHECK(sheet->rows == 3, "found %zu rows", sheet->rows);
    for (uint64_t step = 1; step <= 3; step++) {
        double mass = 0;
        for (int i = 0; i < GASES; i++) mass += all.gas[i].mass; /* exact: whole numbers */
        CELL(sheet, step, "mass_gas", mass);
        CELL(sheet, step, "time", (double)step);
        CELL(sheet, step, "steps", 1);
    }
    CELL(sheet, 3, "stars_formed", 4); /* births at every quarter */
}
