/*
 * In a host with MPI a run of one process alone can be opened before MPI_Init, and used in any place; one over a
 * communicator is refused before.
 *
 * ranks: 1 3
 */
#define _GNU_SOURCE
#include <limnograph_mpi.h>
#define CHECK_OWN_MAIN
#include "check.h"

static void test(void) {}

int main(int argc, char **argv)
{
    static struct universe all;
    char name[64];
    limno_run *refused = (limno_run *)8;
    check_begins(argc, argv);
    check_rank = (int)getpid(); /* until there are ranks */
    check_silence_begins();
    test();
    fill_universe(&all);
    snprintf(name, sizeof name, "alone%d", (int)getpid());
    limno_options options = options_with(check_config);
    REFUSED(NULL, limno_open_mpi(LIMNO_VERSION, "c", series_path("early"), &options, MPI_COMM_WORLD, &refused), LIMNO_BAD_MPI,
            "MPI_Init");
    CHECK(refused == NULL, "a handle after a failure");
    REFUSED(NULL, limno_open_fortran(LIMNO_VERSION, "c", series_path("early"), &options, 0, &refused), LIMNO_BAD_MPI, "MPI_Init");
    limno_run *run = open_alone(check_config, name);
    GOOD_STEP(run, 1, &all);
    MPI_Init(&argc, &argv);
    GOOD_STEP(run, 2, &all);
    MPI_Barrier(MPI_COMM_WORLD);
    MPI_Finalize();
    GOOD_STEP(run, 3, &all);
    EXPECT(run, limno_close(run), LIMNO_OK);
    CHECK(read_back(series_path(name), "run")->rows == 3, "rows are missing");
    check_silence_ends();
    return check_failures ? 1 : 0;
}
