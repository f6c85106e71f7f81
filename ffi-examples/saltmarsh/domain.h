/* Which rank a particle lives on: slabs in x whose edges follow the work. */
#ifndef SALTMARSH_DOMAIN_H
#define SALTMARSH_DOMAIN_H

#include <mpi.h>

#include "particles.h"

struct domain {
    MPI_Comm comm;
    int rank;
    int ranks;
    double box;
    double *edges; /* ranks + 1, from 0 to box; rank r holds edges[r] <= x < edges[r + 1] */
};

void domain_init(struct domain *domain, MPI_Comm comm, double box);
void domain_free(struct domain *domain);

int domain_owner(const struct domain *domain, double x);

/* Moves the edges so that each rank holds about the same work. Collective. */
void domain_balance(struct domain *domain, const struct store species[SPECIES_COUNT]);

/* Wraps positions into the box and sends every particle to the rank it belongs to. Collective. */
void domain_migrate(const struct domain *domain, struct store species[SPECIES_COUNT]);

/* Puts the particles of this rank into an order in which neighbours in space are near in memory. */
void domain_sort(const struct domain *domain, struct store species[SPECIES_COUNT]);

/* The nearest image of a separation in a periodic box. */
static inline double nearest_image(double separation, double box)
{
    double half = 0.5 * box;
    if (separation > half)
        return separation - box;
    if (separation < -half)
        return separation + box;
    return separation;
}

/* A position within [0, box) from one at most a few boxes away. */
static inline double wrap(double position, double box)
{
    while (position < 0.0)
        position += box;
    while (position >= box)
        position -= box;
    return position;
}

#endif
