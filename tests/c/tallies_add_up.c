/*
 * Tallies come at any time and from any thread; they add up exactly until the next row, over steps that are not
 * measured too; a batch with a number that is not finite is refused whole.
 *
 * variants: traps
 */
#define _GNU_SOURCE
#include "check.h"

#include <limits.h>
#include <pthread.h>

#define THREADS 6
#define BATCHES 400

static limno_run *run;
static const double share = 0.1; /* not a binary fraction: only exact sums agree with 0.1 rounded once from all */

static void *tally_much(void *number)
{
    long thread = (long)number;
    for (int i = 0; i < BATCHES; i++) {
        double mass[3] = {share, 1.0, 1e-12}, energy[3] = {1e60, 1.0, -1e60}, metals[6] = {1, 2, 3, 4, 5, 6};
        limno_tally_batch batch = LIMNO_TALLY_BATCH_INIT;
        batch.channel = i % 2 ? "wind" : "kicks", batch.count = 3;
        batch.mass = mass, batch.energy = energy, batch.elements = metals;
        EXPECT(run, limno_tally(run, &batch), LIMNO_OK);
        if (thread == 0 && i % 50 == 0) {
            batch.channel = "winds";
            REFUSED(run, limno_tally(run, &batch), LIMNO_UNKNOWN_NAME, "winds");
        }
    }
    return NULL;
}

static void tally_from_threads(void)
{
    pthread_t threads[THREADS];
    pthread_attr_t small;
    pthread_attr_init(&small);
    pthread_attr_setstacksize(&small, (size_t)PTHREAD_STACK_MIN + (48 << 10)); /* hosts do have such threads */
    for (long i = 0; i < THREADS; i++) pthread_create(&threads[i], &small, tally_much, (void *)i);
    for (long i = 0; i < THREADS; i++) pthread_join(threads[i], NULL);
    pthread_attr_destroy(&small);
}

static void test(void)
{
    double numbers[4] = {1, 2, 3, 4};
    limno_tally_batch batch = LIMNO_TALLY_BATCH_INIT;
    run = open_alone(CHECK_BASE "[cadence]\nevery_steps = 10\n[channels]\nnames = [\"kicks\"]\n[elements]\nnames = [\"O\", \"Fe\"]\n"
                                CHECK_GAUGES, "tallies");
    /* Before the first step, from many threads. */
    tally_from_threads();
    EXPECT(run, mark_step(run, 1), LIMNO_OK);
    EXPECT(run, limno_enter(run), LIMNO_OK);

    /* In every place of steps that are not measured. */
    batch.channel = "stellar_return", batch.mass = numbers;
    for (uint64_t step = 2; step <= 10; step++) {
        batch.count = 1;
        EXPECT(run, limno_tally(run, &batch), LIMNO_OK);
        EXPECT(run, mark_step(run, step), LIMNO_OK);
        batch.count = 2;
        EXPECT(run, limno_tally(run, &batch), LIMNO_OK);
        EXPECT(run, limno_enter(run), LIMNO_OK);
    }
    /* Refused whole: nothing of it counts. */
    batch.count = 4;
    for (int i = 0; i < 3; i++) {
        const double wrong[3] = {NAN, INFINITY, -INFINITY};
        numbers[2] = wrong[i];
        REFUSED(run, limno_tally(run, &batch), LIMNO_BAD_ARGUMENT, "stellar_return", "mass", "event 2", "nothing was tallied");
    }
    numbers[2] = 3;
    double places[12] = {0, 0, 0, 0, NAN, 0, 0, 0, 0, 0, 0, 0};
    batch.position = places;
    REFUSED(run, limno_tally(run, &batch), LIMNO_BAD_ARGUMENT, "position", "event 1");
    places[4] = 0;
    double elements[8] = {0, 0, 0, 0, 0, 0, 0, INFINITY};
    batch.elements = elements;
    REFUSED(run, limno_tally(run, &batch), LIMNO_BAD_ARGUMENT, "elements", "event 3");
    /* A host that counts elements otherwise than the config is told, before its numbers are read. */
    batch.elements = (double *)8, batch.elements_each = 3;
    REFUSED(run, limno_tally(run, &batch), LIMNO_BAD_ARGUMENT, "stellar_return", "3 numbers", "names 2", "elements_each");
    batch.elements = elements, batch.elements_each = 2;
    REFUSED(run, limno_tally(run, &batch), LIMNO_BAD_ARGUMENT, "elements", "event 3");
    batch.elements_each = 0;
    batch.elements = NULL, batch.metals = (double *)((char *)numbers + 1);
    REFUSED(run, limno_tally(run, &batch), LIMNO_BAD_ARGUMENT, "metals", "misaligned");
    batch.metals = NULL;
    const size_t counts[] = {SIZE_MAX, SIZE_MAX / 2, SIZE_MAX / 8, SIZE_MAX / 16, SIZE_MAX / 24};
    for (size_t i = 0; i < sizeof counts / sizeof *counts; i++) {
        batch.count = counts[i];
        REFUSED(run, limno_tally(run, &batch), LIMNO_BAD_ARGUMENT, "stellar_return", "events");
        batch.mass = NULL, batch.position = NULL;
        REFUSED(run, limno_tally(run, &batch), LIMNO_BAD_ARGUMENT, "stellar_return", "events");
        batch.mass = numbers, batch.position = places;
    }
    batch.count = 0, batch.mass = (double *)1;
    EXPECT(run, limno_tally(run, &batch), LIMNO_OK); /* nothing happened */

    for (uint64_t step = 11; step <= 20; step++) {
        EXPECT(run, mark_step(run, step), LIMNO_OK);
        EXPECT(run, limno_enter(run), LIMNO_OK);
    }
    EXPECT(run, limno_close(run), LIMNO_OK);

    struct sheet *sheet = read_back(series_path("tallies"), "run");
    CHECK(sheet->rows == 3, "found %zu rows", sheet->rows);
    const double half = THREADS * BATCHES / 2;
    CELL(sheet, 1, "tally_wind_events", 3 * half);
    CELL(sheet, 1, "tally_kicks_events", 3 * half);
    /* Large amounts that cancel leave the small ones exactly. */
    CELL(sheet, 1, "tally_wind_energy", cell(sheet, 1, "tally_kicks_energy") ? strtod(cell(sheet, 1, "tally_kicks_energy"), NULL) : 0);
    CHECK(strtod(cell(sheet, 1, "tally_wind_energy"), NULL) > 0, "cancelled amounts took the rest with them");
    double mass = strtod(cell(sheet, 1, "tally_wind_mass"), NULL);
    CHECK(fabs(mass / (half * (share + 1.0 + 1e-12)) - 1) < 1e-15, "found %.17g", mass);
    CELL(sheet, 1, "tally_wind_mass_O", half * 9);
    CELL(sheet, 1, "tally_wind_mass_Fe", half * 12);
    CELL(sheet, 10, "tally_stellar_return_events", 27);
    CELL(sheet, 10, "tally_stellar_return_mass", 9 * 1 + 9 * 3);
    CELL(sheet, 10, "tally_wind_events", 0);
    CELL(sheet, 20, "tally_stellar_return_events", 0);
    CELL(sheet, 20, "tally_stellar_return_mass", 0);
}
