/*
 * The first step after a restart, in error on one rank: what was born since the last row of the leg before is null and
 * not half of it, and the accounts of the whole series go on.
 *
 * ranks: 2 3
 */
#define _GNU_SOURCE
#include <limnograph_mpi.h>

#include "check.h"

static struct universe all;

static void test(void)
{
    fill_universe(&all);
    for (int culprit = 0; culprit < 2; culprit++) {
        const char *name = culprit ? "other" : "first";
        limno_run *run = open_over(MPI_COMM_WORLD, check_config, name);
        for (uint64_t step = 1; step <= 3; step++) {
            limno_clock clock = clock_of(step, (double)step);
            clock.checkpoint = step == 3;
            EXPECT(run, limno_mark(run, &clock), LIMNO_OK);
            lend_share(run, &all, check_rank, check_ranks);
            EXPECT(run, limno_enter(run), LIMNO_OK);
        }
        EXPECT(run, limno_close(run), LIMNO_OK);
        MPI_Barrier(MPI_COMM_WORLD);
        run = open_over(MPI_COMM_WORLD, check_config, name);
        for (uint64_t step = 4; step <= 8; step++) {
            limno_clock clock = clock_of(step, (double)step);
            if (step == 4 && check_rank == culprit) clock.time = NAN;
            limno_status status = limno_mark(run, &clock);
            if (status == LIMNO_OK) lend_share(run, &all, check_rank, check_ranks);
            EXPECT(run, limno_enter(run), LIMNO_OK);
        }
        EXPECT(run, limno_close(run), LIMNO_OK);
        MPI_Barrier(MPI_COMM_WORLD);
        if (check_rank != 0) continue;
        struct sheet *sheet = read_back(series_path(name), "run");
        CHECK(sheet->rows == 8, "found %zu rows", sheet->rows);
        for (uint64_t step = 2; step <= 8; step++) {
            const char *born = cell(sheet, step, "stars_formed");
            CHECK(!*born || strtod(born, NULL) == 4, "stars formed up to step %llu: %s", (unsigned long long)step, born);
            if (step != 4 && step != 5) CHECK(*born, "stars formed up to step %llu are not known", (unsigned long long)step);
        }
        NULL_CELL(sheet, 4, "stars_formed");
        CELL(sheet, 8, "baryon_mass_drift", 0);
    }
}
