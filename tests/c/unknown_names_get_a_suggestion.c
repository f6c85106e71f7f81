/*
 * A species, field or channel that does not exist is refused with the name it most likely meant, or with those there
 * are; nothing is measured of half a species.
 *
 * variants: valgrind
 */
#define _GNU_SOURCE
#include "check.h"

static struct universe all;

static void test(void)
{
    const size_t bytes = sizeof all.gas[0];
    limno_array array = LIMNO_ARRAY_INIT;
    limno_tally_batch batch = LIMNO_TALLY_BATCH_INIT;
    int32_t layout;
    double one = 1.0;
    char *endless = malloc(3 << 20);
    fill_universe(&all);
    limno_run *run = open_alone(check_config, "names");

    GOOD_STEP(run, 1, &all);
    EXPECT(run, mark_step(run, 2), LIMNO_OK);
    lend_stars(run, all.star, STARS);
    lend_holes(run, all.hole, HOLES);
    EXPECT(run, limno_lend(run, "gas", "mass", &all.gas[0].mass, GASES, bytes, LIMNO_F32), LIMNO_OK);
    REFUSED(run, limno_lend(run, "gas", "star_formation_rat", &all.gas[0].rate, GASES, bytes, LIMNO_F32),
            LIMNO_UNKNOWN_NAME, "field", "star_formation_rat", "did you mean", "star_formation_rate");
    EXPECT(run, limno_enter(run), LIMNO_OK);

    EXPECT(run, mark_step(run, 3), LIMNO_OK);
    REFUSED(run, limno_lend(run, "gaz", "mass", &all.gas[0].mass, GASES, bytes, LIMNO_F32), LIMNO_UNKNOWN_NAME, "species",
            "gaz", "did you mean \"gas\"");
    REFUSED(run, limno_lend(run, "Star", "mass", &all.star[0].mass, STARS, sizeof all.star[0], LIMNO_F64),
            LIMNO_UNKNOWN_NAME, "did you mean \"star\"");
    REFUSED(run, limno_lend(run, "unobtainium", "mass", &one, 1, 8, LIMNO_F64), LIMNO_UNKNOWN_NAME, "unobtainium", "gas",
            "star", "black_hole", "dark_matter", "wind");
    REFUSED(run, limno_lend(run, "", "mass", &one, 1, 8, LIMNO_F64), LIMNO_UNKNOWN_NAME, "species");
    REFUSED(run, limno_lend(run, "dark_matter", "charm", &one, 1, 8, LIMNO_F64), LIMNO_UNKNOWN_NAME, "charm", "position",
            "metallicity");
    REFUSED(run, limno_sound(run, "gaas"), LIMNO_UNKNOWN_NAME, "did you mean \"gas\"");
    EXPECT(run, limno_enter(run), LIMNO_OK);

    array.scalar = LIMNO_F64;
    REFUSED(run, limno_describe(run, "gas", "masss", &array, &layout), LIMNO_UNKNOWN_NAME, "did you mean \"mass\"");
    batch.channel = "wint", batch.count = 1, batch.mass = &one;
    REFUSED(run, limno_tally(run, &batch), LIMNO_UNKNOWN_NAME, "channel", "did you mean \"wind\"", "[channels]");
    batch.channel = "";
    REFUSED(run, limno_tally(run, &batch), LIMNO_UNKNOWN_NAME, "channel");

    /* Names that are no text, and one that does not seem to end. */
    EXPECT(run, mark_step(run, 4), LIMNO_OK);
    lend_universe(run, &all);
    REFUSED(run, limno_lend(run, "gas", "\xff\xfe", &one, 1, 8, LIMNO_F64), LIMNO_BAD_ARGUMENT, "`field`", "UTF-8");
    REFUSED(run, limno_lend(run, "\xc3(", "mass", &one, 1, 8, LIMNO_F64), LIMNO_BAD_ARGUMENT, "`species`", "UTF-8");
    memset(endless, 'a', (3 << 20) - 1), endless[(3 << 20) - 1] = 0;
    REFUSED(run, limno_lend(run, endless, "mass", &one, 1, 8, LIMNO_F64), LIMNO_BAD_ARGUMENT, "`species`");
    endless[100000] = 0;
    REFUSED(run, limno_sound(run, endless), LIMNO_UNKNOWN_NAME, "species");
    CHECK(strlen(limno_last_error(run)) < 2000, "the text repeats a name of 100000 letters");
    EXPECT(run, limno_enter(run), LIMNO_OK);
    GOOD_STEP(run, 5, &all);
    EXPECT(run, limno_close(run), LIMNO_OK);
    free(endless);

    struct sheet *sheet = read_back(series_path("names"), "run");
    NULL_CELL(sheet, 2, "star_formation_rate");
    CELL(sheet, 2, "black_holes", HOLES);
    NULL_CELL(sheet, 3, "mass_gas");
    NULL_CELL(sheet, 3, "mass_star");
    NULL_CELL(sheet, 3, "baryon_mass");
    CELL(sheet, 5, "baryon_mass_drift", 0);
    CELL(sheet, 5, "tally_wind_events", 0);
    CELL(sheet, 5, "ranks_in_error", 0);
    CHECK(has_event(series_path("names"), "star_formation_rat"), "the row's event does not say what happened");
}
