/* The state of a run: everything a checkpoint would have to hold is reachable from here. */
#ifndef SALTMARSH_SIMULATION_H
#define SALTMARSH_SIMULATION_H

#include <mpi.h>
#include <stdint.h>

#include "domain.h"
#include "events.h"
#include "mesh.h"
#include "parameters.h"
#include "particles.h"
#include "units.h"

struct clock {
    uint64_t step;        /* steps completed */
    double scale_factor;
    double time;          /* age, in units of time */
    double scale_step;    /* change of the scale factor during the last step */
    double time_step;
};

/* Running totals of this rank; sums over ranks are formed when someone wants to know. */
struct totals {
    double stars_formed;  /* mass at birth */
    double metals_made;
    double wind_launched; /* mass */
    double heat_injected; /* by black holes */
    double mergers;
};

struct simulation {
    MPI_Comm comm;
    int rank;
    int ranks;
    struct parameters parameters;
    struct clock clock;
    struct domain domain;
    struct mesh mesh;
    struct store species[SPECIES_COUNT];
    struct store events;       /* of the last step */
    struct totals totals;
    double gas_particle_mass;  /* at the start; returned mass comes in fractions of it */
};

static inline double box_volume(const struct simulation *simulation)
{
    double box = simulation->parameters.box;
    return box * box * box;
}

static inline double redshift(const struct simulation *simulation)
{
    return 1.0 / simulation->clock.scale_factor - 1.0;
}

/* Comoving mean density of baryons. */
static inline double mean_baryon_density(const struct simulation *simulation)
{
    return simulation->parameters.cosmology.omega_baryon * CRITICAL_DENSITY;
}

/* Physical hydrogen atoms per cm^3 for a comoving density. */
static inline double hydrogen_number(const struct simulation *simulation, double density)
{
    double a = simulation->clock.scale_factor;
    double h = simulation->parameters.cosmology.hubble;
    return density / (a * a * a) * HYDROGEN_PER_DENSITY_H2 * h * h;
}

void simulation_init(struct simulation *simulation, MPI_Comm comm,
                     const struct parameters *parameters);
void simulation_free(struct simulation *simulation);

#endif
