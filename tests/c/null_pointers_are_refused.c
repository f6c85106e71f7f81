/*
 * NULL in the place of any pointer is refused with the name of the argument; the row of that step has nulls where
 * something is missing, and the next step is measured as usual.
 *
 * variants: valgrind sanitizer
 */
#define _GNU_SOURCE
#include "check.h"

static struct universe all;

static void test(void)
{
    limno_clock clock = clock_of(1, 1.0);
    limno_array array = LIMNO_ARRAY_INIT;
    int32_t layout = -1, separate = -1;
    float *mass = &all.gas[0].mass;
    double *x = all.gas[0].position;
    const size_t bytes = sizeof all.gas[0];
    const void *none[3] = {NULL, NULL, NULL}, *some[3] = {x, NULL, x};
    fill_universe(&all);
    limno_run *run = open_alone(check_config, "null");

    REFUSED(run, limno_due(run, NULL, &layout), LIMNO_BAD_ARGUMENT, "`clock` is null");
    REFUSED(run, limno_due(run, &clock, NULL), LIMNO_BAD_ARGUMENT, "`due`");
    REFUSED(run, limno_how_it_stands(run, NULL), LIMNO_BAD_ARGUMENT, "`standing` is null");
    REFUSED(run, limno_mark(run, NULL), LIMNO_BAD_ARGUMENT, "`clock` is null");
    EXPECT(run, limno_enter(run), LIMNO_OK); /* the step in error is over */
    GOOD_STEP(run, 1, &all);

    array.scalar = LIMNO_F32, array.stride = (ptrdiff_t)bytes;
    REFUSED(run, limno_describe(run, NULL, "mass", &array, &layout), LIMNO_BAD_ARGUMENT, "`species` is null");
    REFUSED(run, limno_describe(run, "gas", NULL, &array, &layout), LIMNO_BAD_ARGUMENT, "`field` is null");
    REFUSED(run, limno_describe(run, "gas", "mass", NULL, &layout), LIMNO_BAD_ARGUMENT, "`array` is null");
    REFUSED(run, limno_describe(run, "gas", "mass", &array, NULL), LIMNO_BAD_ARGUMENT, "`layout`");
    EXPECT(run, limno_describe(run, "gas", "mass", &array, &layout), LIMNO_OK);
    CHECK(layout == 0, "a layout that was refused took a number: %d", (int)layout);
    array.scalar = LIMNO_F64, array.components = 3, array.arrays = none;
    EXPECT(run, limno_describe(run, "gas", "position", &array, &separate), LIMNO_OK);

    /* Each refusal on a step of its own: what it was for is null, what has nothing to do with it is there. */
    for (uint64_t step = 2; step <= 10; step++) {
        EXPECT(run, mark_step(run, step), LIMNO_OK);
        lend_stars(run, all.star, STARS);
        lend_holes(run, all.hole, HOLES);
        if (step != 10) EXPECT(run, limno_lend(run, "gas", "star_formation_rate", &all.gas[0].rate, GASES, bytes, LIMNO_F32), LIMNO_OK);
        switch (step) {
        case 2: REFUSED(run, limno_lend(run, "gas", "mass", NULL, GASES, bytes, LIMNO_F32), LIMNO_BAD_ARGUMENT, "gas mass", "null", "300"); break;
        case 3: REFUSED(run, limno_lend(run, "gas", NULL, mass, GASES, bytes, LIMNO_F32), LIMNO_BAD_ARGUMENT, "`field` is null"); break;
        case 4: REFUSED(run, limno_lend_array(run, "gas", "mass", NULL, GASES), LIMNO_BAD_ARGUMENT, "`array` is null"); break;
        case 5: REFUSED(run, limno_lend_vector(run, "gas", "position", NULL, GASES, bytes, LIMNO_F64), LIMNO_BAD_ARGUMENT, "gas position", "null"); break;
        case 6: REFUSED(run, limno_lend_xyz(run, "gas", "position", x, x + 1, NULL, GASES, bytes, LIMNO_F64), LIMNO_BAD_ARGUMENT, "gas position", "null"); break;
        case 7: REFUSED(run, limno_lend_again(run, layout, NULL, GASES), LIMNO_BAD_ARGUMENT, "gas mass", "null"); break;
        case 8: REFUSED(run, limno_lend_again_arrays(run, separate, NULL, GASES), LIMNO_BAD_ARGUMENT, "gas position", "null"); break;
        case 9: REFUSED(run, limno_lend_again_arrays(run, separate, some, GASES), LIMNO_BAD_ARGUMENT, "gas position", "null"); break;
        case 10: REFUSED(run, limno_lend(run, NULL, "star_formation_rate", mass, GASES, bytes, LIMNO_F32), LIMNO_BAD_ARGUMENT, "`species` is null"); break;
        }
        if (step == 10) REFUSED(run, limno_sound(run, NULL), LIMNO_BAD_ARGUMENT, "`species` is null");
        EXPECT(run, limno_enter(run), LIMNO_OK);
    }

    /* Batches. */
    limno_tally_batch batch = LIMNO_TALLY_BATCH_INIT;
    REFUSED(run, limno_tally(run, NULL), LIMNO_BAD_ARGUMENT, "`batch` is null");
    REFUSED(run, limno_tally(run, &batch), LIMNO_BAD_ARGUMENT, "`channel` is null");
    batch.channel = "wind", batch.count = 3; /* three events of which nothing else is known */
    EXPECT(run, limno_tally(run, &batch), LIMNO_OK);

    GOOD_STEP(run, 11, &all);
    EXPECT(run, limno_close(run), LIMNO_OK);

    struct sheet *sheet = read_back(series_path("null"), "run");
    CHECK(sheet->rows == 11, "found %zu rows", sheet->rows);
    SAME_ROW(sheet, 1, sheet, 11, "step time ranks_in_error tally_wind_events stellar_mass_formed stars_formed steps "
                                  "star_formation_rate_from_stars star_formation_formed_over_expected baryon_mass_drift");
    CELL(sheet, 11, "tally_wind_events", 3);
    CELL(sheet, 11, "tally_wind_mass", 0);
    CELL(sheet, 11, "baryon_mass_drift", 0);
    for (uint64_t step = 2; step <= 10; step++) {
        NULL_CELL(sheet, step, "mass_gas");
        NULL_CELL(sheet, step, "baryon_mass");
        CELL(sheet, step, "black_holes", HOLES);
        CELL(sheet, step, "ranks_in_error", 1);
    }
    NULL_CELL(sheet, 10, "star_formation_rate");
}
