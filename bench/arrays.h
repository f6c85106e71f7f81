/* The arrays of a host: gas scattered over its box.
 *
 * Elements lie in memory in no order of space, which is the hard case: whether an element is within a shell cannot be
 * foreseen from the one before. Every number is a hash of the element's index, so the arrays are the same on any
 * number of threads and in every program that fills them. */
#ifndef BENCH_ARRAYS_H
#define BENCH_ARRAYS_H

#include <stddef.h>
#include <stdint.h>

/* Edge of the box, in the host's length. */
#define BOX 10.0

enum precision { SINGLE = 4, DOUBLE = 8 };

/* All arrays are of float or all of double; position and velocity hold x, y, z of each element in turn. */
struct gas {
    enum precision precision;
    size_t count;
    void *position, *velocity, *mass, *star_formation_rate, *internal_energy, *metallicity;
};

/* Makes room and fills it with the elements `first` to `first + count - 1`, each thread the part it will read. */
struct gas gas_scattered(enum precision precision, uint64_t first, size_t count);
void gas_free(struct gas *gas);

/* The part from element `from` on. */
struct gas gas_part(const struct gas *gas, size_t from, size_t count);

/* Fills arrays that are there; for callers who bring their own. */
void gas_fill(const struct gas *gas, uint64_t first);

#endif
