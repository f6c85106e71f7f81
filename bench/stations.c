/* Many stations against one.
 *
 *   stations ELEMENTS REPETITIONS THREADS SERIES STATIONS
 *
 * One station has eight shells that hold a quarter of the elements; many have shells so small that an element is within
 * reach of 0.3 of them on average. Both measure the same arrays in turn; ratios are formed in each repetition. */
#include <omp.h>
#include <stdio.h>
#include <string.h>

#include "library.h"
#include "statistics.h"

static double time_of_step(limno_run *run, const struct gas *gas, uint64_t step)
{
    settle();
    double start = now();
    library_step(run, gas, step);
    return now() - start;
}

static limno_run *opened(const char *series, const char *kind, const struct request *request, int threads)
{
    char name[4096];
    snprintf(name, sizeof name, "%s.%s.limno", series, kind);
    return library_open(name, request, threads);
}

int main(int argc, char **argv)
{
    if (argc != 6)
        give_up("usage: stations ELEMENTS REPETITIONS THREADS SERIES STATIONS");
    size_t n = (size_t)number_of("ELEMENTS", argv[1], 1, 1LL << 40);
    int repetitions = (int)number_of("REPETITIONS", argv[2], 1, 10000);
    int threads = (int)number_of("THREADS", argv[3], 1, 4096), stations = (int)number_of("STATIONS", argv[5], 1, 1000000);
    omp_set_num_threads(threads);
    struct gas gas = gas_scattered(SINGLE, 0, n);
    struct request one = usual_request(), many = many_stations_request(stations), small = many_stations_request(stations);
    /* The shells of the many around one place: nearly everything is far away. */
    small.stations = 0;
    limno_run *run_of_one = opened(argv[4], "one", &one, threads);
    limno_run *run_of_many = opened(argv[4], "many", &many, threads);
    limno_run *run_of_small = opened(argv[4], "small", &small, threads);
    char names[4][64];
    snprintf(names[0], sizeof names[0], "stations_1_seconds");
    snprintf(names[1], sizeof names[1], "stations_%d_seconds", stations);
    snprintf(names[2], sizeof names[2], "stations_%d_over_1", stations);
    snprintf(names[3], sizeof names[3], "station_far_seconds");
    struct figure seconds = figure_of(names[0], repetitions), many_seconds = figure_of(names[1], repetitions),
                  ratio = figure_of(names[2], repetitions), far_seconds = figure_of(names[3], repetitions);
    for (int r = -1; r < repetitions; r++) {
        uint64_t step = (uint64_t)(r + 2);
        double few = time_of_step(run_of_one, &gas, step), full = time_of_step(run_of_many, &gas, step);
        double far = time_of_step(run_of_small, &gas, step);
        if (r < 0)
            continue;
        figure_add(&seconds, few), figure_add(&many_seconds, full), figure_add(&ratio, full / few);
        figure_add(&far_seconds, far);
    }
    figure_tell(&seconds), figure_tell(&far_seconds), figure_tell(&many_seconds), figure_tell(&ratio);
    library_close(run_of_one);
    library_close(run_of_many);
    library_close(run_of_small);
    gas_free(&gas);
    return 0;
}
