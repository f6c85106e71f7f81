/*
 * When limno_enter returns from a checkpoint on rank 0 the row is in the series, complete, whatever the cadence says and
 * whatever is still in flight; also when another rank, or rank 0 itself, could not take part. After a restart on another
 * number of ranks all accounts go on exactly.
 *
 * ranks: 2 3 4
 */
#define _GNU_SOURCE
#include <limnograph_mpi.h>

#include "check.h"

static struct universe all;

static void tally_one(limno_run *run)
{
    double mass = check_rank + 1.0;
    limno_tally_batch batch = LIMNO_TALLY_BATCH_INIT;
    batch.channel = "wind", batch.count = 1, batch.mass = &mass;
    EXPECT(run, limno_tally(run, &batch), LIMNO_OK);
}

static void step_once(limno_run *run, uint64_t step, int checkpoint, int errs, int rank, int ranks)
{
    limno_clock clock = clock_of(step, errs ? NAN : (double)step);
    clock.checkpoint = checkpoint;
    tally_one(run);
    EXPECT(run, limno_mark(run, &clock), errs ? LIMNO_BAD_CLOCK : LIMNO_OK);
    if (!errs) lend_share(run, &all, rank, ranks);
    EXPECT(run, limno_enter(run), LIMNO_OK);
}

static void test(void)
{
    const double each = check_ranks * (check_ranks + 1) / 2.0;
    const char *config = CHECK_BASE "[cadence]\nevery_steps = 10\n" CHECK_GAUGES;
    fill_universe(&all);
    for (int culprit = -1; culprit < 2; culprit++) {
        char name[32];
        snprintf(name, sizeof name, "run%d", culprit + 1);
        limno_run *run = open_over(MPI_COMM_WORLD, config, name);
        for (uint64_t step = 1; step <= 17; step++) step_once(run, step, step == 17, step == 17 && check_rank == culprit, check_rank, check_ranks);
        if (check_rank == 0) { /* while the run is open, and the others may still be on their way */
            struct sheet *sheet = read_back(series_path(name), "run");
            CHECK(sheet->rows == 3, "found %zu rows", sheet->rows);
            CELL(sheet, 17, "checkpoint", 1);
            CELL(sheet, 17, "time", 17);
            CELL(sheet, 17, "tally_wind_mass", 7 * each);
            CELL(sheet, 17, "steps", 7);
            CELL(sheet, 17, "black_holes", culprit < 0 ? HOLES : NAN);
        }
        /* The host is killed here, as far as the series can tell: rows after the checkpoint are done over. */
        for (uint64_t step = 18; step <= 25; step++) step_once(run, step, 0, 0, check_rank, check_ranks);
        EXPECT(run, limno_close(run), LIMNO_OK);
        MPI_Barrier(MPI_COMM_WORLD);

        MPI_Comm fewer;
        MPI_Comm_split(MPI_COMM_WORLD, check_rank == check_ranks - 1 ? MPI_UNDEFINED : 0, check_rank, &fewer);
        if (fewer != MPI_COMM_NULL) {
            run = open_over(fewer, config, name);
            for (uint64_t step = 18; step <= 31; step++) step_once(run, step, 0, 0, check_rank, check_ranks - 1);
            EXPECT(run, limno_close(run), LIMNO_OK);
            MPI_Comm_free(&fewer);
        }
        MPI_Barrier(MPI_COMM_WORLD);
        if (check_rank == 0) {
            struct sheet *sheet = read_back(series_path(name), "run");
            const double fewer_each = (check_ranks - 1) * check_ranks / 2.0;
            size_t twenties = 0;
            uint64_t last = 0;
            for (size_t r = 1; r <= sheet->rows; r++) {
                last = strtoull(sheet->cell[r * sheet->columns + (size_t)column_of(sheet, "step")], NULL, 10);
                twenties += last == 20;
            }
            CHECK(last == 30, "the last row is of step %llu", (unsigned long long)last);
            CHECK(twenties >= 1, "step 20 was not measured after the restart");
            /* The second row of the new leg, in either way of showing legs. */
            CELL(sheet, 30, "steps", 10);
            CELL(sheet, 30, "tally_wind_mass", 10 * fewer_each);
            CELL(sheet, 30, "baryon_mass_drift", 0);
            CELL(sheet, 30, "stars_formed", 0);
        }
    }
}
