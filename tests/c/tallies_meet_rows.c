/* Nothing is lost or counted twice between tallies on many threads and rows that are entered on another. */
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

static double column_total(const struct sheet *sheet, const char *column)
{
    double total = 0;
    for (size_t r = 1; r <= sheet->rows; r++) total += strtod(sheet->cell[r * sheet->columns + (size_t)column_of(sheet, column)], NULL);
    return total;
}

static void *enter_steps(void *stop)
{
    uint64_t step = 0;
    while (!*(volatile int *)stop) {
        EXPECT(run, mark_step(run, ++step), LIMNO_OK);
        EXPECT(run, limno_enter(run), LIMNO_OK);
    }
    EXPECT(run, mark_step(run, ++step), LIMNO_OK);
    EXPECT(run, limno_enter(run), LIMNO_OK);
    return NULL;
}

static void test(void)
{
    volatile int stop = 0;
    pthread_t thread;
    run = open_alone(CHECK_BASE "[channels]\nnames = [\"kicks\"]\n[elements]\nnames = [\"O\", \"Fe\"]\n" CHECK_GAUGES, "meet");
    pthread_create(&thread, NULL, enter_steps, (void *)&stop);
    tally_from_threads();
    stop = 1;
    pthread_join(thread, NULL);
    EXPECT(run, limno_close(run), LIMNO_OK);
    struct sheet *sheet = read_back(series_path("meet"), "run");
    CHECK(column_total(sheet, "tally_wind_events") == 3 * THREADS * BATCHES / 2, "found %g", column_total(sheet, "tally_wind_events"));
    CHECK(column_total(sheet, "tally_wind_mass_O") == 9 * THREADS * BATCHES / 2, "found %g", column_total(sheet, "tally_wind_mass_O"));
}
