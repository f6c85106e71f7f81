/* Holes are few and gas around one may lie on several ranks, so every rank keeps a copy of all
 * holes, adds up what its own gas means to each, and all reach the same conclusions from the same
 * sums. Only the rank a hole lives on stores the outcome.
 *
 * Accretion is at the rate of Bondi 1952 (MNRAS 112, 195), times a factor for the dense gas that
 * is not resolved, and not above the limit of Eddington. It first feeds the subgrid mass; gas
 * particles are swallowed whole, by chance, so that the mass gravity feels follows. Energy is
 * stored until it can raise a particle by a set temperature (Booth & Schaye 2009, MNRAS 398, 53),
 * else it would be radiated away at once. The rest mass that is radiated away stays in body.mass,
 * so that baryons are conserved exactly. */
#include "black_holes.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "chance.h"
#include "kernel.h"

/* The gas particles that a hole feeds from and heats. */
#define FEEDERS 40
/* Largest feeding radius in mesh cells: in a void a hole must not reach across half the box. */
#define FARTHEST_CELLS 4.0

struct store all_black_holes(const struct simulation *simulation)
{
    const struct store *own = &simulation->species[BLACK_HOLES];
    struct store all;
    store_init(&all, own->item_size);
    size_t ranks = (size_t)simulation->ranks;
    int *counts = allocate(2 * ranks, sizeof *counts), *starts = counts + ranks;
    int count = (int)own->count, total = 0;
    MPI_Allgather(&count, 1, MPI_INT, counts, 1, MPI_INT, simulation->comm);
    for (size_t r = 0; r < ranks; r++) {
        starts[r] = total;
        total += counts[r];
    }
    store_resize(&all, (size_t)total);
    MPI_Datatype item;
    MPI_Type_contiguous((int)own->item_size, MPI_BYTE, &item);
    MPI_Type_commit(&item);
    MPI_Allgatherv(own->items, count, item, all.items, counts, starts, item, simulation->comm);
    MPI_Type_free(&item);
    free(counts);
    /* Insertion sort: the list is short and nearly ordered. */
    for (size_t i = 1; i < all.count; i++) {
        struct black_hole moving = *black_hole_at(&all, i);
        size_t place = i;
        for (; place > 0 && black_hole_at(&all, place - 1)->body.id > moving.body.id; place--)
            *black_hole_at(&all, place) = *black_hole_at(&all, place - 1);
        *black_hole_at(&all, place) = moving;
    }
    return all;
}

static double square_distance(const double from[3], const double to[3], double box)
{
    double square = 0.0;
    for (int axis = 0; axis < 3; axis++) {
        double x = nearest_image(from[axis] - to[axis], box);
        square += x * x;
    }
    return square;
}

/* The squared distances of the nearest gas particles of a hole, ascending. */
struct nearest {
    double square[FEEDERS];
};

static void insert(struct nearest *nearest, double square)
{
    if (square >= nearest->square[FEEDERS - 1])
        return;
    int place = FEEDERS - 1;
    for (; place > 0 && nearest->square[place - 1] > square; place--)
        nearest->square[place] = nearest->square[place - 1];
    nearest->square[place] = square;
}

/* For every hole the nearest gas of all ranks. */
static struct nearest *find_nearest(const struct simulation *simulation, const struct store *holes)
{
    const struct store *gas = &simulation->species[GAS];
    double box = simulation->parameters.box;
    double farthest = FARTHEST_CELLS * box / simulation->parameters.mesh;
    size_t count = holes->count, ranks = (size_t)simulation->ranks;
    struct nearest *own = allocate(count, sizeof *own);
    struct nearest *all = allocate(count * ranks, sizeof *all);
    for (size_t h = 0; h < count; h++) {
        for (int n = 0; n < FEEDERS; n++)
            own[h].square[n] = farthest * farthest;
        const double *centre = body_at(holes, h)->position;
        for (size_t i = 0; i < gas->count; i++)
            insert(&own[h], square_distance(body_at(gas, i)->position, centre, box));
    }
    MPI_Allgather(own, (int)count * FEEDERS, MPI_DOUBLE, all, (int)count * FEEDERS, MPI_DOUBLE,
                  simulation->comm);
    for (size_t r = 0; r < ranks; r++) {
        for (size_t h = 0; r != (size_t)simulation->rank && h < count; h++) {
            for (int n = 0; n < FEEDERS; n++)
                insert(&own[h], all[r * count + h].square[n]);
        }
    }
    free(all);
    return own;
}

/* What the gas around a hole adds up to. */
enum { SUM_MASS, SUM_DENSITY, SUM_SOUND, SUM_VELOCITY, SUM_COUNT = SUM_VELOCITY + 3 };

/* The most bound gas particle within a mesh cell of a hole. */
struct bottom {
    double potential;
    double position[3];
};

struct around {
    double sum[SUM_COUNT];
    struct bottom bottom;
};

static void add_around(const struct simulation *simulation, const struct black_hole *hole,
                       struct around *around)
{
    const struct store *store = &simulation->species[GAS];
    double box = simulation->parameters.box, a = simulation->clock.scale_factor;
    double cell = box / simulation->parameters.mesh;
    for (size_t i = 0; i < store->count; i++) {
        const struct gas *gas = gas_at(store, i);
        double square = square_distance(gas->body.position, hole->body.position, box);
        if (square >= hole->radius * hole->radius)
            continue;
        double weight = gas->body.mass * kernel_shape(sqrt(square) / hole->radius);
        double sound = ADIABATIC_INDEX * (ADIABATIC_INDEX - 1.0) * gas->internal_energy;
        around->sum[SUM_MASS] += gas->body.mass;
        around->sum[SUM_DENSITY] += weight;
        around->sum[SUM_SOUND] += weight * sound;
        for (int axis = 0; axis < 3; axis++)
            around->sum[SUM_VELOCITY + axis] += weight * gas->body.velocity[axis] / a;
        if (square < cell * cell && gas->coupling_time <= 0.0 &&
            gas->body.potential < around->bottom.potential) {
            around->bottom.potential = gas->body.potential;
            memcpy(around->bottom.position, gas->body.position, sizeof around->bottom.position);
        }
    }
}

/* Sums over ranks in the order of ranks, so that all get the same bits. */
static struct around *look_around(const struct simulation *simulation, const struct store *holes)
{
    size_t count = holes->count, ranks = (size_t)simulation->ranks;
    struct around *own = allocate(count, sizeof *own), *all = allocate(count * ranks, sizeof *all);
    for (size_t h = 0; h < count; h++) {
        own[h].bottom.potential = INFINITY;
        add_around(simulation, black_hole_at(holes, h), &own[h]);
    }
    int doubles = (int)(sizeof *own / sizeof(double));
    MPI_Allgather(own, (int)count * doubles, MPI_DOUBLE, all, (int)count * doubles, MPI_DOUBLE,
                  simulation->comm);
    for (size_t h = 0; h < count; h++) {
        own[h] = all[h];
        for (size_t r = 1; r < ranks; r++) {
            const struct around *other = &all[r * count + h];
            for (int s = 0; s < SUM_COUNT; s++)
                own[h].sum[s] += other->sum[s];
            if (other->bottom.potential < own[h].bottom.potential)
                own[h].bottom = other->bottom;
        }
    }
    free(all);
    return own;
}

/* 4 pi G^2 M^2 rho / (c^2 + v^2)^(3/2), boosted, capped at Eddington; physical quantities. */
static double accretion_rate(const struct simulation *simulation, const struct black_hole *hole,
                             const struct around *around)
{
    const struct parameters *parameters = &simulation->parameters;
    double a = simulation->clock.scale_factor, weight = around->sum[SUM_DENSITY];
    if (weight <= 0.0)
        return 0.0;
    double size = a * hole->radius;
    double density = weight / (size * size * size);
    double square = around->sum[SUM_SOUND] / weight;
    for (int axis = 0; axis < 3; axis++) {
        double relative =
            hole->body.velocity[axis] / a - around->sum[SUM_VELOCITY + axis] / weight;
        square += relative * relative;
    }
    double mass = hole->subgrid_mass;
    double bondi = parameters->hole_boost * 4.0 * PI * GRAVITY * GRAVITY * mass * mass * density /
                   (square * sqrt(square));
    /* Growth time sigma_T c / (4 pi G m_p) in units of time. */
    double growth_time = THOMSON_CM2 * LIGHT_KM_S * 1e5 / (4.0 * PI * GRAVITY_CGS * PROTON_GRAM) /
                         TIME_SECONDS_H * parameters->cosmology.hubble;
    return fmin(bondi, mass / (parameters->hole_radiative * growth_time));
}

static void grow(const struct simulation *simulation, struct black_hole *hole, double time_step)
{
    const struct parameters *parameters = &simulation->parameters;
    double accreted = hole->accretion_rate * time_step;
    hole->subgrid_mass += (1.0 - parameters->hole_radiative) * accreted;
    hole->energy_reservoir += parameters->hole_radiative * parameters->hole_coupling * accreted *
                              LIGHT_KM_S * LIGHT_KM_S;
}

/* What gas lost to each hole, or was given by it. */
enum { LOST_MASS, LOST_METALS, LOST_MOMENTUM, GIVEN_ENERGY = LOST_MOMENTUM + 3, EXCHANGE_COUNT };

static void heat(struct simulation *simulation, struct gas *gas, double energy_per_mass,
                 double *given)
{
    double energy = gas->body.mass * energy_per_mass;
    gas->internal_energy += energy_per_mass;
    *given += energy;
    simulation->totals.heat_injected += energy;
    struct event *event = store_append(&simulation->events);
    event->channel = HOLE_HEATING;
    event->id = gas->body.id;
    event->mass = gas->body.mass;
    event->energy = energy;
    memcpy(event->position, gas->body.position, sizeof event->position);
}

/* Heats the nearest particles that the reservoir suffices for, swallows some. */
static void act_on_gas(struct simulation *simulation, const struct black_hole *hole,
                       const struct nearest *nearest, const struct around *around,
                       double exchange[EXCHANGE_COUNT])
{
    const struct parameters *parameters = &simulation->parameters;
    struct store *store = &simulation->species[GAS];
    double jump = parameters->hole_kelvin / KELVIN_PER_ENERGY;
    double mean_mass = around->sum[SUM_MASS] / FEEDERS;
    int heated = mean_mass > 0.0 ? (int)fmin(FEEDERS, hole->energy_reservoir / (mean_mass * jump)) : 0;
    double heated_square = heated > 0 ? nearest->square[heated - 1] : -1.0;
    double deficit = hole->subgrid_mass - hole->body.mass;
    double radius_square = hole->radius * hole->radius;
    for (size_t i = 0; i < store->count; i++) {
        struct gas *gas = gas_at(store, i);
        double square =
            square_distance(gas->body.position, hole->body.position, parameters->box);
        if (square >= radius_square || gas->gone)
            continue;
        double share = kernel_shape(sqrt(square / radius_square)) / around->sum[SUM_DENSITY];
        uint64_t key = gas->body.id ^ chance_mix(hole->body.id);
        if (deficit > 0.0 && chance(parameters->seed, CHANCE_SWALLOW, key,
                                    simulation->clock.step) < deficit * share) {
            exchange[LOST_MASS] += gas->body.mass;
            exchange[LOST_METALS] += gas->body.mass * gas->metallicity;
            for (int axis = 0; axis < 3; axis++)
                exchange[LOST_MOMENTUM + axis] += gas->body.mass * gas->body.velocity[axis];
            gas->gone = 1;
        } else if (square <= heated_square) {
            heat(simulation, gas, jump, &exchange[GIVEN_ENERGY]);
        }
    }
}

static void settle(struct black_hole *hole, const double exchange[EXCHANGE_COUNT])
{
    double mass = hole->body.mass + exchange[LOST_MASS];
    for (int axis = 0; axis < 3; axis++)
        hole->body.velocity[axis] = (hole->body.mass * hole->body.velocity[axis] +
                                     exchange[LOST_MOMENTUM + axis]) / mass;
    hole->body.mass = mass;
    hole->metal_mass += exchange[LOST_METALS];
    hole->energy_reservoir = fmax(0.0, hole->energy_reservoir - exchange[GIVEN_ENERGY]);
}

/* A hole far heavier than anything around it would sink; ours are too light for that, so they are
 * led: to the most bound gas in reach, at the mean velocity of the gas. */
static void sink(const struct simulation *simulation, struct black_hole *hole,
                 const struct around *around)
{
    if (around->sum[SUM_DENSITY] <= 0.0)
        return;
    if (around->bottom.potential < hole->body.potential) {
        memcpy(hole->body.position, around->bottom.position, sizeof hole->body.position);
        hole->body.potential = around->bottom.potential;
    }
    for (int axis = 0; axis < 3; axis++)
        hole->body.velocity[axis] = simulation->clock.scale_factor *
                                    around->sum[SUM_VELOCITY + axis] / around->sum[SUM_DENSITY];
}

/* Holes within half a mesh cell of each other, where gravity cannot tell them apart, become one. */
static void merge(const struct simulation *simulation, struct store *holes, int *eaten)
{
    double close = 0.5 * simulation->parameters.box / simulation->parameters.mesh;
    for (size_t i = 0; i < holes->count; i++) {
        struct black_hole *first = black_hole_at(holes, i);
        for (size_t j = i + 1; j < holes->count && !eaten[i]; j++) {
            struct black_hole *second = black_hole_at(holes, j);
            if (eaten[j] || square_distance(first->body.position, second->body.position,
                                            simulation->parameters.box) > close * close)
                continue;
            int first_stays = first->subgrid_mass >= second->subgrid_mass;
            struct black_hole *stays = first_stays ? first : second;
            const struct black_hole *goes = first_stays ? second : first;
            eaten[first_stays ? j : i] = 1;
            double exchange[EXCHANGE_COUNT] = { 0.0 };
            exchange[LOST_MASS] = goes->body.mass;
            exchange[LOST_METALS] = goes->metal_mass;
            for (int axis = 0; axis < 3; axis++)
                exchange[LOST_MOMENTUM + axis] = goes->body.mass * goes->body.velocity[axis];
            exchange[GIVEN_ENERGY] = -goes->energy_reservoir;
            settle(stays, exchange);
            stays->subgrid_mass += goes->subgrid_mass;
            stays->accretion_rate += goes->accretion_rate;
        }
    }
}

/* Writes the outcome back to the holes that live here; those eaten disappear. */
static void store_outcome(struct simulation *simulation, const struct store *holes,
                          const int *eaten)
{
    struct store *own = &simulation->species[BLACK_HOLES];
    size_t kept = 0;
    for (size_t i = 0; i < own->count; i++) {
        for (size_t h = 0; h < holes->count; h++) {
            if (black_hole_at(holes, h)->body.id != black_hole_at(own, i)->body.id)
                continue;
            if (eaten[h])
                simulation->totals.mergers += 1.0;
            else
                *black_hole_at(own, kept++) = *black_hole_at(holes, h);
            break;
        }
    }
    own->count = kept;
}

void black_holes(struct simulation *simulation, double time_step)
{
    struct store holes = all_black_holes(simulation);
    size_t count = holes.count;
    if (count > 0) {
        struct nearest *nearest = find_nearest(simulation, &holes);
        for (size_t h = 0; h < count; h++)
            black_hole_at(&holes, h)->radius = sqrt(nearest[h].square[FEEDERS - 1]);
        struct around *around = look_around(simulation, &holes);
        double *mine = allocate(count * EXCHANGE_COUNT, sizeof *mine);
        double *all = allocate(count * EXCHANGE_COUNT, sizeof *all);
        for (size_t h = 0; h < count; h++) {
            struct black_hole *hole = black_hole_at(&holes, h);
            hole->accretion_rate = accretion_rate(simulation, hole, &around[h]);
            grow(simulation, hole, time_step);
            act_on_gas(simulation, hole, &nearest[h], &around[h], mine + h * EXCHANGE_COUNT);
        }
        MPI_Allreduce(mine, all, (int)count * EXCHANGE_COUNT, MPI_DOUBLE, MPI_SUM,
                      simulation->comm);
        for (size_t h = 0; h < count; h++) {
            settle(black_hole_at(&holes, h), all + h * EXCHANGE_COUNT);
            sink(simulation, black_hole_at(&holes, h), &around[h]);
        }
        int *eaten = allocate(count, sizeof *eaten);
        merge(simulation, &holes, eaten);
        store_outcome(simulation, &holes, eaten);
        free(eaten);
        free(all);
        free(mine);
        free(around);
        free(nearest);
        drop_gone(&simulation->species[GAS]);
    }
    seed_black_hole(simulation, &holes);
    store_free(&holes);
}
