#include "parameters.h"

#include <errno.h>
#include <math.h>
#include <stddef.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

void parameters_default(struct parameters *parameters)
{
    *parameters = (struct parameters){
        .cosmology = { .hubble = 0.68,
                       .omega_matter = 0.31,
                       .omega_baryon = 0.048,
                       .spectral_index = 0.965,
                       .sigma8 = 0.82 },
        .box = 10.0,
        .side = 24,
        .mesh = 64,
        .seed = 2,
        .start_redshift = 24.0,
        .end_redshift = 0.0,
        .max_log_step = 0.01,
        .neighbours = 40.0,
        .smallest_cells = 1.0,
        .initial_kelvin = 15.0,
        .reionisation_redshift = 7.0,
        .jeans_cells = 2.0,
        .star_threshold = 3e-4,
        .star_overdensity = 60.0,
        .star_efficiency = 0.1,
        .star_kelvin = 1e5,
        .return_fraction = 0.25,
        .metal_yield = 0.02,
        .wind_energy = 1.5e5,
        .wind_escape = 1.0,
        .wind_min_speed = 150.0,
        .wind_max_speed = 600.0,
        .wind_free_gyr = 0.1,
        .hole_threshold = 5.0,
        .hole_metallicity = 1e-3,
        .hole_distance = 0.8,
        .hole_seed_mass = 1e-4,
        .hole_boost = 100.0,
        .hole_radiative = 0.1,
        .hole_coupling = 0.15,
        .hole_kelvin = 1e7,
        .dump_step = -1,
        .variant = "saltmarsh",
    };
}

struct variant {
    const char *name;
    const char *meaning;
    double wind_energy_factor;
    double hole_coupling_factor;
};

static const struct variant variants[] = {
    { "saltmarsh", "the default universe", 1.0, 1.0 },
    { "samphire", "weak winds: a quarter of the energy", 0.25, 1.0 },
    { "cordgrass", "strong winds: three times the energy", 3.0, 1.0 },
    { "eelgrass", "black holes heat a tenth as much", 1.0, 0.1 },
    { "glasswort", "no winds at all", 0.0, 1.0 },
};
#define VARIANT_COUNT (sizeof variants / sizeof variants[0])

static int choose_variant(struct parameters *parameters, const char *name)
{
    for (size_t i = 0; i < VARIANT_COUNT; i++) {
        if (strcmp(variants[i].name, name) == 0) {
            parameters->variant = variants[i].name;
            parameters->wind_energy *= variants[i].wind_energy_factor;
            parameters->hole_coupling *= variants[i].hole_coupling_factor;
            return 1;
        }
    }
    return 0;
}

enum kind { REAL, INTEGER, WIDE, SEED, FLAG, TEXT };

struct option {
    const char *name;
    enum kind kind;
    size_t offset;
    double least;
    double most;
    const char *help;
};

#define FIELD(member) offsetof(struct parameters, member)

static const struct option options[] = {
    { "--box", REAL, FIELD(box), 1.0, 1e5, "side of the box, comoving Mpc/h" },
    { "--side", INTEGER, FIELD(side), 4, 1024, "particles per side, each of dark matter and gas" },
    { "--mesh", INTEGER, FIELD(mesh), 8, 4096, "mesh cells per side, even" },
    { "--seed", SEED, FIELD(seed), 0, 0, "which realisation of the initial conditions" },
    { "--start-redshift", REAL, FIELD(start_redshift), 1.0, 200.0, "where the run begins" },
    { "--end-redshift", REAL, FIELD(end_redshift), 0.0, 100.0, "where it ends" },
    { "--max-log-step", REAL, FIELD(max_log_step), 1e-6, 0.2, "largest step in ln a" },
    { "--max-steps", WIDE, FIELD(max_steps), 0, 9e15, "stop after so many steps (0: no limit)" },
    { "--dark-only", FLAG, FIELD(dark_only), 0, 0, "all matter is dark: no gas, no stars" },
    { "--neighbours", REAL, FIELD(neighbours), 16, 200, "gas particles within a kernel" },
    { "--star-threshold", REAL, FIELD(star_threshold), 0, 1e9, "hydrogen per cm^3 to form stars" },
    { "--star-efficiency", REAL, FIELD(star_efficiency), 0, 10, "share formed per free-fall time" },
    { "--wind-energy", REAL, FIELD(wind_energy), 0, 1e7, "per mass of stars formed, (km/s)^2" },
    { "--wind-escape", REAL, FIELD(wind_escape), 0, 10, "launch speed over local escape speed" },
    { "--wind-min-speed", REAL, FIELD(wind_min_speed), 1, 1e4, "slowest launch, km/s" },
    { "--wind-max-speed", REAL, FIELD(wind_max_speed), 1, 1e4, "fastest launch, km/s" },
    { "--hole-threshold", REAL, FIELD(hole_threshold), 0, 1e9, "density of seeding, in star thresholds" },
    { "--hole-seed-mass", REAL, FIELD(hole_seed_mass), 1e-9, 1, "of black holes, 1e10 Msun/h" },
    { "--hole-boost", REAL, FIELD(hole_boost), 0, 1e4, "factor on the Bondi rate" },
    { "--hole-coupling", REAL, FIELD(hole_coupling), 0, 1, "share of radiation that heats gas" },
    { "--hole-kelvin", REAL, FIELD(hole_kelvin), 1e5, 1e9, "temperature jump of heated gas" },
    { "--history", TEXT, FIELD(history_path), 0, 0, "write one line of totals per step to this file" },
    { "--cost", TEXT, FIELD(cost_path), 0, 0, "write what steps and recording cost to this file" },
    { "--config", TEXT, FIELD(config_path), 0, 0, "config of the recording library" },
    { "--series", TEXT, FIELD(series_path), 0, 0, "series it records to, a directory NAME.limno" },
    { "--test", TEXT, FIELD(test), 0, 0, "run a self-test: growth, conservation or history" },
    { "--quiet", FLAG, FIELD(quiet), 0, 0, "no progress lines" },
};
#define OPTION_COUNT (sizeof options / sizeof options[0])

static void print_default(const struct parameters *parameters, const struct option *option)
{
    const char *place = (const char *)parameters + option->offset;
    switch (option->kind) {
    case REAL:
        printf(" [%g]", *(const double *)(const void *)place);
        break;
    case INTEGER:
        printf(" [%d]", *(const int *)(const void *)place);
        break;
    case WIDE:
        printf(" [%lld]", (long long)*(const int64_t *)(const void *)place);
        break;
    case SEED:
        printf(" [%llu]", (unsigned long long)*(const uint64_t *)(const void *)place);
        break;
    case FLAG:
    case TEXT:
        break;
    }
}

static void print_help(void)
{
    struct parameters defaults;
    parameters_default(&defaults);
    printf("saltmarsh: a small universe, evolved on MPI ranks\n\n"
           "  mpirun -n 2 saltmarsh [OPTION VALUE]...\n\n");
    for (size_t i = 0; i < OPTION_COUNT; i++) {
        printf("  %-17s %s", options[i].name, options[i].help);
        print_default(&defaults, &options[i]);
        printf("\n");
    }
    printf("  %-17s take at least N steps, by a shorter largest step\n", "--steps-at-least");
    printf("  %-17s STEP FILE: write all particles as they are after that step\n", "--dump");
    printf("  %-17s one of these, set before the options that follow it:\n", "--variant");
    for (size_t i = 0; i < VARIANT_COUNT; i++)
        printf("    %-15s %s\n", variants[i].name, variants[i].meaning);
}

/* 1 when the text is a number within the option's range; it is then stored. */
static int store_number(struct parameters *parameters, const struct option *option,
                        const char *text)
{
    char *place = (char *)parameters + option->offset;
    char *end = NULL;
    errno = 0;
    if (option->kind == SEED) {
        unsigned long long seed = strtoull(text, &end, 10);
        if (end == text || *end != '\0' || errno != 0 || text[0] == '-')
            return 0;
        *(uint64_t *)(void *)place = (uint64_t)seed;
        return 1;
    }
    double value = strtod(text, &end);
    if (end == text || *end != '\0' || !(value >= option->least && value <= option->most))
        return 0;
    if (option->kind == REAL) {
        *(double *)(void *)place = value;
        return 1;
    }
    if (value != floor(value))
        return 0;
    if (option->kind == INTEGER)
        *(int *)(void *)place = (int)value;
    else
        *(int64_t *)(void *)place = (int64_t)value;
    return 1;
}

static const struct option *find_option(const char *name)
{
    for (size_t i = 0; i < OPTION_COUNT; i++) {
        if (strcmp(options[i].name, name) == 0)
            return &options[i];
    }
    return NULL;
}

/* What a value of an option must be, in words. */
static const char *expectation(const struct option *option)
{
    static char text[100];
    if (option->kind == SEED)
        return "expects a whole number from 0 on";
    snprintf(text, sizeof text, "expects a %snumber from %g to %g",
             option->kind == REAL ? "" : "whole ", option->least, option->most);
    return text;
}

static int parse_count(const char *text, int64_t *count)
{
    char *end = NULL;
    errno = 0;
    long long value = strtoll(text, &end, 10);
    if (end == text || *end != '\0' || errno != 0 || value < 0)
        return 0;
    *count = value;
    return 1;
}

struct words {
    int count;
    char **word;
    int next;
};

/* Reads one option and what follows it; returns the reason when it makes no sense, else NULL. */
static const char *parse_one(struct parameters *parameters, struct words *words,
                             int64_t *steps_at_least)
{
    const char *name = words->word[words->next++];
    int left = words->count - words->next;
    if (strcmp(name, "--variant") == 0) {
        if (left < 1 || !choose_variant(parameters, words->word[words->next++]))
            return "expects saltmarsh, samphire, cordgrass, eelgrass or glasswort";
        return NULL;
    }
    if (strcmp(name, "--steps-at-least") == 0) {
        if (left < 1 || !parse_count(words->word[words->next++], steps_at_least) ||
            *steps_at_least == 0)
            return "expects a number of steps";
        return NULL;
    }
    if (strcmp(name, "--dump") == 0) {
        if (left < 2 || !parse_count(words->word[words->next], &parameters->dump_step))
            return "expects a step number and a file";
        parameters->dump_path = words->word[words->next + 1];
        words->next += 2;
        return NULL;
    }
    const struct option *option = find_option(name);
    if (option == NULL)
        return "is not an option";
    if (option->kind == FLAG) {
        *(int *)(void *)((char *)parameters + option->offset) = 1;
        return NULL;
    }
    if (left < 1)
        return "expects a value";
    const char *text = words->word[words->next++];
    if (option->kind == TEXT) {
        *(const char **)(void *)((char *)parameters + option->offset) = text;
        return NULL;
    }
    return store_number(parameters, option, text) ? NULL : expectation(option);
}

enum parse_result parameters_parse(struct parameters *parameters, int argc, char **argv, int speak)
{
    struct words words = { argc, argv, 1 };
    int64_t steps_at_least = 0;
    const char *wrong = NULL;
    while (words.next < argc && wrong == NULL) {
        const char *name = argv[words.next];
        if (strcmp(name, "--help") == 0) {
            if (speak)
                print_help();
            return PARSE_DONE;
        }
        wrong = parse_one(parameters, &words, &steps_at_least);
        if (wrong != NULL && speak)
            fprintf(stderr, "saltmarsh: %s %s; see --help\n", name, wrong);
    }
    if (wrong != NULL)
        return PARSE_WRONG;
    if (parameters->mesh % 2 != 0 || parameters->side % 2 != 0)
        wrong = "--mesh and --side must be even";
    else if (parameters->end_redshift >= parameters->start_redshift)
        wrong = "--end-redshift must be below --start-redshift";
    else if (parameters->wind_min_speed > parameters->wind_max_speed)
        wrong = "--wind-min-speed must not exceed --wind-max-speed";
    if (wrong != NULL) {
        if (speak)
            fprintf(stderr, "saltmarsh: %s; see --help\n", wrong);
        return PARSE_WRONG;
    }
    if (steps_at_least > 0) {
        double span = log((1.0 + parameters->start_redshift) / (1.0 + parameters->end_redshift));
        double step = span / (double)steps_at_least;
        if (step < parameters->max_log_step)
            parameters->max_log_step = step;
    }
    return PARSE_RUN;
}
