/*
 * The rows of all ranks together equal, to the bit, those of one process that has everything: with particles dealt out
 * in turn, all on the last rank, and some ranks that lend nothing or a count of 0; with any number of threads.
 *
 * ranks: 1 2 3 4
 * variants: traps fast
 */
#define _GNU_SOURCE
#include <limnograph_mpi.h>

#include "check.h"

static struct universe all;

static void enter_parts(limno_run *run, int way)
{
    const int last = check_rank == check_ranks - 1;
    switch (way) {
    case 0: lend_share(run, &all, check_rank, check_ranks); break;
    case 1:
        if (last)
            lend_universe(run, &all);
        else if (check_rank % 2)
            lend_share(run, &all, 1 << 20, 1); /* counts of 0 */
        break;
    default: /* species on ranks of their own */
        if (check_rank == 0) lend_gas(run, all.gas, GASES);
        if (check_rank == 1 % check_ranks) lend_stars(run, all.star, STARS);
        if (check_rank == 2 % check_ranks) lend_holes(run, all.hole, HOLES);
    }
}

static void test(void)
{
    fill_universe(&all);
    if (check_rank == 0) {
        limno_run *run = open_alone(check_config, "reference");
        for (uint64_t step = 1; step <= 4; step++) GOOD_STEP(run, step, &all);
        EXPECT(run, limno_close(run), LIMNO_OK);
    }
    const char *const names[3] = {"dealt", "last", "species"};
    for (int way = 0; way < 3; way++) {
        limno_options options = options_with(check_config);
        limno_run *run = NULL;
        options.threads = 1 + (check_rank + way) % 3;
        EXPECT(NULL, limno_open_mpi(LIMNO_VERSION, "c", series_path(names[way]), &options, MPI_COMM_WORLD, &run), LIMNO_OK);
        for (uint64_t step = 1; step <= 4; step++) {
            EXPECT(run, mark_step(run, step), LIMNO_OK);
            enter_parts(run, way);
            EXPECT(run, limno_enter(run), LIMNO_OK);
        }
        EXPECT(run, limno_close(run), LIMNO_OK);
    }
    if (check_rank != 0) return;
    struct sheet *one = read_back(series_path("reference"), "run"), *shells = read_back(series_path("reference"), "wind_shells");
    for (int way = 0; way < 3; way++) {
        struct sheet *other = read_back(series_path(names[way]), "run"), *others = read_back(series_path(names[way]), "wind_shells");
        CHECK(other->rows == 4, "found %zu rows", other->rows);
        for (uint64_t step = 1; step <= 4; step++) {
            SAME_ROW(one, step, other, step, NULL);
            SAME_ROW(shells, step, others, step, NULL);
        }
    }
}
