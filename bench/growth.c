/* How the cost of a measured step grows, for SCALING.md: with elements, gauges, shells, stations, threads.
 *
 *   growth ELEMENTS REPETITIONS THREADS SERIES      stations are measured when LARGEST_STATIONS is above 0
 *
 * Prints tables in Markdown: medians over the repetitions, in which all settings take their turn. */
#include <omp.h>
#include <stdio.h>
#include <stdlib.h>

#include "library.h"
#include "statistics.h"

enum { SETTINGS = 16 };

struct setting {
    char label[64];
    struct request request;
    size_t elements;
    int threads;
};

/* Measures every setting in turn, and prints a line for each. */
static void measure(const char *title, const struct setting *settings, int count, const struct gas *gas,
                    int repetitions, const char *series)
{
    limno_run *runs[SETTINGS];
    struct figure figures[SETTINGS];
    for (int s = 0; s < count; s++) {
        char name[4096];
        snprintf(name, sizeof name, "%s.%s.%d.limno", series, title, s);
        runs[s] = library_open(name, &settings[s].request, settings[s].threads);
        figures[s] = figure_of(settings[s].label, repetitions);
    }
    for (int r = -1; r < repetitions; r++) {
        for (int s = 0; s < count; s++) {
            struct gas part = gas_part(gas, 0, settings[s].elements);
            settle();
            double start = now();
            library_step(runs[s], &part, (uint64_t)(r + 2));
            if (r >= 0)
                figure_add(&figures[s], now() - start);
        }
    }
    printf("| %s | median ms | least ms | ns per element |\n| --- | --- | --- | --- |\n", title);
    for (int s = 0; s < count; s++) {
        double median = figure_median(&figures[s]), least = figures[s].values[0];
        printf("| %s | %.3f | %.3f | %.2f |\n", settings[s].label, 1e3 * median, 1e3 * least,
               1e9 * median / (double)settings[s].elements);
        free(figures[s].values);
        library_close(runs[s]);
    }
    printf("\n");
    fflush(stdout);
}

static struct setting *add(struct setting *settings, int *count, size_t elements, int threads)
{
    struct setting *setting = &settings[(*count)++];
    *setting = (struct setting){ "", usual_request(), elements, threads };
    return setting;
}

int main(int argc, char **argv)
{
    if (argc != 5 && argc != 6)
        give_up("usage: growth ELEMENTS REPETITIONS THREADS SERIES [LARGEST_STATIONS]");
    size_t n = (size_t)number_of("ELEMENTS", argv[1], 10000, 1LL << 40);
    int repetitions = (int)number_of("REPETITIONS", argv[2], 1, 10000);
    int threads = (int)number_of("THREADS", argv[3], 1, 4096);
    int most = argc == 6 ? (int)number_of("LARGEST_STATIONS", argv[5], 0, 1000000) : 0;
    const char *series = argv[4];
    omp_set_num_threads(threads);
    struct gas gas = gas_scattered(SINGLE, 0, n);
    struct setting settings[SETTINGS];
    int count = 0;
    for (size_t elements = 10000; elements < n; elements *= 10)
        snprintf(add(settings, &count, elements, threads)->label, 64, "%zu", elements);
    snprintf(add(settings, &count, n, threads)->label, 64, "%zu", n);
    measure("elements", settings, count, &gas, repetitions, series);

    const struct {
        const char *label;
        int gauges;
    } sets[] = { { "star_formation", STAR_FORMATION },
                 { "mass_budget", MASS_BUDGET },
                 { "star_formation, mass_budget", STAR_FORMATION | MASS_BUDGET },
                 { "wind_shells", WIND_SHELLS },
                 { "all five", ALL_GAUGES } };
    count = 0;
    for (size_t s = 0; s < sizeof sets / sizeof sets[0]; s++) {
        struct setting *setting = add(settings, &count, n, threads);
        snprintf(setting->label, 64, "%s", sets[s].label);
        setting->request.gauges = sets[s].gauges;
    }
    measure("gauges", settings, count, &gas, repetitions, series);

    count = 0;
    for (int shells = 1; shells <= 1000; shells = shells == 1 ? 8 : shells == 8 ? 64 : shells == 64 ? 1000 : 1001) {
        struct setting *setting = add(settings, &count, n, threads);
        snprintf(setting->label, 64, "%d", shells);
        setting->request.shells = shells;
    }
    measure("shells", settings, count, &gas, repetitions, series);

    count = 0;
    for (int stations = 1; stations <= most; stations *= 10) {
        struct setting *setting = add(settings, &count, n, threads);
        snprintf(setting->label, 64, "%d", stations);
        setting->request = many_stations_request(stations);
    }
    if (count > 0)
        measure("stations", settings, count, &gas, repetitions, series);

    count = 0;
    for (int t = 1; t <= threads; t *= 2)
        snprintf(add(settings, &count, n, t)->label, 64, "%d", t);
    measure("threads", settings, count, &gas, repetitions, series);
    gas_free(&gas);
    return 0;
}
