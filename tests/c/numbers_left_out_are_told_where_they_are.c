/*
 * A number that is not finite on one rank is told that rank alone, and counted in the row of all; the communicator that
 * the host opened with may be freed meanwhile, and events be tallied from threads that must not call MPI.
 *
 * ranks: 1 3
 */
#define _GNU_SOURCE
#include <limnograph_mpi.h>
#define CHECK_THREADS MPI_THREAD_FUNNELED
#include "check.h"

#include <pthread.h>

static limno_run *run;

static void *tally(void *nothing)
{
    double mass = 1;
    limno_tally_batch batch = LIMNO_TALLY_BATCH_INIT;
    batch.channel = "black_hole", batch.count = 1, batch.mass = &mass;
    for (int i = 0; i < 200; i++) EXPECT(run, limno_tally(run, &batch), LIMNO_OK);
    return nothing;
}

static void test(void)
{
    static struct universe all;
    pthread_t threads[3];
    MPI_Comm own;
    fill_universe(&all);
    MPI_Comm_dup(MPI_COMM_WORLD, &own);
    run = open_over(own, check_config, "told");
    MPI_Comm_free(&own);
    for (int t = 0; t < 3; t++) pthread_create(&threads[t], NULL, tally, NULL);
    GOOD_SHARED_STEP(run, 1, &all);
    all.gas[check_ranks - 1].mass = NAN;
    EXPECT(run, mark_step(run, 2), LIMNO_OK);
    lend_share(run, &all, check_rank, check_ranks);
    if (check_rank == check_ranks - 1)
        REFUSED(run, limno_enter(run), LIMNO_LEFT_OUT, "1 of gas mass");
    else
        EXPECT(run, limno_enter(run), LIMNO_OK);
    for (int t = 0; t < 3; t++) pthread_join(threads[t], NULL);
    all.gas[check_ranks - 1].mass = 1;
    GOOD_SHARED_STEP(run, 3, &all);
    EXPECT(run, limno_close(run), LIMNO_OK);
    if (check_rank == 0) {
        struct sheet *sheet = read_back(series_path("told"), "run");
        double events = 0;
        CELL(sheet, 2, "not_finite_gas_mass", 1);
        CELL(sheet, 2, "ranks_in_error", 0);
        CELL(sheet, 3, "not_finite_gas_mass", 0);
        for (uint64_t step = 1; step <= 3; step++) events += strtod(cell(sheet, step, "tally_black_hole_events"), NULL);
        CHECK(events == 600.0 * check_ranks, "found %g events", events);
    }
}
