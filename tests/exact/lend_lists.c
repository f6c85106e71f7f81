/*
 * A host that lends lists of masses, one list a step, as five species that lie differently in memory:
 *
 *     lend_lists LISTS SERIES THREADS native|128|256 >TOLD
 *
 * The last word is the widest vector, in bits, that the library may find.
 * LISTS holds for each step, in the machine's own bytes, a 64-bit count, so many masses (double), accretion rates
 * (double) and identities (uint64_t). The same masses are lent as
 *     gas          a list of doubles, or of floats where every mass is one
 *     star         a member of structs
 *     dark_matter  a list from its last element to its first
 *     wind         pieces of growing length, each sounded from the same scratch memory
 *     black_hole   a list, beside the accretion rates and identities
 * Each step's status and error text go to the output, one line a step. check_sums_against_fsum.py makes the lists and
 * holds the rows against Python's sums.
 */
#define _GNU_SOURCE
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "limnograph.h"
#include "narrow_processor.h"

/* A mass of 1 is 1 Msun, the unit of the columns of masses; an accretion rate of 1 is 1 g/s. */
static const char config[] =
    "[units]\n"
    "length = \"kpc\"\n"
    "mass = \"Msun\"\n"
    "velocity = \"km/s\"\n"
    "accretion_rate = 1.0\n"
    "[cosmology]\n"
    "expanding = false\n"
    "[time]\n"
    "coordinate = \"t\"\n"
    "unit = \"Myr\"\n"
    "[volume]\n"
    "none = true\n"
    "[gauges]\n"
    "black_holes = true\n"
    "mass_budget = true\n";

struct star {
    float before;
    char name[3];
    double mass;
    int16_t after;
};

static void need(int condition, const char *what)
{
    if (condition) return;
    fprintf(stderr, "lend_lists: %s\n", what);
    exit(1);
}

static void *room(size_t bytes)
{
    void *memory = malloc(bytes ? bytes : 1);
    need(memory != NULL, "no memory");
    return memory;
}

/* A call that must succeed. */
static void good(limno_run *run, limno_status status)
{
    if (status == LIMNO_OK) return;
    fprintf(stderr, "lend_lists: %s: %s\n", limno_status_name(status), limno_last_error(run));
    exit(1);
}

static int32_t lend_gas(limno_run *run, const double *mass, size_t count, float *narrow)
{
    int all_are_floats = count > 0;
    for (size_t i = 0; i < count; i++) {
        narrow[i] = (float)mass[i];
        /* A NaN is not equal to itself, and stays a double. */
        if ((double)narrow[i] != mass[i]) all_are_floats = 0;
    }
    if (all_are_floats)
        good(run, limno_lend(run, "gas", "mass", narrow, count, sizeof *narrow, LIMNO_F32));
    else
        good(run, limno_lend(run, "gas", "mass", mass, count, sizeof *mass, LIMNO_F64));
    return all_are_floats;
}

int main(int argc, char **argv)
{
    need(argc == 5, "usage: lend_lists LISTS SERIES THREADS native|128|256 >TOLD");
    const int hides = strcmp(argv[4], "native") != 0;
    if (hides && !hide_wide_vectors(atoi(argv[4]))) return 77;
    FILE *lists = fopen(argv[1], "rb");
    need(lists != NULL, "the lists cannot be read");
    limno_options options = LIMNO_OPTIONS_INIT;
    limno_run *run = NULL;
    options.config_text = config, options.threads = atoi(argv[3]);
    good(NULL, limno_open(LIMNO_VERSION, "lend_lists", argv[2], &options, &run));

    uint64_t step = 0, count, as_floats = 0;
    while (fread(&count, sizeof count, 1, lists) == 1) {
        double *mass = room(count * sizeof *mass), *rate = room(count * sizeof *rate);
        double *scratch = room(count * sizeof *scratch), *backwards = room(count * sizeof *backwards);
        uint64_t *id = room(count * sizeof *id);
        struct star *star = room(count * sizeof *star);
        float *narrow = room(count * sizeof *narrow);
        need(fread(mass, sizeof *mass, count, lists) == count && fread(rate, sizeof *rate, count, lists) == count &&
                 fread(id, sizeof *id, count, lists) == count,
             "a list ends too early");
        memset(star, 0xff, count * sizeof *star); /* what lies between must not matter */
        for (uint64_t i = 0; i < count; i++) star[i].mass = backwards[count - 1 - i] = mass[i];

        limno_clock clock = LIMNO_CLOCK_INIT;
        clock.step = ++step, clock.time = (double)step, clock.step_length = 1.0;
        good(run, limno_mark(run, &clock));
        as_floats += (uint64_t)lend_gas(run, mass, count, narrow);
        good(run, limno_lend(run, "star", "mass", &star->mass, count, sizeof *star, LIMNO_F64));
        good(run, limno_lend(run, "dark_matter", "mass", count ? &backwards[count - 1] : NULL, count,
                             -(ptrdiff_t)sizeof *backwards, LIMNO_F64));
        uint64_t from = 0, piece = 1;
        do {
            if (piece > count - from) piece = count - from;
            memcpy(scratch, mass + from, piece * sizeof *scratch);
            good(run, limno_lend(run, "wind", "mass", scratch, piece, sizeof *scratch, LIMNO_F64));
            good(run, limno_sound(run, "wind"));
            memset(scratch, 0x5a, piece * sizeof *scratch);
            from += piece, piece = 3 * piece + 1;
        } while (from < count);
        good(run, limno_lend(run, "black_hole", "mass", mass, count, sizeof *mass, LIMNO_F64));
        good(run, limno_lend(run, "black_hole", "accretion_rate", rate, count, sizeof *rate, LIMNO_F64));
        good(run, limno_lend(run, "black_hole", "id", id, count, sizeof *id, LIMNO_U64));
        limno_status status = limno_enter(run);
        printf("%s %s\n", limno_status_name(status), status == LIMNO_OK ? "" : limno_last_error(run));
        free(mass), free(rate), free(scratch), free(id), free(backwards), free(star), free(narrow);
    }
    good(run, limno_close(run));
    need(!hides || cpuid_answers > 0, "nothing asked what the processor can do, so nothing was hidden");
    printf("%llu lists were lent as floats\n", (unsigned long long)as_floats);
    return 0;
}
