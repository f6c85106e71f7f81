/*
 * Where only some ranks close a run, the others' MPI_Finalize does it for them: the job ends by itself, with status 0 and
 * every row.
 *
 * ranks: 2 3
 */
#define _GNU_SOURCE
#include <limnograph_mpi.h>
#define CHECK_OWN_MAIN
#include "check.h"

static void test(void) {}

int main(int argc, char **argv)
{
    static struct universe all;
    limno_run *run;
    check_begins(argc, argv);
    MPI_Init(&argc, &argv);
    MPI_Comm_rank(MPI_COMM_WORLD, &check_rank);
    MPI_Comm_size(MPI_COMM_WORLD, &check_ranks);
    check_silence_begins();
    test();
    fill_universe(&all);
    limno_options options = options_with(check_config);
    EXPECT(NULL, limno_open_mpi(LIMNO_VERSION, "c", series_path("some"), &options, MPI_COMM_WORLD, &run), LIMNO_OK);
    for (uint64_t step = 1; step <= 4; step++) {
        EXPECT(run, mark_step(run, step), LIMNO_OK);
        lend_share(run, &all, check_rank, check_ranks);
        EXPECT(run, limno_enter(run), LIMNO_OK);
    }
    if (check_rank == check_ranks - 1) EXPECT(NULL, limno_close(run), LIMNO_OK);
    MPI_Finalize();
    REFUSED(NULL, limno_enter(run), LIMNO_CLOSED, "closed");
    if (check_rank == 0) CHECK(read_back(series_path("some"), "run")->rows == 4, "rows are missing");
    check_silence_ends();
    return check_failures ? 1 : 0;
}
