#define _POSIX_C_SOURCE 200809L /* the clocks of processor time */
#include "cost.h"

#include <stdio.h>
#include <time.h>

#include "memory.h"

static double seconds(clockid_t which)
{
    struct timespec time;
    return clock_gettime(which, &time) == 0 ? (double)time.tv_sec + 1e-9 * (double)time.tv_nsec : 0.0;
}

void cost_begin(struct cost *cost)
{
    *cost = (struct cost){ .wall_start = MPI_Wtime(),
                           .process_start = seconds(CLOCK_PROCESS_CPUTIME_ID),
                           .thread_start = seconds(CLOCK_THREAD_CPUTIME_ID) };
}

void cost_call(struct cost *cost)
{
    cost->call_start = seconds(CLOCK_THREAD_CPUTIME_ID);
}

void cost_return(struct cost *cost)
{
    cost->calls += seconds(CLOCK_THREAD_CPUTIME_ID) - cost->call_start;
}

void cost_write(const struct cost *cost, uint64_t steps, MPI_Comm comm, const char *path)
{
    double wall = MPI_Wtime() - cost->wall_start;
    double process = seconds(CLOCK_PROCESS_CPUTIME_ID) - cost->process_start;
    double thread = seconds(CLOCK_THREAD_CPUTIME_ID) - cost->thread_start;
    double mine[3] = { process, cost->calls, process - thread }, all[3], longest;
    int rank;
    MPI_Comm_rank(comm, &rank);
    MPI_Reduce(mine, all, 3, MPI_DOUBLE, MPI_SUM, 0, comm);
    MPI_Reduce(&wall, &longest, 1, MPI_DOUBLE, MPI_MAX, 0, comm);
    if (rank != 0)
        return;
    FILE *file = fopen(path, "w");
    if (file == NULL) {
        perror(path);
        fatal("cannot write the cost; check that the folder exists and is writable");
    }
    /* The host itself has one thread a rank: others are the recording library's, and MPI's where it has any. */
    fprintf(file,
            "steps %llu\nwall_seconds %.9g\nprocessor_seconds %.9g\nrecording_calls_seconds %.9g\n"
            "other_threads_seconds %.9g\n",
            (unsigned long long)steps, longest, all[0], all[1], all[2]);
    if (fclose(file) != 0)
        fatal("the cost could not be written; is the disk full?");
}
