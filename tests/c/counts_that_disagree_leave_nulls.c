/*
 * Fields of a species lent with different counts: the second is refused, what needs it is null and never a sum over
 * the wrong elements, and the text names both counts.
 *
 * variants: valgrind
 */
#define _GNU_SOURCE
#include "check.h"

static struct universe all;

static void test(void)
{
    const size_t bytes = sizeof all.gas[0];
    fill_universe(&all);
    limno_run *run = open_alone(check_config, "counts");
    GOOD_STEP(run, 1, &all);

    EXPECT(run, mark_step(run, 2), LIMNO_OK);
    EXPECT(run, limno_lend(run, "gas", "mass", &all.gas[0].mass, GASES, bytes, LIMNO_F32), LIMNO_OK);
    REFUSED(run, limno_lend(run, "gas", "star_formation_rate", &all.gas[0].rate, GASES - 1, bytes, LIMNO_F32),
            LIMNO_BAD_ARGUMENT, "gas star_formation_rate", "299", "300");
    /* Other species have their own count. */
    lend_stars(run, all.star, STARS);
    lend_holes(run, all.hole, HOLES - 1);
    EXPECT(run, limno_enter(run), LIMNO_OK);

    /* None lent first, some later, is no agreement either. */
    EXPECT(run, mark_step(run, 3), LIMNO_OK);
    EXPECT(run, limno_lend(run, "gas", "mass", NULL, 0, bytes, LIMNO_F32), LIMNO_OK);
    REFUSED(run, limno_lend(run, "gas", "star_formation_rate", &all.gas[0].rate, 1, bytes, LIMNO_F32),
            LIMNO_BAD_ARGUMENT, "gas star_formation_rate");
    lend_stars(run, all.star, STARS);
    EXPECT(run, limno_enter(run), LIMNO_OK);

    /* After a sounding another count is right. */
    EXPECT(run, mark_step(run, 4), LIMNO_OK);
    lend_gas(run, all.gas, 100);
    EXPECT(run, limno_sound(run, "gas"), LIMNO_OK);
    lend_gas(run, all.gas + 100, GASES - 100);
    lend_stars(run, all.star, STARS);
    lend_holes(run, all.hole, HOLES);
    EXPECT(run, limno_enter(run), LIMNO_OK);
    GOOD_STEP(run, 5, &all);
    EXPECT(run, limno_close(run), LIMNO_OK);

    struct sheet *sheet = read_back(series_path("counts"), "run");
    for (uint64_t step = 2; step <= 3; step++) {
        NULL_CELL(sheet, step, "mass_gas");
        NULL_CELL(sheet, step, "star_formation_rate");
        CELL(sheet, step, "ranks_in_error", 1);
    }
    CELL(sheet, 2, "black_holes", HOLES - 1);
    SAME_ROW(sheet, 4, sheet, 5, "step time stellar_mass_formed stars_formed star_formation_rate_from_stars "
                                 "star_formation_formed_over_expected");
    CELL(sheet, 5, "stars_formed", 4); /* births at every quarter */
}
