/*
 * Several runs in one process share nothing: their errors, rows and tallies stay their own, in any order of calls.
 */
#define _GNU_SOURCE
#include "check.h"

#define RUNS 5

static void test(void)
{
    static struct universe all;
    limno_run *run[RUNS];
    const char *names[RUNS] = {"first", "second", "third", "fourth", "fifth"};
    double mass[RUNS];
    limno_clock clock;
    fill_universe(&all);
    for (int i = 0; i < RUNS; i++) run[i] = open_alone(check_config, names[i]);
    for (int i = 0; i < RUNS; i++) CHECK(*limno_last_error(run[i]) == 0, "found: %s", limno_last_error(run[i]));

    for (uint64_t step = 1; step <= 4; step++) {
        for (int i = 0; i < RUNS; i++) {
            clock = clock_of(step * 10 + (uint64_t)i, (double)step + i);
            EXPECT(run[i], limno_mark(run[i], &clock), LIMNO_OK);
        }
        for (int i = RUNS - 1; i >= 0; i--) {
            limno_tally_batch batch = LIMNO_TALLY_BATCH_INIT;
            mass[i] = 100.0 * i + (double)step;
            batch.channel = "wind", batch.count = 1, batch.mass = &mass[i];
            EXPECT(run[i], limno_tally(run[i], &batch), LIMNO_OK);
            EXPECT(run[i], limno_lend(run[i], "gas", "mass", &mass[i], 1, 8, LIMNO_F64), LIMNO_OK);
        }
        REFUSED(run[2], limno_lend(run[2], "gas", "colour", &mass[2], 1, 8, LIMNO_F64), LIMNO_UNKNOWN_NAME, "colour");
        CHECK(!strstr(limno_last_error(run[1]), "colour"), "the error of one run is told of another");
        for (int i = 0; i < RUNS; i++) EXPECT(run[i], limno_enter(run[i]), LIMNO_OK);
    }
    const int order[RUNS] = {3, 0, 4, 2, 1};
    for (int i = 0; i < RUNS; i++) EXPECT(NULL, limno_close(run[order[i]]), LIMNO_OK);
    for (int i = 0; i < RUNS; i++) {
        struct sheet *sheet = read_back(series_path(names[i]), "run");
        CHECK(sheet->rows == 4, "found %zu rows", sheet->rows);
        for (uint64_t step = 1; step <= 4; step++) {
            uint64_t number = step * 10 + (uint64_t)i;
            CELL(sheet, number, "time", (double)step + i);
            CELL(sheet, number, "mass_gas", 100.0 * i + (double)step);
            CELL(sheet, number, "tally_wind_mass", 100.0 * i + (double)step);
        }
    }
}
