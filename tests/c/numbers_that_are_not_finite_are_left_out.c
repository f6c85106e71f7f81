/*
 * Elements with a number that is not finite are left out of what needs it and counted, by field; the status says so. Sums
 * of finite numbers that overflow on the way are counted too. Nothing else suffers.
 */
#define _GNU_SOURCE
#include "check.h"

static struct universe all, clean;

static void test(void)
{
    fill_universe(&all), fill_universe(&clean);
    limno_run *run = open_alone(check_config, "finite");
    GOOD_STEP(run, 1, &all);

    all.gas[3].mass = NAN, all.gas[5].mass = INFINITY, all.gas[5].rate = -INFINITY;
    all.gas[100].position[2] = NAN;
    all.hole[2].subgrid_mass = NAN;
    EXPECT(run, mark_step(run, 2), LIMNO_OK);
    lend_universe(run, &all);
    REFUSED(run, limno_enter(run), LIMNO_LEFT_OUT, "2 of gas mass", "1 of gas star_formation_rate", "1 of gas position",
            "1 of black_hole subgrid_mass");

    GOOD_STEP(run, 3, &clean);

    /* Each is finite, their product is not. */
    static double place[3] = {520, 500, 500}, speed[3] = {1e300, 0, 0}, mass = 1e300;
    EXPECT(run, mark_step(run, 4), LIMNO_OK);
    EXPECT(run, limno_lend_vector(run, "gas", "position", place, 1, 24, LIMNO_F64), LIMNO_OK);
    EXPECT(run, limno_lend_vector(run, "gas", "velocity", speed, 1, 24, LIMNO_F64), LIMNO_OK);
    EXPECT(run, limno_lend(run, "gas", "mass", &mass, 1, 8, LIMNO_F64), LIMNO_OK);
    REFUSED(run, limno_enter(run), LIMNO_LEFT_OUT, "overflowed");
    /* A sum may pass beyond the largest number and come back. */
    static double large[3] = {1.5e308, 1.5e308, -1.5e308};
    EXPECT(run, mark_step(run, 5), LIMNO_OK);
    EXPECT(run, limno_lend(run, "gas", "mass", large, 3, 8, LIMNO_F64), LIMNO_OK);
    EXPECT(run, limno_enter(run), LIMNO_OK);
    EXPECT(run, limno_close(run), LIMNO_OK);

    struct sheet *sheet = read_back(series_path("finite"), "run");
    double mass_left = 0;
    for (int i = 0; i < GASES; i++)
        if (i != 3 && i != 5) mass_left += clean.gas[i].mass;
    CELL(sheet, 2, "mass_gas", mass_left);
    CELL(sheet, 2, "not_finite_gas_mass", 2);
    CELL(sheet, 2, "not_finite_gas_star_formation_rate", 1);
    CELL(sheet, 2, "not_finite_gas_position", 1);
    CELL(sheet, 2, "not_finite_black_hole_subgrid_mass", 1);
    CELL(sheet, 2, "not_finite_star_mass", 0);
    CELL(sheet, 2, "black_holes", HOLES - 1);
    CELL(sheet, 3, "not_finite_gas_mass", 0);
    CELL(sheet, 3, "black_holes", HOLES);
    CELL(sheet, 4, "contributions_overflowed", 1);
    CELL(sheet, 5, "contributions_overflowed", 0);
    CELL(sheet, 5, "mass_gas", 1.5e308);
    CELL(sheet, 2, "ranks_in_error", 0);
}
