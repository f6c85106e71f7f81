/* What the steps cost, and what of it goes to being recorded: wall clock and processor time. */
#ifndef SALTMARSH_COST_H
#define SALTMARSH_COST_H

#include <mpi.h>
#include <stdint.h>

/* Seconds on this rank. */
struct cost {
    double wall_start, process_start, thread_start;
    double call_start;
    double calls; /* processor time of this thread within the recording library's calls */
};

void cost_begin(struct cost *cost);

/* Around what is done only to be recorded. */
void cost_call(struct cost *cost);
void cost_return(struct cost *cost);

/* Writes a line "name value" for each total since cost_begin, summed over ranks, to a file. Collective. */
void cost_write(const struct cost *cost, uint64_t steps, MPI_Comm comm, const char *path);

#endif
