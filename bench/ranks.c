/* The same particles on all ranks against one rank.
 *
 *   mpirun -n 2 ranks ELEMENTS REPETITIONS SERIES
 *
 * Rank 0 measures all alone, on a communicator of its own, while the others wait; then all measure their shares. One
 * thread each: with as many cores as ranks and memory to match, the ratio is one over the number of ranks. */
#include <limnograph_mpi.h>
#include <stdio.h>
#include <stdlib.h>

#include "library.h"
#include "statistics.h"

static limno_run *opened(const char *series, const char *kind, MPI_Comm comm)
{
    struct request usual = usual_request();
    char name[4096], *config = config_of(&usual);
    snprintf(name, sizeof name, "%s.%s.limno", series, kind);
    limno_options options = LIMNO_OPTIONS_INIT;
    options.host_name = "bench", options.config_text = config;
    limno_run *run = NULL;
    if (limno_open_mpi(LIMNO_VERSION, NULL, name, &options, comm, &run) != LIMNO_OK)
        give_up("%s", limno_last_error(NULL));
    free(config);
    return run;
}

int main(int argc, char **argv)
{
    MPI_Init(&argc, &argv);
    int rank, ranks;
    MPI_Comm_rank(MPI_COMM_WORLD, &rank);
    MPI_Comm_size(MPI_COMM_WORLD, &ranks);
    if (argc != 4)
        give_up("usage: ranks ELEMENTS REPETITIONS SERIES");
    size_t n = (size_t)number_of("ELEMENTS", argv[1], 1, 1LL << 40);
    int repetitions = (int)number_of("REPETITIONS", argv[2], 1, 10000);
    size_t from = n * (size_t)rank / (size_t)ranks, to = n * (size_t)(rank + 1) / (size_t)ranks;
    /* Rank 0 holds everything, of which its share is the beginning. */
    struct gas gas = gas_scattered(SINGLE, from, rank == 0 ? n : to - from), share = gas_part(&gas, 0, to - from);
    limno_run *run = opened(argv[3], "ranks", MPI_COMM_WORLD);
    limno_run *alone = rank == 0 ? opened(argv[3], "alone", MPI_COMM_SELF) : NULL;
    char name[64];
    snprintf(name, sizeof name, "ranks_%d_over_1", ranks);
    struct figure ratio = figure_of(name, repetitions);
    for (int r = -1; r < repetitions; r++) {
        uint64_t step = (uint64_t)(r + 2);
        double single = 0.0;
        MPI_Barrier(MPI_COMM_WORLD);
        if (rank == 0) {
            double start = now();
            library_step(alone, &gas, step);
            single = now() - start;
        }
        MPI_Barrier(MPI_COMM_WORLD);
        double start = now();
        library_step(run, &share, step);
        double seconds = now() - start;
        MPI_Allreduce(MPI_IN_PLACE, &seconds, 1, MPI_DOUBLE, MPI_MAX, MPI_COMM_WORLD);
        if (r >= 0)
            figure_add(&ratio, seconds / single);
    }
    library_close(run);
    if (rank == 0) {
        library_close(alone);
        figure_tell(&ratio);
    }
    gas_free(&gas);
    MPI_Finalize();
    return 0;
}
