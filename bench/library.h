/* The library as a host uses it, and its numbers read back from the series. */
#ifndef BENCH_LIBRARY_H
#define BENCH_LIBRARY_H

#include <limnograph.h>

#include "arrays.h"
#include "quantities.h"

/* Which gauges are on. */
enum gauges {
    STAR_FORMATION = 1,
    MASS_BUDGET = 2,
    TALLIES = 4,
    BLACK_HOLES = 8,
    WIND_SHELLS = 16,
    ALL_GAUGES = 31
};

/* What to measure. `stations` of 0 is the one station of `geometry_of`; otherwise so many stand at random in the box
 * and have shells of their own. */
struct request {
    int gauges;
    int shells;
    int stations;
    double inner, outer; /* radii of the first and the last edge, in the host's length */
};

/* All gauges, one station, eight shells that hold a quarter of the box. */
struct request usual_request(void);

/* Shells so small that an element is in reach of 0.3 stations on average. */
struct request many_stations_request(int stations);

/* The config of a request, to be freed. */
char *config_of(const struct request *request);

/* What the library makes of the usual request at the time of `library_step`. */
struct geometry usual_geometry(void);

limno_run *library_open(const char *series, const struct request *request, int threads);

/* One measured step: marks, lends all arrays, enters. */
void library_step(limno_run *run, const struct gas *gas, uint64_t step);

void library_must(limno_status status, limno_run *run);
void library_close(limno_run *run);

/* The last row of a series, by the program `limnograph`; in the host's units. */
struct quantities library_read_back(const char *program, const char *series);

#endif
