#include "wind.h"

#include <math.h>
#include <string.h>

#include "chance.h"

/* A wind particle feels pressure again below this share of the density threshold of stars. */
#define RECOUPLING_DENSITY 0.1

double wind_speed(const struct simulation *simulation, const struct gas *gas)
{
    const struct parameters *parameters = &simulation->parameters;
    double depth = fmax(0.0, -gas->body.potential / simulation->clock.scale_factor);
    double speed = parameters->wind_escape * sqrt(2.0 * depth);
    return fmin(fmax(speed, parameters->wind_min_speed), parameters->wind_max_speed);
}

double wind_loading(const struct simulation *simulation, double speed)
{
    return 2.0 * simulation->parameters.wind_energy / (speed * speed);
}

void wind_launch(struct simulation *simulation, struct gas *gas)
{
    const struct parameters *parameters = &simulation->parameters;
    double speed = wind_speed(simulation, gas);
    uint64_t step = simulation->clock.step;
    double height = 2.0 * chance(parameters->seed, CHANCE_WIND_HEIGHT, gas->body.id, step) - 1.0;
    double azimuth = 2.0 * PI * chance(parameters->seed, CHANCE_WIND_AZIMUTH, gas->body.id, step);
    double across = sqrt(1.0 - height * height);
    double direction[3] = { across * cos(azimuth), across * sin(azimuth), height };
    for (int axis = 0; axis < 3; axis++)
        gas->body.velocity[axis] += simulation->clock.scale_factor * speed * direction[axis];
    gas->coupling_time = simulation->clock.time +
                         parameters->wind_free_gyr * parameters->cosmology.hubble / TIME_GYR_H;
    gas->star_formation_rate = 0.0;

    struct event *event = store_append(&simulation->events);
    event->channel = WIND_LAUNCH;
    event->id = gas->body.id;
    event->mass = gas->body.mass;
    event->momentum = gas->body.mass * simulation->clock.scale_factor * speed;
    event->energy = 0.5 * gas->body.mass * speed * speed;
    event->metals = gas->body.mass * gas->metallicity;
    memcpy(event->position, gas->body.position, sizeof event->position);
    simulation->totals.wind_launched += gas->body.mass;
}

void wind_recouple(struct simulation *simulation)
{
    struct store *store = &simulation->species[GAS];
    double dilute = RECOUPLING_DENSITY * simulation->parameters.star_threshold;
    for (size_t i = 0; i < store->count; i++) {
        struct gas *gas = gas_at(store, i);
        if (gas->coupling_time > 0.0 &&
            (gas->coupling_time <= simulation->clock.time ||
             hydrogen_number(simulation, gas->density) < dilute))
            gas->coupling_time = 0.0;
    }
}
