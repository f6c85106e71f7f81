/* What a host does to be measured: describe the arrays once, then each step say the time, lend
 * the arrays, post the events, and enter. Nothing is copied, and nothing here can stop the run: if
 * the library is unhappy, its reason is printed and the universe goes on. */
#include "lending.h"

#include <stdio.h>
#include <stdlib.h>

#ifdef SALTMARSH_PLAIN

struct lending *lending_open(const struct simulation *simulation)
{
    if (simulation->parameters.series_path != NULL && simulation->rank == 0)
        fprintf(stderr, "saltmarsh: built without limnograph, so nothing is recorded\n");
    return NULL;
}

void lending_step(struct lending *lending, const struct simulation *simulation)
{
    (void)lending;
    (void)simulation;
}

void lending_close(struct lending *lending)
{
    (void)lending;
}

#else

#include <limnograph_mpi.h>
#include <stddef.h>

/* One field of one species: where it lies within the struct. */
struct field {
    enum species species;
    const char *name;
    size_t offset;
    limno_scalar scalar;
    uint32_t components;
};

#define BODY_FIELDS(species)                                                       \
    { species, "position", offsetof(struct body, position), LIMNO_F64, 3 },        \
    { species, "velocity", offsetof(struct body, velocity), LIMNO_F64, 3 },        \
    { species, "mass", offsetof(struct body, mass), LIMNO_F64, 1 },                \
    { species, "id", offsetof(struct body, id), LIMNO_U64, 1 }
#define NUMBER(species, type, member, name) { species, name, offsetof(type, member), LIMNO_F64, 1 }

static const struct field fields[] = {
    BODY_FIELDS(DARK_MATTER),
    BODY_FIELDS(GAS),
    NUMBER(GAS, struct gas, star_formation_rate, "star_formation_rate"),
    NUMBER(GAS, struct gas, internal_energy, "internal_energy"),
    NUMBER(GAS, struct gas, density, "density"),
    NUMBER(GAS, struct gas, smoothing_length, "smoothing_length"),
    NUMBER(GAS, struct gas, metallicity, "metallicity"),
    BODY_FIELDS(STARS),
    NUMBER(STARS, struct star, birth_mass, "birth_mass"),
    NUMBER(STARS, struct star, birth_scale_factor, "birth_time"),
    NUMBER(STARS, struct star, metallicity, "metallicity"),
    BODY_FIELDS(BLACK_HOLES),
    NUMBER(BLACK_HOLES, struct black_hole, subgrid_mass, "subgrid_mass"),
    NUMBER(BLACK_HOLES, struct black_hole, accretion_rate, "accretion_rate"),
};
#define FIELD_COUNT (sizeof fields / sizeof fields[0])

static const char *const species_names[SPECIES_COUNT] = {
    [DARK_MATTER] = "dark_matter",
    [GAS] = "gas",
    [STARS] = "star",
    [BLACK_HOLES] = "black_hole",
};

static const char *const channel_names[CHANNEL_COUNT] = {
    [WIND_LAUNCH] = "wind",
    [STELLAR_RETURN] = "stellar_return",
    [HOLE_HEATING] = "black_hole",
};

/* Events of one channel, array by array, as the library takes them. */
struct batch {
    struct store mass, momentum, energy, metals, position, id;
};

struct lending {
    limno_run *run;
    int32_t layouts[FIELD_COUNT];
    struct batch batch;
    limno_status last_status;
    int speaks;
};

/* Says why a call did not do all it should, once for each new reason. */
static void heed(struct lending *lending, limno_status status)
{
    if (status != LIMNO_OK && status != lending->last_status && lending->speaks)
        fprintf(stderr, "saltmarsh: %s: %s\n", limno_status_name(status),
                limno_last_error(lending->run));
    lending->last_status = status;
}

static void describe_fields(struct lending *lending, const struct simulation *simulation)
{
    for (size_t f = 0; f < FIELD_COUNT; f++) {
        limno_array array = LIMNO_ARRAY_INIT;
        array.scalar = fields[f].scalar;
        array.components = fields[f].components;
        array.stride = (ptrdiff_t)simulation->species[fields[f].species].item_size;
        heed(lending, limno_describe(lending->run, species_names[fields[f].species],
                                       fields[f].name, &array, &lending->layouts[f]));
    }
}

struct lending *lending_open(const struct simulation *simulation)
{
    const struct parameters *parameters = &simulation->parameters;
    if (parameters->series_path == NULL)
        return NULL;
    char description[160];
    snprintf(description, sizeof description, "Saltmarsh, variant %s, seed %llu, %d^3 particles",
             parameters->variant, (unsigned long long)parameters->seed, parameters->side);
    limno_options options = LIMNO_OPTIONS_INIT;
    options.host_name = "saltmarsh";
    options.host_version = "1.0";
    options.description = description;
    struct lending *lending = allocate(1, sizeof *lending);
    lending->speaks = simulation->rank == 0;
    limno_status status = limno_open_mpi(LIMNO_VERSION, parameters->config_path,
                                         parameters->series_path, &options, simulation->comm,
                                         &lending->run);
    if (status != LIMNO_OK) {
        if (lending->speaks)
            fprintf(stderr, "saltmarsh: goes on without a series: %s\n", limno_last_error(NULL));
        free(lending);
        return NULL;
    }
    describe_fields(lending, simulation);
    struct batch *batch = &lending->batch;
    store_init(&batch->mass, sizeof(double));
    store_init(&batch->momentum, sizeof(double));
    store_init(&batch->energy, sizeof(double));
    store_init(&batch->metals, sizeof(double));
    store_init(&batch->position, 3 * sizeof(double));
    store_init(&batch->id, sizeof(uint64_t));
    return lending;
}

static void put(struct store *store, size_t index, double value)
{
    double *place = store_at(store, index);
    *place = value;
}

/* Posts the events of one channel in one call. */
static void tally_channel(struct lending *lending, const struct store *events,
                          enum channel channel)
{
    struct batch *batch = &lending->batch;
    struct store *stores[] = { &batch->mass,   &batch->momentum, &batch->energy,
                               &batch->metals, &batch->position, &batch->id };
    for (size_t s = 0; s < sizeof stores / sizeof stores[0]; s++)
        store_resize(stores[s], events->count);
    size_t count = 0;
    for (size_t i = 0; i < events->count; i++) {
        const struct event *event = store_at(events, i);
        if (event->channel != channel)
            continue;
        put(&batch->mass, count, event->mass);
        put(&batch->momentum, count, event->momentum);
        put(&batch->energy, count, event->energy);
        put(&batch->metals, count, event->metals);
        double *position = store_at(&batch->position, count);
        for (int axis = 0; axis < 3; axis++)
            position[axis] = event->position[axis];
        uint64_t *id = store_at(&batch->id, count);
        *id = event->id;
        count++;
    }
    if (count == 0)
        return;
    limno_tally_batch posted = LIMNO_TALLY_BATCH_INIT;
    posted.channel = channel_names[channel];
    posted.count = count;
    posted.mass = store_at(&batch->mass, 0);
    posted.momentum = store_at(&batch->momentum, 0);
    posted.energy = store_at(&batch->energy, 0);
    posted.metals = store_at(&batch->metals, 0);
    posted.position = store_at(&batch->position, 0);
    posted.particle_id = store_at(&batch->id, 0);
    heed(lending, limno_tally(lending->run, &posted));
}

void lending_step(struct lending *lending, const struct simulation *simulation)
{
    if (lending == NULL)
        return;
    limno_clock clock = LIMNO_CLOCK_INIT;
    clock.step = simulation->clock.step;
    clock.time = simulation->clock.scale_factor;
    clock.step_length = simulation->clock.scale_step;
    clock.synchronised = 1;
    heed(lending, limno_mark(lending->run, &clock));
    for (size_t f = 0; f < FIELD_COUNT; f++) {
        const struct store *store = &simulation->species[fields[f].species];
        const void *first = store->count > 0 ? store->items + fields[f].offset : NULL;
        heed(lending, limno_lend_again(lending->run, lending->layouts[f], first, store->count));
    }
    for (int channel = 0; channel < CHANNEL_COUNT && simulation->events.count > 0; channel++)
        tally_channel(lending, &simulation->events, channel);
    heed(lending, limno_enter(lending->run));
}

void lending_close(struct lending *lending)
{
    if (lending == NULL)
        return;
    limno_status status = limno_close(lending->run);
    if (status != LIMNO_OK && lending->speaks)
        fprintf(stderr, "saltmarsh: closing the series: %s\n", limno_last_error(NULL));
    struct batch *batch = &lending->batch;
    store_free(&batch->mass);
    store_free(&batch->momentum);
    store_free(&batch->energy);
    store_free(&batch->metals);
    store_free(&batch->position);
    store_free(&batch->id);
    free(lending);
}

#endif
