#include "arrays.h"

#include <stdlib.h>

#include "statistics.h"

/* A 64-bit mixer (Steele, Lea & Flood 2014, OOPSLA, the output function of their generator). */
static uint64_t mixed(uint64_t state)
{
    state = (state + 1) * 0x9e3779b97f4a7c15u;
    state = (state ^ (state >> 30)) * 0xbf58476d1ce4e5b9u;
    state = (state ^ (state >> 27)) * 0x94d049bb133111ebu;
    return state ^ (state >> 31);
}

/* A number of [0, 1) for each element and quantity. */
static double chance(uint64_t element, uint64_t quantity)
{
    return (double)(mixed(element * 16 + quantity) >> 11) * 0x1p-53;
}

static void put(void *array, enum precision precision, size_t index, double value)
{
    if (precision == SINGLE)
        ((float *)array)[index] = (float)value;
    else
        ((double *)array)[index] = value;
}

void gas_fill(const struct gas *gas, uint64_t first)
{
    enum precision precision = gas->precision;
    void *const scalars[4] = { gas->mass, gas->star_formation_rate, gas->internal_energy, gas->metallicity };
#pragma omp parallel for schedule(static)
    for (size_t i = 0; i < gas->count; i++) {
        uint64_t element = first + i;
        for (uint64_t axis = 0; axis < 3; axis++) {
            put(gas->position, precision, 3 * i + axis, BOX * chance(element, axis));
            /* Wide enough that the Hubble flow does not decide who moves outward. */
            put(gas->velocity, precision, 3 * i + axis, 2000.0 * chance(element, 3 + axis) - 1000.0);
        }
        for (uint64_t which = 0; which < 4; which++)
            put(scalars[which], precision, i, 1e-4 * (1.0 + chance(element, 6 + which)));
    }
}

static void *room(size_t bytes)
{
    /* Arrays begin with a line of the cache, as allocators of hosts see to. */
    void *place = aligned_alloc(64, (bytes + 63) / 64 * 64 + 64);
    if (place == NULL)
        give_up("no memory for arrays; use fewer elements");
    return place;
}

struct gas gas_scattered(enum precision precision, uint64_t first, size_t count)
{
    size_t bytes = (size_t)precision * count;
    struct gas gas = { precision,   count,       room(3 * bytes), room(3 * bytes),
                       room(bytes), room(bytes), room(bytes),     room(bytes) };
    gas_fill(&gas, first);
    return gas;
}

void gas_free(struct gas *gas)
{
    void *const arrays[] = { gas->position,        gas->velocity,    gas->mass, gas->star_formation_rate,
                             gas->internal_energy, gas->metallicity };
    for (size_t a = 0; a < sizeof arrays / sizeof arrays[0]; a++)
        free(arrays[a]);
    *gas = (struct gas){ .precision = gas->precision };
}

static void *moved(void *array, enum precision precision, size_t numbers)
{
    return (char *)array + (size_t)precision * numbers;
}

struct gas gas_part(const struct gas *gas, size_t from, size_t count)
{
    enum precision p = gas->precision;
    return (struct gas){ p,
                         count,
                         moved(gas->position, p, 3 * from),
                         moved(gas->velocity, p, 3 * from),
                         moved(gas->mass, p, from),
                         moved(gas->star_formation_rate, p, from),
                         moved(gas->internal_energy, p, from),
                         moved(gas->metallicity, p, from) };
}
