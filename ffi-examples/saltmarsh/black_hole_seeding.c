/* A black hole is seeded where gas is dense and already enriched by stars, far from any other
 * hole. Of all gas in the box that qualifies, the particle deepest in its potential well turns
 * into one: at most one a step, whatever the number of ranks. */
#include <math.h>
#include <stdlib.h>

#include "black_holes.h"

static int qualifies(const struct simulation *simulation, const struct gas *gas,
                     const struct store *holes)
{
    const struct parameters *parameters = &simulation->parameters;
    if (gas->coupling_time > 0.0 || gas->metallicity < parameters->hole_metallicity ||
        hydrogen_number(simulation, gas->density) <
            parameters->hole_threshold * parameters->star_threshold)
        return 0;
    for (size_t h = 0; h < holes->count; h++) {
        const struct body *hole = body_at(holes, h);
        double square = 0.0;
        for (int axis = 0; axis < 3; axis++) {
            double x = nearest_image(gas->body.position[axis] - hole->position[axis],
                                     parameters->box);
            square += x * x;
        }
        if (square < parameters->hole_distance * parameters->hole_distance)
            return 0;
    }
    return 1;
}

void seed_black_hole(struct simulation *simulation, const struct store *holes)
{
    struct store *store = &simulation->species[GAS];
    double depth = INFINITY, deepest;
    size_t best = 0;
    for (size_t i = 0; i < store->count; i++) {
        if (gas_at(store, i)->body.potential < depth &&
            qualifies(simulation, gas_at(store, i), holes)) {
            depth = gas_at(store, i)->body.potential;
            best = i;
        }
    }
    MPI_Allreduce(&depth, &deepest, 1, MPI_DOUBLE, MPI_MIN, simulation->comm);
    /* Of equals, which only contrived states have, the lowest rank's is taken. */
    int claim = depth <= deepest && isfinite(depth) ? simulation->rank : simulation->ranks, taker;
    MPI_Allreduce(&claim, &taker, 1, MPI_INT, MPI_MIN, simulation->comm);
    if (taker != simulation->rank)
        return;
    struct gas *gas = gas_at(store, best);
    struct black_hole *hole = store_append(&simulation->species[BLACK_HOLES]);
    hole->body = gas->body;
    hole->subgrid_mass = fmin(simulation->parameters.hole_seed_mass, gas->body.mass);
    hole->radius = gas->smoothing_length;
    hole->metal_mass = gas->metallicity * gas->body.mass;
    gas->gone = 1;
    drop_gone(store);
}
