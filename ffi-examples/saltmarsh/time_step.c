#include "time_step.h"

#include <math.h>

#include "numbers.h"

/* Share of the time a signal takes to cross a kernel's radius (Courant, Friedrichs & Lewy 1928). */
#define COURANT 0.4
/* Mesh cells that an acceleration from rest, or a motion, may cover in a step. */
#define ACCELERATION_CELLS 0.1
#define MOTION_CELLS 0.5

/* Longest time step that the particles of this rank allow. Accelerations are physical:
 * dv/dt = gravity / a^2 + pressure / a for a peculiar velocity v. */
static double allowed_time(const struct simulation *simulation)
{
    double a = simulation->clock.scale_factor;
    double cell = a * simulation->parameters.box / simulation->parameters.mesh;
    double allowed = INFINITY, fastest = 0.0, strongest = 0.0;
    for (int s = 0; s < SPECIES_COUNT; s++) {
        const struct store *store = &simulation->species[s];
        for (size_t i = 0; i < store->count; i++) {
            const struct body *body = body_at(store, i);
            const struct gas *gas = s == GAS ? gas_at(store, i) : NULL;
            double speed = 0.0, acceleration = 0.0;
            for (int axis = 0; axis < 3; axis++) {
                double v = body->velocity[axis] / a;
                double g = body->gravity[axis] / (a * a) + (gas ? gas->pressure_force[axis] / a : 0.0);
                speed += v * v;
                acceleration += g * g;
            }
            fastest = larger(fastest, speed);
            strongest = larger(strongest, acceleration);
            if (gas)
                allowed = smaller(allowed, COURANT * a * gas->smoothing_length / gas->signal_speed);
        }
    }
    if (fastest > 0.0)
        allowed = smaller(allowed, MOTION_CELLS * cell / sqrt(fastest));
    if (strongest > 0.0)
        allowed = smaller(allowed, sqrt(2.0 * ACCELERATION_CELLS * cell / sqrt(strongest)));
    return allowed;
}

double choose_scale_factor(const struct simulation *simulation)
{
    const struct parameters *parameters = &simulation->parameters;
    double a = simulation->clock.scale_factor;
    double end = 1.0 / (1.0 + parameters->end_redshift);
    double mine = allowed_time(simulation), allowed;
    MPI_Allreduce(&mine, &allowed, 1, MPI_DOUBLE, MPI_MIN, simulation->comm);
    double next = scale_factor_at(&parameters->cosmology, simulation->clock.time + allowed);
    next = smaller(next, a * exp(parameters->max_log_step));
    /* The last step ends where the run does, and none before it leaves a sliver. */
    if (next >= end)
        return end;
    return next + 0.5 * (next - a) > end ? 0.5 * (a + end) : next;
}
