/*
 * A call in error does nothing: what was lent before it is still lent, and lending rightly after it makes it good. What
 * stays missing is null, also where a gauge could do without it.
 */
#define _GNU_SOURCE
#include "check.h"

static struct universe all;

static void test(void)
{
    const size_t bytes = sizeof all.gas[0];
    void *odd = (char *)&all.gas[0].mass + 1;
    fill_universe(&all);
    limno_run *run = open_alone(check_config, "good");
    GOOD_STEP(run, 1, &all);
    GOOD_STEP(run, 2, &all);

    /* Wrong, then right. */
    EXPECT(run, mark_step(run, 3), LIMNO_OK);
    REFUSED(run, limno_lend(run, "gas", "mass", odd, GASES, bytes, LIMNO_F32), LIMNO_BAD_ARGUMENT, "aligned");
    REFUSED(run, limno_lend(run, "gas", "mas", odd, GASES, bytes, LIMNO_F32), LIMNO_UNKNOWN_NAME, "mass");
    REFUSED(run, limno_lend(run, "gaz", "mass", odd, GASES, bytes, LIMNO_F32), LIMNO_UNKNOWN_NAME, "gas");
    REFUSED(run, limno_lend(run, "aether", "mass", odd, GASES, bytes, LIMNO_F32), LIMNO_UNKNOWN_NAME, "species");
    lend_universe(run, &all);
    EXPECT(run, limno_lend(run, "dark_matter", "mass", NULL, 0, 8, LIMNO_F64), LIMNO_OK);
    EXPECT(run, limno_lend(run, "wind", "mass", NULL, 0, 8, LIMNO_F64), LIMNO_OK);
    EXPECT(run, limno_enter(run), LIMNO_OK);

    /* Right, then wrong. */
    EXPECT(run, mark_step(run, 4), LIMNO_OK);
    lend_universe(run, &all);
    REFUSED(run, limno_lend(run, "gas", "mass", NULL, GASES, bytes, LIMNO_F32), LIMNO_BAD_ARGUMENT, "null");
    REFUSED(run, limno_lend(run, "black_hole", "subgrid_mass", odd, HOLES, 8, LIMNO_F64), LIMNO_BAD_ARGUMENT, "aligned");
    REFUSED(run, limno_lend(run, "star", "birthmass", odd, STARS, 8, LIMNO_F64), LIMNO_UNKNOWN_NAME, "birth_mass");
    EXPECT(run, limno_enter(run), LIMNO_OK);

    /* A count that disagrees, and the right one. */
    EXPECT(run, mark_step(run, 5), LIMNO_OK);
    EXPECT(run, limno_lend(run, "gas", "mass", &all.gas[0].mass, GASES, bytes, LIMNO_F32), LIMNO_OK);
    REFUSED(run, limno_lend(run, "gas", "star_formation_rate", &all.gas[0].rate, GASES - 3, bytes, LIMNO_F32),
            LIMNO_BAD_ARGUMENT, "297");
    lend_universe(run, &all);
    EXPECT(run, limno_enter(run), LIMNO_OK);

    /* What a gauge can do without is missed all the same when the host meant to lend it. */
    EXPECT(run, mark_step(run, 6), LIMNO_OK);
    lend_gas(run, all.gas, GASES);
    lend_stars(run, all.star, STARS);
    EXPECT(run, limno_lend(run, "black_hole", "mass", &all.hole[0].mass, HOLES, sizeof all.hole[0], LIMNO_F64), LIMNO_OK);
    EXPECT(run, limno_lend(run, "black_hole", "accretion_rate", &all.hole[0].rate, HOLES, sizeof all.hole[0], LIMNO_F64),
           LIMNO_OK);
    REFUSED(run, limno_lend(run, "black_hole", "subgrid_mass", NULL, HOLES, 8, LIMNO_F64), LIMNO_BAD_ARGUMENT, "null");
    EXPECT(run, limno_enter(run), LIMNO_OK);
    /* Without that attempt the particle masses are what there is. */
    EXPECT(run, mark_step(run, 7), LIMNO_OK);
    EXPECT(run, limno_lend(run, "black_hole", "mass", &all.hole[0].mass, HOLES, sizeof all.hole[0], LIMNO_F64), LIMNO_OK);
    EXPECT(run, limno_lend(run, "black_hole", "accretion_rate", &all.hole[0].rate, HOLES, sizeof all.hole[0], LIMNO_F64),
           LIMNO_OK);
    EXPECT(run, limno_enter(run), LIMNO_OK);
    EXPECT(run, limno_close(run), LIMNO_OK);

    struct sheet *sheet = read_back(series_path("good"), "run");
    const char *const except = "step time ranks_in_error mass_dark_matter mass_wind stars_formed stellar_mass_formed "
                               "star_formation_rate_from_stars star_formation_formed_over_expected";
    for (uint64_t step = 3; step <= 5; step++) {
        SAME_ROW(sheet, 2, sheet, step, except);
        CELL(sheet, step, "stars_formed", 4);
        CELL(sheet, step, "ranks_in_error", step == 2 ? 0 : 1);
    }
    NULL_CELL(sheet, 6, "black_holes");
    NULL_CELL(sheet, 6, "black_hole_mass");
    double mass = 0;
    for (int i = 0; i < HOLES; i++) mass += all.hole[i].mass;
    CELL(sheet, 6, "mass_black_hole", mass);
    CHECK(fabs(strtod(cell(sheet, 7, "black_hole_mass"), NULL) / mass - 1) < 1e-14, "found %s", cell(sheet, 7, "black_hole_mass"));
}
