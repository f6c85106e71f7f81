/* A measured step beside its rivals on the same arrays.
 *
 *   sweep ELEMENTS REPETITIONS THREADS SERIES PROGRAM [single|double]
 *
 * In every repetition each takes its turn, so that ratios are of one moment; a ratio is formed in each repetition.
 * Before that all must agree on every number. Series
 * go to SERIES.limno and beside it; PROGRAM is the reader `limnograph`. */
#include <omp.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "library.h"
#include "rivals.h"
#include "statistics.h"

enum { TRIALS = 3 };

static volatile uint64_t kept; /* so that no pass is left out */

static double time_of_reading(int way, const struct gas *gas, enum read_what what)
{
    settle();
    double start = now();
    kept += read_plainly(way, gas, what);
    return now() - start;
}

/* The way whose best time over a few trials is the best. */
static int fastest_way(const struct gas *gas)
{
    double best[READ_WAYS];
    int fastest = 0;
    for (int trial = 0; trial < TRIALS; trial++) {
        for (int way = 0; way < READ_WAYS; way++) {
            double seconds = time_of_reading(way, gas, WHAT_GAUGES_READ);
            if (trial == 0 || seconds < best[way])
                best[way] = seconds;
        }
    }
    for (int way = 0; way < READ_WAYS; way++) {
        fprintf(stderr, "  reading %-45s %8.2f ms\n", read_ways[way], 1e3 * best[way]);
        if (best[way] < best[fastest])
            fastest = way;
    }
    return fastest;
}

typedef struct quantities rival(const struct gas *gas, const struct geometry *where);

static double time_of(rival *measure, const struct gas *gas, const struct geometry *where)
{
    settle();
    double start = now();
    kept += measure(gas, where).elements[0];
    return now() - start;
}

static double time_of_step(limno_run *run, const struct gas *gas, uint64_t step)
{
    settle();
    double start = now();
    library_step(run, gas, step);
    return now() - start;
}

static void must_agree_with_library(const struct gas *gas, const struct geometry *where, const char *program,
                                    const char *series)
{
    struct quantities library = library_read_back(program, series), other = fused(gas, where);
    quantities_must_agree("the fused loop", &other, &library, 1e-9);
    if (gas->precision == SINGLE) {
        other = one_loop_each(gas, where);
        quantities_must_agree("one loop for each", &other, &library, 1e-9);
        other = tuned(gas, where);
        quantities_must_agree("the tuned rival", &other, &library, 1e-5);
    }
    uint64_t within = 0;
    for (int shell = 0; shell < SHELLS; shell++)
        within += library.elements[shell];
    fprintf(stderr, "  all agree; the shells hold %.3f of the elements\n", (double)within / (double)gas->count);
}

/* The library closed and read back before anything is timed. */
static void check_first(const struct gas *gas, const struct geometry *where, const char *program, const char *series,
                        int threads)
{
    char name[4096];
    snprintf(name, sizeof name, "%s.first.limno", series);
    struct request usual = usual_request();
    limno_run *run = library_open(name, &usual, threads);
    library_step(run, gas, 1);
    library_close(run);
    must_agree_with_library(gas, where, program, name);
}

static void in_single(const struct gas *gas, const struct geometry *where, limno_run *run, int repetitions, int way)
{
    struct figure sweep = figure_of("sweep_seconds", repetitions), plain = figure_of("read_limit_seconds", repetitions),
                  all = figure_of("read_limit_all_lent_seconds", repetitions),
                  loop = figure_of("c_fused_seconds", repetitions), fast = figure_of("c_tuned_seconds", repetitions),
                  each = figure_of("c_one_loop_each_seconds", repetitions),
                  to_plain = figure_of("sweep_over_read_limit", repetitions),
                  to_loop = figure_of("sweep_over_c_fused", repetitions),
                  to_fast = figure_of("sweep_over_c_tuned", repetitions),
                  to_each = figure_of("sweep_over_c_one_loop_each", repetitions),
                  fairness = figure_of("c_tuned_over_read_limit", repetitions),
                  loop_to_plain = figure_of("c_fused_over_read_limit", repetitions),
                  particle = figure_of("ns_per_particle", repetitions);
    /* The first round warms up. */
    for (int r = -1; r < repetitions; r++) {
        double reading = time_of_reading(way, gas, WHAT_GAUGES_READ), step = time_of_step(run, gas, (uint64_t)(r + 2));
        double tuned_time = time_of(tuned, gas, where), fused_time = time_of(fused, gas, where);
        double each_time = time_of(one_loop_each, gas, where);
        double reading_all = time_of_reading(way, gas, ALL_THAT_IS_LENT);
        if (r < 0)
            continue;
        figure_add(&sweep, step), figure_add(&plain, reading), figure_add(&all, reading_all);
        figure_add(&loop, fused_time), figure_add(&fast, tuned_time), figure_add(&each, each_time);
        figure_add(&to_plain, step / reading), figure_add(&to_loop, step / fused_time);
        figure_add(&to_fast, step / tuned_time), figure_add(&to_each, step / each_time);
        figure_add(&fairness, tuned_time / reading), figure_add(&loop_to_plain, fused_time / reading);
        figure_add(&particle, 1e9 * step / (double)gas->count);
    }
    struct figure *figures[] = { &sweep,    &particle,      &plain, &all,  &loop, &fast, &each, &to_plain, &to_loop,
                                 &to_fast,  &to_each,       &fairness, &loop_to_plain };
    for (size_t f = 0; f < sizeof figures / sizeof figures[0]; f++)
        figure_tell(figures[f]);
}

static void in_double(const struct gas *gas, limno_run *run, int repetitions, int way)
{
    struct figure sweep = figure_of("sweep_f64_seconds", repetitions),
                  plain = figure_of("read_limit_f64_seconds", repetitions),
                  ratio = figure_of("sweep_f64_over_read_limit", repetitions);
    for (int r = -1; r < repetitions; r++) {
        double reading = time_of_reading(way, gas, WHAT_GAUGES_READ), step = time_of_step(run, gas, (uint64_t)(r + 2));
        if (r < 0)
            continue;
        figure_add(&sweep, step), figure_add(&plain, reading), figure_add(&ratio, step / reading);
    }
    figure_tell(&sweep), figure_tell(&plain), figure_tell(&ratio);
}

int main(int argc, char **argv)
{
    if (argc < 6)
        give_up("usage: sweep ELEMENTS REPETITIONS THREADS SERIES PROGRAM [single|double]");
    size_t n = (size_t)number_of("ELEMENTS", argv[1], 1, 1LL << 40);
    int repetitions = (int)number_of("REPETITIONS", argv[2], 1, 10000);
    int threads = (int)number_of("THREADS", argv[3], 1, 4096);
    const char *series = argv[4], *program = argv[5];
    enum precision precision = argc > 6 && strcmp(argv[6], "double") == 0 ? DOUBLE : SINGLE;
    omp_set_num_threads(threads);
    struct gas gas = gas_scattered(precision, 0, n);
    struct geometry where = usual_geometry();
    if (precision == SINGLE)
        fprintf(stderr, "  the tuned rival is %s\n", tuned_form);
    check_first(&gas, &where, program, series, threads);
    int way = fastest_way(&gas);
    struct request usual = usual_request();
    char name[4096];
    snprintf(name, sizeof name, "%s.limno", series);
    limno_run *run = library_open(name, &usual, threads);
    if (precision == SINGLE)
        in_single(&gas, &where, run, repetitions, way);
    else
        in_double(&gas, run, repetitions, way);
    library_close(run);
    gas_free(&gas);
    return 0;
}
