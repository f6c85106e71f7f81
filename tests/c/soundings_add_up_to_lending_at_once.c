/*
 * A species sounded in pieces, each from the same scratch memory that is overwritten at once, gives the row that lending
 * all of it gives.
 *
 * variants: valgrind sanitizer
 */
#define _GNU_SOURCE
#include "check.h"

static struct universe all, scratch;

static void test(void)
{
    fill_universe(&all);
    limno_run *at_once = open_alone(check_config, "at_once"), *in_pieces = open_alone(check_config, "in_pieces");
    for (uint64_t step = 1; step <= 5; step++) {
        GOOD_STEP(at_once, step, &all);

        EXPECT(in_pieces, mark_step(in_pieces, step), LIMNO_OK);
        const size_t piece = 1 + (size_t)step * 37 % 101;
        for (size_t start = 0; start < GASES; start += piece) {
            size_t count = start + piece < GASES ? piece : GASES - start;
            memcpy(scratch.gas, all.gas + start, count * sizeof *all.gas);
            lend_gas(in_pieces, scratch.gas, count);
            if (start == 0) EXPECT(in_pieces, limno_sound(in_pieces, "star"), LIMNO_OK); /* nothing lent: nothing happens */
            EXPECT(in_pieces, limno_sound(in_pieces, "gas"), LIMNO_OK);
            memset(scratch.gas, 0xff, sizeof scratch.gas); /* NaN everywhere */
        }
        for (size_t i = 0; i < HOLES; i++) {
            struct hole one = all.hole[i];
            lend_holes(in_pieces, &one, 1);
            EXPECT(in_pieces, limno_sound(in_pieces, "black_hole"), LIMNO_OK);
            memset(&one, 0xff, sizeof one);
        }
        struct gas *none = NULL;
        EXPECT(in_pieces, limno_lend(in_pieces, "gas", "mass", none, 0, 4, LIMNO_F32), LIMNO_OK);
        EXPECT(in_pieces, limno_sound(in_pieces, "gas"), LIMNO_OK);
        lend_stars(in_pieces, all.star, STARS); /* these are sounded at the end */
        EXPECT(in_pieces, limno_enter(in_pieces), LIMNO_OK);
    }
    EXPECT(NULL, limno_close(at_once), LIMNO_OK);
    EXPECT(NULL, limno_close(in_pieces), LIMNO_OK);

    struct sheet *one = read_back(series_path("at_once"), "run"), *other = read_back(series_path("in_pieces"), "run");
    CHECK(one->rows == 5, "found %zu rows", one->rows);
    for (uint64_t step = 1; step <= 5; step++) SAME_ROW(one, step, other, step, NULL);
    CHECK(*cell(one, 3, "black_hole_eddington_ratio"), "nothing was measured");
    one = read_back(series_path("at_once"), "wind_shells"), other = read_back(series_path("in_pieces"), "wind_shells");
    for (uint64_t step = 1; step <= 5; step++) SAME_ROW(one, step, other, step, NULL);
    CHECK(strtod(cell(one, 3, "mass_outflow_rate"), NULL) > 0, "nothing flows");
}
