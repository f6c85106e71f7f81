/* A Schmidt 1959-type law (ApJ 129, 243): gas above a threshold turns into stars at a fixed share
 * of its mass per free-fall time. Whole particles are converted, each with the probability that
 * makes the expected mass right. A share of a new star's mass comes back at once, with fresh
 * metals, to the gas around (instantaneous recycling). */
#include "star_formation.h"

#include <math.h>
#include <string.h>

#include "chance.h"
#include "kernel.h"
#include "wind.h"

/* Mass comes back in this fraction of an initial gas particle: a power of two, so that all masses
 * remain multiples of one number and their sums stay exact. */
#define RETURN_QUANTUM (1.0 / 256.0)

/* What a new star gives to a neighbour. */
struct gift {
    double mass;
    double metals;
    double momentum[3]; /* mass times velocity as stored */
};

void star_formation_rates(struct simulation *simulation)
{
    const struct parameters *parameters = &simulation->parameters;
    struct store *store = &simulation->species[GAS];
    double a = simulation->clock.scale_factor;
    double least_density = parameters->star_overdensity * mean_baryon_density(simulation);
    for (size_t i = 0; i < store->count; i++) {
        struct gas *gas = gas_at(store, i);
        int forms = gas->density > least_density &&
                    hydrogen_number(simulation, gas->density) > parameters->star_threshold &&
                    gas->internal_energy * KELVIN_PER_ENERGY < parameters->star_kelvin &&
                    gas->coupling_time <= 0.0;
        double free_fall = sqrt(3.0 * PI * a * a * a / (32.0 * GRAVITY * gas->density));
        gas->star_formation_rate =
            forms ? parameters->star_efficiency * gas->body.mass / free_fall : 0.0;
    }
}

static int happens(const struct simulation *simulation, const struct gas *gas,
                   enum purpose purpose, double expected_mass)
{
    double probability = -expm1(-expected_mass / gas->body.mass);
    return chance(simulation->parameters.seed, purpose, gas->body.id, simulation->clock.step) <
           probability;
}

static void decide_fates(const struct simulation *simulation, struct gas_space *space,
                         double time_step)
{
    const struct store *store = &simulation->species[GAS];
    for (size_t i = 0; i < store->count; i++) {
        const struct gas *gas = gas_at(store, i);
        if (gas->star_formation_rate <= 0.0)
            continue;
        double formed = gas->star_formation_rate * time_step;
        if (happens(simulation, gas, CHANCE_STAR, formed))
            gas_element(space, i)->fate = BECOMES_STAR;
        else if (happens(simulation, gas, CHANCE_WIND,
                         formed * wind_loading(simulation, wind_speed(simulation, gas))))
            gas_element(space, i)->fate = BECOMES_WIND;
    }
}

static double share_of(const struct gas_space *space, const struct element *self,
                       const struct near *near)
{
    const struct element *other = gas_element(space, near->index);
    return other->fate == BECOMES_STAR ? 0.0 : kernel_shape(near->distance / self->radius);
}

/* Divides what a new star gives among its surviving neighbours, by the kernel, in whole quanta.
 * Returns the mass that found a taker. */
static double give(const struct simulation *simulation, const struct gas_space *space, size_t own,
                   struct gift *gifts)
{
    const struct gas *gas = gas_at(&simulation->species[GAS], own);
    const struct element *self = gas_element(space, own);
    const struct parameters *parameters = &simulation->parameters;
    double quantum = simulation->gas_particle_mass * RETURN_QUANTUM;
    double quanta = floor(parameters->return_fraction * gas->body.mass / quantum);
    size_t count;
    const struct near *near = gas_near(space, own, &count);
    double shares = 0.0;
    for (size_t n = 0; n < count; n++)
        shares += share_of(space, self, &near[n]);
    if (shares <= 0.0 || quanta < 1.0)
        return 0.0;
    double metals_per_mass = gas->metallicity +
                             parameters->metal_yield * gas->body.mass / (quanta * quantum);
    double passed = 0.0, given = 0.0;
    for (size_t n = 0; n < count; n++) {
        passed += share_of(space, self, &near[n]);
        /* The ratio ends at exactly 1, so that all is given. */
        double due = floor(quanta * (passed / shares));
        double mass = (due - given) * quantum;
        if (mass <= 0.0)
            continue;
        given = due;
        struct gift *gift = &gifts[near[n].index];
        gift->mass += mass;
        gift->metals += mass * metals_per_mass;
        for (int axis = 0; axis < 3; axis++)
            gift->momentum[axis] += mass * gas->body.velocity[axis];
    }
    return given * quantum;
}

static void combine_gifts(void *own, const void *copy)
{
    struct gift *gift = own;
    const struct gift *other = copy;
    gift->mass += other->mass;
    gift->metals += other->metals;
    for (int axis = 0; axis < 3; axis++)
        gift->momentum[axis] += other->momentum[axis];
}

static void receive(struct gas *gas, const struct gift *gift)
{
    if (gift->mass <= 0.0)
        return;
    double mass = gas->body.mass + gift->mass;
    for (int axis = 0; axis < 3; axis++)
        gas->body.velocity[axis] =
            (gas->body.mass * gas->body.velocity[axis] + gift->momentum[axis]) / mass;
    gas->metallicity = (gas->body.mass * gas->metallicity + gift->metals) / mass;
    gas->body.mass = mass;
}

static void make_star(struct simulation *simulation, struct gas *gas, double returned)
{
    struct star *star = store_append(&simulation->species[STARS]);
    star->body = gas->body;
    star->birth_mass = gas->body.mass;
    star->birth_scale_factor = simulation->clock.scale_factor;
    star->metallicity = gas->metallicity;
    star->body.mass -= returned;
    gas->gone = 1;
    simulation->totals.stars_formed += star->birth_mass;
    if (returned <= 0.0)
        return;
    double metals = simulation->parameters.metal_yield * star->birth_mass;
    simulation->totals.metals_made += metals;
    struct event *event = store_append(&simulation->events);
    event->channel = STELLAR_RETURN;
    event->id = star->body.id;
    event->mass = returned;
    event->metals = metals + returned * star->metallicity;
    memcpy(event->position, star->body.position, sizeof event->position);
}

void form_stars(struct simulation *simulation, struct gas_space *space, double time_step)
{
    struct store *store = &simulation->species[GAS];
    decide_fates(simulation, space, time_step);
    ghosts_refresh(&space->ghosts, &space->elements);
    struct store gifts;
    store_init(&gifts, sizeof(struct gift));
    store_resize(&gifts, space->elements.count);
    struct gift *gift = (struct gift *)(void *)gifts.items;
    if (gifts.count > 0)
        memset(gift, 0, gifts.count * sizeof *gift);
    for (size_t i = 0; i < store->count; i++) {
        if (gas_element(space, i)->fate == BECOMES_STAR)
            make_star(simulation, gas_at(store, i), give(simulation, space, i, gift));
        else if (gas_element(space, i)->fate == BECOMES_WIND)
            wind_launch(simulation, gas_at(store, i));
    }
    ghosts_return(&space->ghosts, &gifts, combine_gifts);
    for (size_t i = 0; i < store->count; i++)
        receive(gas_at(store, i), &gift[i]);
    store_free(&gifts);
    drop_gone(store);
}
