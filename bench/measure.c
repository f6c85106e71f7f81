/*
 * measure.c: what a measured step costs, beside the fastest plain pass over the same bytes.
 *
 *   measure [ELEMENTS] [REPETITIONS] [THREADS] [SERIES]        (4000000, 21, 2, bench.limno)
 *
 * Gas in single precision: position, velocity, mass, star formation rate, internal energy, metallicity; eight
 * shells that hold about a quarter of it; every gauge of the first kind on. Repetitions of the library and of
 * the plain pass alternate, so that ratios are of one run; printed are medians, and lines "name value" with
 * NAME_min and NAME_max beside them.
 */
#include <limnograph.h>
#include <omp.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

static const char *const config =
    "[units]\nlength = \"a Mpc/h\"\nmass = \"1e10 Msun/h\"\nvelocity = \"km/s\"\nvelocity_form = \"peculiar\"\n"
    "star_formation_rate = \"Msun/yr\"\naccretion_rate = \"Msun/yr\"\n"
    "[cosmology]\nhubble = 68.0\nomega_matter = 0.31\nomega_lambda = 0.69\n"
    "[time]\ncoordinate = \"a\"\n[volume]\nbox = 10.0\nperiodic = true\n"
    "[gauges]\nstar_formation = true\nmass_budget = true\ntallies = true\nblack_holes = true\n"
    "[gauges.wind_shells]\nlengths = \"comoving\"\nunit = \"Mpc/h\"\n"
    "shells = { from = 0.5, to = 3.91, count = 8 }\nstation = { position = [5, 5, 5] }\n";

static double now(void)
{
    struct timespec time;
    clock_gettime(CLOCK_MONOTONIC, &time);
    return (double)time.tv_sec + 1e-9 * (double)time.tv_nsec;
}

static int by_size(const void *one, const void *other)
{
    double a = *(const double *)one, b = *(const double *)other;
    return (a > b) - (a < b);
}

static double tell(const char *name, double *values, int count)
{
    qsort(values, (size_t)count, sizeof *values, by_size);
    double median = values[count / 2];
    printf("%s %.6g\n%s_min %.6g\n%s_max %.6g\n", name, median, name, values[0], name, values[count - 1]);
    return median;
}

/* Evenly spread numbers in [0, 1) that do not repeat: a low-discrepancy sequence. */
static float spread(size_t index, double step)
{
    double at = (double)index * step;
    return (float)(at - (double)(uint64_t)at);
}

/* The least that can be done with the bytes: read all, add them as integers. */
static uint64_t plain_pass(const uint32_t *const *arrays, const size_t *lengths, int count)
{
    uint64_t sum = 0;
    for (int a = 0; a < count; a++) {
        const uint32_t *numbers = arrays[a];
        uint32_t part = 0;
#pragma omp parallel for simd reduction(+ : part)
        for (size_t i = 0; i < lengths[a]; i++)
            part += numbers[i];
        sum += part;
    }
    return sum;
}

static limno_run *open_run(const char *series, int threads)
{
    limno_run *run = NULL;
    limno_options options = LIMNO_OPTIONS_INIT;
    options.host_name = "measure", options.config_text = config, options.threads = threads;
    if (limno_open(LIMNO_VERSION, NULL, series, &options, &run) != LIMNO_OK) {
        fprintf(stderr, "measure: %s\n", limno_last_error(NULL));
        exit(1);
    }
    return run;
}

static void must(limno_status status, limno_run *run)
{
    if (status != LIMNO_OK) {
        fprintf(stderr, "measure: %s: %s\n", limno_status_name(status), limno_last_error(run));
        exit(1);
    }
}

int main(int argc, char **argv)
{
    size_t n = argc > 1 ? strtoull(argv[1], NULL, 10) : 4000000;
    int repetitions = argc > 2 ? atoi(argv[2]) : 21, threads = argc > 3 ? atoi(argv[3]) : 2;
    const char *series = argc > 4 ? argv[4] : "bench.limno";
    if (n == 0 || repetitions < 1 || repetitions > 1000 || threads < 1)
        return 2;
    omp_set_num_threads(threads);
    float *position = malloc(12 * n), *velocity = malloc(12 * n), *rest[4];
    for (int k = 0; k < 4; k++)
        rest[k] = malloc(4 * n);
    if (!position || !velocity || !rest[0] || !rest[1] || !rest[2] || !rest[3])
        return fprintf(stderr, "measure: no memory for %zu elements\n", n), 1;
#pragma omp parallel for
    for (size_t i = 0; i < n; i++) {
        const double steps[3] = {0.8191725134, 0.6710436067, 0.5497004779};
        for (int k = 0; k < 3; k++) {
            position[3 * i + k] = 10.0f * spread(i, steps[k]);
            velocity[3 * i + k] = 400.0f * spread(i, steps[2 - k] * 0.77) - 200.0f;
        }
        for (int k = 0; k < 4; k++)
            rest[k][i] = 1e-4f * (1.0f + spread(i, 0.618034 + 0.1 * k));
    }
    const char *names[4] = {"mass", "star_formation_rate", "internal_energy", "metallicity"};
    /* What no gauge reads is not read: the plain pass reads what the gauges need. */
    const uint32_t *arrays[4] = {(void *)position, (void *)velocity, (void *)rest[0], (void *)rest[1]};
    const size_t lengths[4] = {3 * n, 3 * n, n, n};

    limno_run *run = open_run(series, threads);
    double *library = malloc(sizeof(double) * (size_t)repetitions), *plain = malloc(sizeof(double) * (size_t)repetitions);
    double *ratio = malloc(sizeof(double) * (size_t)repetitions), *each = malloc(sizeof(double) * (size_t)repetitions);
    volatile uint64_t kept = 0;
    for (int r = -2; r < repetitions; r++) {
        double start = now();
        kept += plain_pass(arrays, lengths, 4);
        double middle = now();
        limno_clock clock = LIMNO_CLOCK_INIT;
        clock.step = (uint64_t)(r + 3), clock.time = 0.5 + 1e-3 * r;
        must(limno_mark(run, &clock), run);
        must(limno_lend_vector(run, "gas", "position", position, n, 12, LIMNO_F32), run);
        must(limno_lend_vector(run, "gas", "velocity", velocity, n, 12, LIMNO_F32), run);
        for (int k = 0; k < 4; k++)
            must(limno_lend(run, "gas", names[k], rest[k], n, 4, LIMNO_F32), run);
        must(limno_enter(run), run);
        double end = now();
        if (r >= 0) {
            plain[r] = middle - start, library[r] = end - middle;
            ratio[r] = library[r] / plain[r], each[r] = library[r] / (double)n * 1e9;
        }
    }
    must(limno_close(run), run);
    printf("elements %zu\nthreads %d\n", n, threads);
    tell("sweep_seconds", library, repetitions);
    tell("plain_pass_seconds", plain, repetitions);
    tell("sweep_over_read_limit", ratio, repetitions);
    tell("ns_per_particle", each, repetitions);

    /* A measured step with nothing lent; the host pauses so that the row is written meanwhile. */
    char other[4096];
    snprintf(other, sizeof other, "%s.fixed.limno", series);
    run = open_run(other, 1);
    enum { STEPS = 400 };
    static double fixed[STEPS];
    for (int s = 0; s < STEPS; s++) {
        struct timespec pause = {0, 200000};
        nanosleep(&pause, NULL);
        limno_clock clock = LIMNO_CLOCK_INIT;
        clock.step = (uint64_t)s + 1, clock.time = 0.5 + 1e-4 * s;
        double start = now();
        must(limno_mark(run, &clock), run);
        must(limno_enter(run), run);
        fixed[s] = 1e6 * (now() - start);
    }
    must(limno_close(run), run);
    tell("fixed_cost_us", fixed, STEPS);
    return kept == 1;
}
