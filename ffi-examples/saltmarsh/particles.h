/* What the box is filled with. Units: units.h. */
#ifndef SALTMARSH_PARTICLES_H
#define SALTMARSH_PARTICLES_H

#include <stdint.h>

#include "memory.h"

enum species { DARK_MATTER, GAS, STARS, BLACK_HOLES, SPECIES_COUNT };

/* What gravity and motion need; every kind of particle begins with it. */
struct body {
    uint64_t id;
    double position[3];
    double velocity[3]; /* a^2 dx/dt */
    double mass;
    double gravity[3];  /* minus the gradient of the comoving potential */
    double potential;   /* comoving; divide by a for the physical one */
};

struct dark_matter {
    struct body body;
};

struct gas {
    struct body body;
    double internal_energy;
    double density;
    double smoothing_length;    /* radius at which the kernel reaches zero */
    double metallicity;         /* mass fraction */
    double star_formation_rate; /* at this instant */
    double coupling_time;       /* a wind particle feels no pressure until this time; else 0 */
    double pressure_force[3];   /* per mass, changes the velocity at this rate in time */
    double shock_heating;       /* rate of change of internal_energy by viscosity */
    double signal_speed;        /* fastest signal to a neighbour, physical */
    uint32_t neighbours;
    uint32_t gone;              /* became a star or fell into a black hole during this step */
};

struct star {
    struct body body;
    double birth_mass;
    double birth_scale_factor;
    double metallicity;
};

struct black_hole {
    struct body body;        /* body.mass is what gravity feels */
    double subgrid_mass;     /* what accretion is computed with */
    double accretion_rate;
    double radius;           /* encloses the gas it feeds from */
    double energy_reservoir; /* made by accretion, not yet given to gas */
    double metal_mass;       /* metals that came with the gas it swallowed */
};

static inline struct body *body_at(const struct store *store, size_t index)
{
    return (struct body *)store_at(store, index);
}

static inline struct gas *gas_at(const struct store *store, size_t index)
{
    return (struct gas *)store_at(store, index);
}

/* Removes gas that is marked as gone; the rest keeps its order. */
static inline void drop_gone(struct store *gas)
{
    size_t kept = 0;
    for (size_t i = 0; i < gas->count; i++) {
        if (gas_at(gas, i)->gone)
            continue;
        if (kept != i)
            *gas_at(gas, kept) = *gas_at(gas, i);
        kept++;
    }
    gas->count = kept;
}

static inline struct star *star_at(const struct store *store, size_t index)
{
    return (struct star *)store_at(store, index);
}

static inline struct black_hole *black_hole_at(const struct store *store, size_t index)
{
    return (struct black_hole *)store_at(store, index);
}

#endif
