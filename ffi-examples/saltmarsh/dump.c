#include "dump.h"

#include <stddef.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define NAME_LENGTH 32

enum column_type { NUMBER, WHOLE64, WHOLE32 };

struct column {
    char name[NAME_LENGTH];
    size_t offset;
    enum column_type type;
};

#define COLUMN(type, member) { #member, offsetof(type, member), NUMBER }
#define BODY_COLUMNS                                                              \
    { "id", offsetof(struct body, id), WHOLE64 },                                 \
    { "position_x", offsetof(struct body, position), NUMBER },                    \
    { "position_y", offsetof(struct body, position) + sizeof(double), NUMBER },   \
    { "position_z", offsetof(struct body, position) + 2 * sizeof(double), NUMBER }, \
    { "velocity_x", offsetof(struct body, velocity), NUMBER },                    \
    { "velocity_y", offsetof(struct body, velocity) + sizeof(double), NUMBER },   \
    { "velocity_z", offsetof(struct body, velocity) + 2 * sizeof(double), NUMBER }, \
    COLUMN(struct body, mass)

static const struct column dark_matter_columns[] = { BODY_COLUMNS };
static const struct column gas_columns[] = {
    BODY_COLUMNS,
    COLUMN(struct gas, internal_energy),
    COLUMN(struct gas, density),
    COLUMN(struct gas, smoothing_length),
    COLUMN(struct gas, metallicity),
    COLUMN(struct gas, star_formation_rate),
    COLUMN(struct gas, coupling_time),
};
static const struct column star_columns[] = {
    BODY_COLUMNS,
    COLUMN(struct star, birth_mass),
    COLUMN(struct star, birth_scale_factor),
    COLUMN(struct star, metallicity),
};
static const struct column black_hole_columns[] = {
    BODY_COLUMNS,
    COLUMN(struct black_hole, subgrid_mass),
    COLUMN(struct black_hole, accretion_rate),
    COLUMN(struct black_hole, radius),
    COLUMN(struct black_hole, energy_reservoir),
    COLUMN(struct black_hole, metal_mass),
};
static const struct column event_columns[] = {
    { "channel", offsetof(struct event, channel), WHOLE32 },
    { "id", offsetof(struct event, id), WHOLE64 },
    COLUMN(struct event, mass),
    COLUMN(struct event, momentum),
    COLUMN(struct event, energy),
    COLUMN(struct event, metals),
    { "position_x", offsetof(struct event, position), NUMBER },
    { "position_y", offsetof(struct event, position) + sizeof(double), NUMBER },
    { "position_z", offsetof(struct event, position) + 2 * sizeof(double), NUMBER },
};

struct table {
    char name[NAME_LENGTH];
    const struct store *store;
    const struct column *columns;
    size_t column_count;
};

static double value_of(const void *item, const struct column *column)
{
    const unsigned char *place = (const unsigned char *)item + column->offset;
    if (column->type == NUMBER) {
        double number;
        memcpy(&number, place, sizeof number);
        return number;
    }
    if (column->type == WHOLE64) {
        uint64_t whole;
        memcpy(&whole, place, sizeof whole);
        return (double)whole;
    }
    uint32_t whole;
    memcpy(&whole, place, sizeof whole);
    return (double)whole;
}

/* On rank 0 the rows of all ranks, in the order of ranks. */
static double *gather_rows(const struct simulation *simulation, const struct table *table,
                           uint64_t *rows)
{
    size_t columns = table->column_count, count = table->store->count;
    double *mine = allocate(count * columns, sizeof *mine);
    for (size_t i = 0; i < count; i++) {
        for (size_t c = 0; c < columns; c++)
            mine[i * columns + c] = value_of(store_at(table->store, i), &table->columns[c]);
    }
    size_t ranks = (size_t)simulation->ranks;
    int *counts = allocate(2 * ranks, sizeof *counts), *starts = counts + ranks;
    int own = (int)(count * columns), total = 0;
    MPI_Gather(&own, 1, MPI_INT, counts, 1, MPI_INT, 0, simulation->comm);
    for (size_t r = 0; r < ranks; r++) {
        starts[r] = total;
        total += counts[r];
    }
    double *all = simulation->rank == 0 ? allocate((size_t)total, sizeof *all) : NULL;
    MPI_Gatherv(mine, own, MPI_DOUBLE, all, counts, starts, MPI_DOUBLE, 0, simulation->comm);
    free(counts);
    free(mine);
    *rows = (uint64_t)total / columns;
    return all;
}

static void put(FILE *file, const void *what, size_t size, size_t count)
{
    if (count > 0 && fwrite(what, size, count, file) != count)
        fatal("cannot write the dump; is the disk full?");
}

static void put_table(FILE *file, const struct table *table, const double *values, uint64_t rows)
{
    uint64_t columns = table->column_count;
    put(file, table->name, NAME_LENGTH, 1);
    put(file, &rows, sizeof rows, 1);
    put(file, &columns, sizeof columns, 1);
    for (size_t c = 0; c < table->column_count; c++) {
        /* Members of the body are named without where they sit. */
        char name[NAME_LENGTH] = { 0 };
        memcpy(name, table->columns[c].name, NAME_LENGTH);
        put(file, name, NAME_LENGTH, 1);
    }
    put(file, values, sizeof *values, (size_t)rows * table->column_count);
}

#define TABLE(name, store, columns) { name, store, columns, sizeof columns / sizeof columns[0] }

void dump_particles(const struct simulation *simulation, const char *path)
{
    const struct store *species = simulation->species;
    const struct table tables[] = {
        TABLE("dark_matter", &species[DARK_MATTER], dark_matter_columns),
        TABLE("gas", &species[GAS], gas_columns),
        TABLE("stars", &species[STARS], star_columns),
        TABLE("black_holes", &species[BLACK_HOLES], black_hole_columns),
        TABLE("events", &simulation->events, event_columns),
    };
    const uint64_t table_count = sizeof tables / sizeof tables[0];
    FILE *file = NULL;
    if (simulation->rank == 0) {
        file = fopen(path, "wb");
        if (file == NULL) {
            perror(path);
            fatal("cannot write the dump; check that the folder exists and is writable");
        }
        const struct clock *clock = &simulation->clock;
        const uint64_t numbers[2] = { 1, clock->step };
        const double clocks[6] = { clock->scale_factor, clock->time,
                                   clock->scale_step,   clock->time_step,
                                   simulation->parameters.box,
                                   simulation->parameters.cosmology.hubble };
        put(file, "SALTDUMP", 1, 8);
        put(file, numbers, sizeof numbers[0], 2);
        put(file, clocks, sizeof clocks[0], 6);
        put(file, &table_count, sizeof table_count, 1);
    }
    for (size_t t = 0; t < table_count; t++) {
        uint64_t rows;
        double *values = gather_rows(simulation, &tables[t], &rows);
        if (file != NULL)
            put_table(file, &tables[t], values, rows);
        free(values);
    }
    if (file != NULL && fclose(file) != 0)
        fatal("cannot write the dump; is the disk full?");
}
