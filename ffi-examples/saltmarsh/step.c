/* Leapfrog in the kick-drift-kick form with the exact factors of an expanding background (Quinn
 * et al. 1997, astro-ph/9710043), then what gas, stars and black holes do to each other. */
#include "step.h"

#include "black_holes.h"
#include "cooling.h"
#include "mesh_gravity.h"
#include "star_formation.h"
#include "time_step.h"
#include "wind.h"

/* Work shifts slowly; moving the domain edges at every step would only cost traffic. */
#define STEPS_BETWEEN_BALANCES 8

static void kick(struct simulation *simulation, struct lag lag)
{
    for (int s = 0; s < SPECIES_COUNT; s++) {
        struct store *store = &simulation->species[s];
        for (size_t i = 0; i < store->count; i++) {
            struct body *body = body_at(store, i);
            for (int axis = 0; axis < 3; axis++)
                body->velocity[axis] += lag.gravity * body->gravity[axis];
        }
    }
    struct store *store = &simulation->species[GAS];
    for (size_t i = 0; i < store->count; i++) {
        struct gas *gas = gas_at(store, i);
        for (int axis = 0; axis < 3; axis++)
            gas->body.velocity[axis] += lag.pressure * gas->pressure_force[axis];
        gas->internal_energy += lag.pressure * gas->shock_heating;
    }
}

static void drift(struct simulation *simulation, double factor)
{
    for (int s = 0; s < SPECIES_COUNT; s++) {
        struct store *store = &simulation->species[s];
        for (size_t i = 0; i < store->count; i++) {
            struct body *body = body_at(store, i);
            for (int axis = 0; axis < 3; axis++)
                body->position[axis] += factor * body->velocity[axis];
        }
    }
}

static struct lag lag_between(const struct cosmology *cosmology, double from, double to)
{
    return (struct lag){ kick_factor(cosmology, from, to), age(cosmology, to) - age(cosmology, from) };
}

void first_forces(struct simulation *simulation, struct gas_space *space)
{
    mesh_gravity(&simulation->mesh, &simulation->domain, simulation->species);
    if (simulation->parameters.dark_only)
        return;
    gas_density(space, simulation, (struct lag){ 0.0, 0.0 }, simulation->clock.scale_factor);
    gas_forces(space, simulation);
    star_formation_rates(simulation);
}

void advance(struct simulation *simulation, struct gas_space *space)
{
    const struct cosmology *cosmology = &simulation->parameters.cosmology;
    struct clock *clock = &simulation->clock;
    double before = clock->scale_factor;
    double after = choose_scale_factor(simulation);
    double middle = 0.5 * (before + after);
    struct lag second_half = lag_between(cosmology, middle, after);

    kick(simulation, lag_between(cosmology, before, middle));
    drift(simulation, drift_factor(cosmology, before, after));
    clock->step++;
    clock->scale_factor = after;
    clock->time = age(cosmology, after);
    clock->scale_step = after - before;
    clock->time_step = clock->time - age(cosmology, before);
    simulation->events.count = 0;

    int balance = clock->step % STEPS_BETWEEN_BALANCES == 1;
    if (balance)
        domain_balance(&simulation->domain, simulation->species);
    domain_migrate(&simulation->domain, simulation->species);
    if (balance)
        domain_sort(&simulation->domain, simulation->species);
    mesh_gravity(&simulation->mesh, &simulation->domain, simulation->species);
    if (!simulation->parameters.dark_only) {
        gas_density(space, simulation, second_half, before);
        gas_forces(space, simulation);
    }
    kick(simulation, second_half);
    if (!simulation->parameters.dark_only) {
        form_stars(simulation, space, clock->time_step);
        cool_gas(simulation, clock->time_step);
        wind_recouple(simulation);
        black_holes(simulation, clock->time_step);
        star_formation_rates(simulation);
    }
}
