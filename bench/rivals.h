/* What the library is held against: the same numbers from the same arrays, by other ways. */
#ifndef BENCH_RIVALS_H
#define BENCH_RIVALS_H

#include "arrays.h"
#include "quantities.h"

/* The read limit: the fastest plain pass found over the bytes that the gauges read, or over all that is lent. */
enum { READ_WAYS = 4 };
extern const char *const read_ways[READ_WAYS];
enum read_what { WHAT_GAUGES_READ, ALL_THAT_IS_LENT };
uint64_t read_plainly(int way, const struct gas *gas, enum read_what what);

/* One loop with everything in it, as the author of a host would write it, in double precision. */
struct quantities fused(const struct gas *gas, const struct geometry *where);

/* One loop for each quantity, as most codes have it. */
struct quantities one_loop_each(const struct gas *gas, const struct geometry *where);

/* Tuned for speed in single precision; float arrays only. */
struct quantities tuned(const struct gas *gas, const struct geometry *where);
/* Which of its two forms was built. */
extern const char *const tuned_form;

#endif
