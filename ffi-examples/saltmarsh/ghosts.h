/* Copies of other ranks' gas near enough to be neighbours, and what flows back to the owners. */
#ifndef SALTMARSH_GHOSTS_H
#define SALTMARSH_GHOSTS_H

#include <mpi.h>

#include "element.h"
#include "memory.h"

struct ghosts {
    MPI_Comm comm;
    int rank;
    int ranks;
    size_t own;             /* elements before this index are own, from it on ghosts */
    int *send_count, *send_start, *receive_count, *receive_start;
    struct store sent;      /* index of each element sent, grouped by rank */
    struct store scratch;
};

void ghosts_init(struct ghosts *ghosts, MPI_Comm comm);
void ghosts_free(struct ghosts *ghosts);

/* Appends to own elements all others that may lie within reach times the radius of one of them.
 * Collective. */
void ghosts_fetch(struct ghosts *ghosts, struct store *elements, double box, double reach);

/* Brings the copies up to date with their owners. Collective. */
void ghosts_refresh(struct ghosts *ghosts, struct store *elements);

/* Hands what has gathered on copies to their owners: take(own, of_the_copy). One item per
 * element. Collective. */
typedef void combine(void *own, const void *copy);
void ghosts_return(struct ghosts *ghosts, struct store *items, combine *take);

#endif
