/*
 * After limno_flush the rows of all steps entered are complete on every rank and soon in the series, while the run is
 * open; also between a mark and its enter, after a rank was in error, and when there is nothing to flush.
 *
 * ranks: 1 2 3
 */
#define _GNU_SOURCE
#include <limnograph_mpi.h>

#include "check.h"

static struct universe all;

static void check_complete(limno_run *run, uint64_t rows)
{
    limno_standing standing = LIMNO_STANDING_INIT;
    EXPECT(run, limno_how_it_stands(run, &standing), LIMNO_OK);
    CHECK(standing.rows == rows, "%llu rows of %llu", (unsigned long long)standing.rows, (unsigned long long)rows);
    if (check_rank != 0) return;
    for (int i = 0; i < 2000 && standing.rows_written < rows; i++, usleep(1000)) limno_how_it_stands(run, &standing);
    CHECK(standing.rows_written == rows, "%llu rows written of %llu", (unsigned long long)standing.rows_written,
          (unsigned long long)rows);
}

static void test(void)
{
    fill_universe(&all);
    limno_run *run = open_over(MPI_COMM_WORLD, check_config, "flushed");
    EXPECT(run, limno_flush(run), LIMNO_OK);
    for (uint64_t step = 1; step <= 7; step++) {
        GOOD_SHARED_STEP(run, step, &all);
        if (step == 3) continue;
        EXPECT(run, limno_flush(run), LIMNO_OK);
        check_complete(run, step);
    }
    EXPECT(run, limno_flush(run), LIMNO_OK);

    /* In the middle of a step: what is lent stays lent. */
    EXPECT(run, mark_step(run, 8), LIMNO_OK);
    lend_share(run, &all, check_rank, check_ranks);
    EXPECT(run, limno_flush(run), LIMNO_OK);
    check_complete(run, 7);
    EXPECT(run, limno_enter(run), LIMNO_OK);
    EXPECT(run, limno_flush(run), LIMNO_OK);
    check_complete(run, 8);

    /* A rank whose clock is refused takes part and flushes all the same. */
    if (check_ranks > 1) {
        limno_clock clock = clock_of(9, check_rank == 1 ? NAN : 9.0);
        EXPECT(run, limno_mark(run, &clock), check_rank == 1 ? LIMNO_BAD_CLOCK : LIMNO_OK);
        if (check_rank != 1) lend_share(run, &all, check_rank, check_ranks);
        EXPECT(run, limno_enter(run), LIMNO_OK);
        EXPECT(run, limno_flush(run), LIMNO_OK);
        check_complete(run, 9);
        /* One that enters without a mark does not know which step it stands for, and waits for nobody. */
        if (check_rank == 1) REFUSED(run, limno_enter(run), LIMNO_BAD_ORDER, "no step is marked");
        double begin = MPI_Wtime();
        EXPECT(run, limno_flush(run), LIMNO_OK);
        CHECK(MPI_Wtime() - begin < 5, "a flush took %g s", MPI_Wtime() - begin);
        MPI_Barrier(MPI_COMM_WORLD);
    }
    for (uint64_t step = 10; step <= 12; step++) {
        limno_clock clock = clock_of(step, (double)step);
        limno_mark(run, &clock);
        lend_share(run, &all, check_rank, check_ranks);
        limno_enter(run);
    }
    EXPECT(run, limno_flush(run), LIMNO_OK);
    EXPECT(run, limno_close(run), LIMNO_OK);
    REFUSED(NULL, limno_flush(run), LIMNO_CLOSED, "closed");
    REFUSED(NULL, limno_flush(NULL), LIMNO_CLOSED, "null");
    MPI_Barrier(MPI_COMM_WORLD);
    if (check_rank == 0) {
        struct sheet *sheet = read_back(series_path("flushed"), "run");
        for (uint64_t step = 1; step <= 8; step++) CELL(sheet, step, "black_holes", HOLES);
        CELL(sheet, 12, "black_holes", HOLES);
    }
}
