/*
 * Structs state their size: absurd ones are refused, shorter ones of an older header are filled up with zeros, longer
 * ones of a newer header are taken as long as what is unknown is zero.
 *
 * variants: valgrind sanitizer
 */
#define _GNU_SOURCE
#include "check.h"

static const size_t absurd[] = {0, 1, 7, 8, 16, 23, 4097, 100000, SIZE_MAX, SIZE_MAX / 2};
#define EACH(sizes) for (size_t i = 0; i < sizeof(sizes) / sizeof *(sizes); i++)

static void test(void)
{
    union {
        size_t size;
        limno_clock clock;
        limno_array array;
        limno_tally_batch batch;
        limno_options options;
        limno_standing standing;
        char bytes[4096];
    } room;
    double value = 3.0;
    int32_t layout;
    limno_run *run = open_alone(check_config, "sizes"), *other = NULL;

#define START(member, ...) memset(&room, 0, sizeof room), room.member = (limno_##member)__VA_ARGS__
#define START_BATCH() memset(&room, 0, sizeof room), room.batch = (limno_tally_batch)LIMNO_TALLY_BATCH_INIT
    /* The clock: up to its time is the least. */
    EACH(absurd)
    {
        START(clock, LIMNO_CLOCK_INIT), room.clock.step = 1, room.size = absurd[i];
        REFUSED(run, limno_mark(run, &room.clock), LIMNO_BAD_ARGUMENT, "`clock`", "limno_clock", "_INIT");
        EXPECT(run, limno_enter(run), LIMNO_OK);
    }
    START(clock, LIMNO_CLOCK_INIT), room.clock.step = 2, room.clock.time = 2, room.clock.checkpoint = 77, room.size = 24;
    EXPECT(run, limno_mark(run, &room.clock), LIMNO_OK);
    EXPECT(run, limno_enter(run), LIMNO_OK);
    START(clock, LIMNO_CLOCK_INIT), room.clock.step = 3, room.clock.time = 3, room.size = 4096;
    EXPECT(run, limno_mark(run, &room.clock), LIMNO_OK);
    EXPECT(run, limno_enter(run), LIMNO_OK);
    room.clock.step = 4, room.bytes[4095] = 1;
    REFUSED(run, limno_mark(run, &room.clock), LIMNO_BAD_ARGUMENT, "`clock`", "understands");
    EXPECT(run, limno_enter(run), LIMNO_OK);
    room.bytes[4095] = 0, room.bytes[sizeof(limno_clock)] = 1;
    REFUSED(run, limno_mark(run, &room.clock), LIMNO_BAD_ARGUMENT, "`clock`", "understands");
    EXPECT(run, limno_enter(run), LIMNO_OK);
    REFUSED(run, limno_mark(run, (limno_clock *)(room.bytes + 4)), LIMNO_BAD_ARGUMENT, "`clock`", "misaligned");
    EXPECT(run, limno_enter(run), LIMNO_OK);

    /* The array. */
    EXPECT(run, mark_step(run, 5), LIMNO_OK);
    EACH(absurd)
    {
        START(array, LIMNO_ARRAY_INIT), room.array.scalar = LIMNO_F64, room.array.data = &value, room.size = absurd[i];
        REFUSED(run, limno_lend_array(run, "gas", "mass", &room.array, 1), LIMNO_BAD_ARGUMENT, "`array`", "limno_array");
        REFUSED(run, limno_describe(run, "gas", "mass", &room.array, &layout), LIMNO_BAD_ARGUMENT, "`array`");
    }
    EXPECT(run, limno_enter(run), LIMNO_OK);
    EXPECT(run, mark_step(run, 6), LIMNO_OK);
    START(array, LIMNO_ARRAY_INIT), room.array.scalar = LIMNO_F64, room.array.data = &value, room.size = 200;
    EXPECT(run, limno_lend_array(run, "gas", "mass", &room.array, 1), LIMNO_OK);
    room.bytes[199] = 1;
    REFUSED(run, limno_lend_array(run, "star", "mass", &room.array, 1), LIMNO_BAD_ARGUMENT, "`array`", "understands");
    EXPECT(run, limno_enter(run), LIMNO_OK);

    /* The batch. */
    EACH(absurd)
    {
        START_BATCH();
        room.batch.channel = "wind", room.size = absurd[i];
        REFUSED(run, limno_tally(run, &room.batch), LIMNO_BAD_ARGUMENT, "`batch`", "limno_tally_batch");
    }
    START_BATCH(), room.batch.channel = "wind", room.batch.count = 1;
    room.batch.mass = &value, room.batch.momentum = (double *)8, room.size = 32; /* of an older header: no momentum yet */
    EXPECT(run, limno_tally(run, &room.batch), LIMNO_OK);
    START_BATCH(), room.batch.channel = "wind", room.batch.count = 1;
    room.size = 120, room.bytes[119] = 1;
    REFUSED(run, limno_tally(run, &room.batch), LIMNO_BAD_ARGUMENT, "`batch`", "understands");

    /* The options. */
    EACH(absurd)
    {
        if (absurd[i] == 8 || absurd[i] == 16 || absurd[i] == 23) continue;
        START(options, LIMNO_OPTIONS_INIT), room.options.config_text = check_config, room.size = absurd[i];
        REFUSED(NULL, limno_open(LIMNO_VERSION, "c", series_path("never"), &room.options, &other), LIMNO_BAD_ARGUMENT,
                "`options`", "limno_options");
        CHECK(other == NULL, "a handle after a failure");
    }
    START(options, LIMNO_OPTIONS_INIT), room.options.config_text = check_config, room.size = 64, room.bytes[63] = 1;
    REFUSED(NULL, limno_open(LIMNO_VERSION, "c", series_path("never"), &room.options, &other), LIMNO_BAD_ARGUMENT,
            "understands");

    /* The standing, which is written into: never beyond what its size says. */
    EACH(absurd)
    {
        if (absurd[i] == 8 || absurd[i] == 16 || absurd[i] == 23) continue;
        START(standing, LIMNO_STANDING_INIT), room.size = absurd[i];
        REFUSED(run, limno_how_it_stands(run, &room.standing), LIMNO_BAD_ARGUMENT, "`standing`");
    }
    memset(&room, 0x55, sizeof room), room.size = 16;
    EXPECT(run, limno_how_it_stands(run, &room.standing), LIMNO_OK);
    CHECK(room.size == 16 && room.standing.asleep == 0 && room.bytes[15] == 0 && room.bytes[16] == 0x55,
          "more or less was written than 16 bytes");
    START(standing, LIMNO_STANDING_INIT), room.size = 4096;
    EXPECT(run, limno_how_it_stands(run, &room.standing), LIMNO_OK);
    CHECK(room.size == 4096 && room.standing.rows == 4 && room.standing.seconds > 0, "rows %llu",
          (unsigned long long)room.standing.rows);

    EXPECT(run, mark_step(run, 7), LIMNO_OK);
    EXPECT(run, limno_lend(run, "gas", "mass", &value, 1, 8, LIMNO_F64), LIMNO_OK);
    EXPECT(run, limno_enter(run), LIMNO_OK);
    EXPECT(run, limno_close(run), LIMNO_OK);
    struct sheet *sheet = read_back(series_path("sizes"), "run");
    CHECK(sheet->rows == 5, "found %zu rows", sheet->rows);
    CELL(sheet, 2, "checkpoint", 0);
    NULL_CELL(sheet, 5, "mass_gas");
    CELL(sheet, 6, "mass_gas", 3);
    NULL_CELL(sheet, 6, "mass_star");
    CELL(sheet, 7, "mass_gas", 3);
    CELL(sheet, 7, "tally_wind_mass", 3);
    CELL(sheet, 7, "tally_wind_events", 1);
    CELL(sheet, 7, "tally_wind_momentum", 0);
}
