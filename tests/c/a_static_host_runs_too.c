/*
 * A host that links the static library gets the same.
 *
 * link: static
 */
#define _GNU_SOURCE
#include "check.h"

static void test(void)
{
    static struct universe all;
    fill_universe(&all);
    limno_run *run = open_alone(check_config, "static");
    for (uint64_t step = 1; step <= 3; step++) GOOD_STEP(run, step, &all);
    EXPECT(run, limno_close(run), LIMNO_OK);
    struct sheet *sheet = read_back(series_path("static"), "run");
    CHECK(sheet->rows == 3, "found %zu rows", sheet->rows);
    CELL(sheet, 3, "black_holes", HOLES);
    CELL(sheet, 3, "baryon_mass_drift", 0);
}
