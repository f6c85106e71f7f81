/* What a measured step costs when nothing is lent: all gauges on, one row written.
 *
 *   fixed_cost STEPS SERIES                  alone
 *   mpirun -n 2 fixed_cost_mpi STEPS SERIES  (built with -DWITH_MPI) on ranks, as the slowest rank has it
 *
 * The host pauses between steps, as hosts compute between steps, so that the row is written and the reduction done
 * meanwhile. */
#ifdef WITH_MPI
#include <limnograph_mpi.h>
#endif
#include <stdio.h>
#include <stdlib.h>
#include <time.h>

#include "library.h"
#include "statistics.h"

enum { PAUSE_NS = 200000, WARM_UP = 20 };

#ifdef WITH_MPI

static limno_run *opened(const char *series, const struct request *request)
{
    char *config = config_of(request);
    limno_options options = LIMNO_OPTIONS_INIT;
    options.host_name = "bench", options.config_text = config;
    limno_run *run = NULL;
    if (limno_open_mpi(LIMNO_VERSION, NULL, series, &options, MPI_COMM_WORLD, &run) != LIMNO_OK)
        give_up("%s", limno_last_error(NULL));
    free(config);
    return run;
}

/* Every rank's times become the largest of all ranks', step by step. */
static void slowest(double *seconds, int count)
{
    MPI_Allreduce(MPI_IN_PLACE, seconds, count, MPI_DOUBLE, MPI_MAX, MPI_COMM_WORLD);
}

#else

static limno_run *opened(const char *series, const struct request *request)
{
    return library_open(series, request, 1);
}

static void slowest(double *seconds, int count)
{
    (void)seconds, (void)count;
}

#endif

int main(int argc, char **argv)
{
    int rank = 0, ranks = 1;
#ifdef WITH_MPI
    MPI_Init(&argc, &argv);
    MPI_Comm_rank(MPI_COMM_WORLD, &rank);
    MPI_Comm_size(MPI_COMM_WORLD, &ranks);
#endif
    if (argc != 3)
        give_up("usage: fixed_cost STEPS SERIES");
    int steps = (int)number_of("STEPS", argv[1], 1, 1000000);
    struct request usual = usual_request();
    limno_run *run = opened(argv[2], &usual);
    char name[64] = "fixed_cost_us";
    if (ranks > 1)
        snprintf(name, sizeof name, "fixed_cost_%d_ranks_us", ranks);
    struct figure figure = figure_of(name, steps);
    for (int s = -WARM_UP; s < steps; s++) {
        struct timespec pause = { 0, PAUSE_NS };
        nanosleep(&pause, NULL);
        limno_clock clock = LIMNO_CLOCK_INIT;
        clock.step = (uint64_t)(s + WARM_UP + 1), clock.time = 0.5;
        double start = now();
        library_must(limno_mark(run, &clock), run);
        library_must(limno_enter(run), run);
        if (s >= 0)
            figure_add(&figure, 1e6 * (now() - start));
    }
    library_close(run);
    slowest(figure.values, figure.count);
    if (rank == 0)
        figure_tell(&figure);
#ifdef WITH_MPI
    MPI_Finalize();
#endif
    return 0;
}
