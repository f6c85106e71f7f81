#include "simulation.h"

static size_t item_size(enum species species)
{
    switch (species) {
    case GAS:
        return sizeof(struct gas);
    case STARS:
        return sizeof(struct star);
    case BLACK_HOLES:
        return sizeof(struct black_hole);
    default:
        return sizeof(struct dark_matter);
    }
}

void simulation_init(struct simulation *simulation, MPI_Comm comm,
                     const struct parameters *parameters)
{
    *simulation = (struct simulation){ .comm = comm, .parameters = *parameters };
    MPI_Comm_rank(comm, &simulation->rank);
    MPI_Comm_size(comm, &simulation->ranks);
    simulation->clock.scale_factor = 1.0 / (1.0 + parameters->start_redshift);
    simulation->clock.time = age(&parameters->cosmology, simulation->clock.scale_factor);
    domain_init(&simulation->domain, comm, parameters->box);
    mesh_init(&simulation->mesh, comm, parameters->mesh, parameters->box);
    for (int s = 0; s < SPECIES_COUNT; s++)
        store_init(&simulation->species[s], item_size(s));
    store_init(&simulation->events, sizeof(struct event));
}

void simulation_free(struct simulation *simulation)
{
    for (int s = 0; s < SPECIES_COUNT; s++)
        store_free(&simulation->species[s]);
    store_free(&simulation->events);
    mesh_free(&simulation->mesh);
    domain_free(&simulation->domain);
}
