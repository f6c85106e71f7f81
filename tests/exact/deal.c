/*
 * A host that makes the same particles in every run, and deals them out, orders them and lays them in memory as it is
 * told:
 *
 *     deal SERIES EXPECTED THREADS structs|arrays f32|f64 turn|blocks|halves|odd SEED native|128|256|mixed FROM-TO
 *
 * THREADS are the library's; SEED is that of the order (0: as they are made); the next word is the widest vector, in
 * bits, that the library may find (mixed: 128 on every other rank); FROM-TO are the stations, from number FROM to
 * before number TO of them. EXPECTED is a file for how many numbers are not finite, by column.
 *
 * Every number is a small integer times a power of two that float and double both hold, and made by integers alone, so
 * that hosts built in any way make the same. Built with -DALONE it needs no MPI; with -DTRAPS floating-point exceptions
 * end it. It checks what each call answers on each rank; the rows are compared by
 * tests/hosts/rows_are_the_same_however_they_come_about.sh.
 */
#define _GNU_SOURCE
#include <fenv.h>
#include <inttypes.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#ifdef ALONE
#include "limnograph.h"
#else
#include <limnograph_mpi.h>
#endif

#include "narrow_processor.h"

#define GAS 7001 /* several blocks of the library's, the last of them not full */
#define STARS 900
#define HOLES 130
#define DARK 2100
#define EVENTS 60
#define STEPS 5
#define EDGE 1024

static const char config[] =
    "[units]\n"
    "length = \"kpc\"\n"
    "mass = \"1e5 Msun/h\"\n"
    "velocity = \"km/s\"\n"
    "velocity_form = \"peculiar/sqrt(a)\"\n"
    "star_formation_rate = \"Msun/yr\"\n"
    "accretion_rate = \"Msun/yr\"\n"
    "[cosmology]\n"
    "hubble = 70\n"
    "omega_matter = 0.3\n"
    "omega_lambda = 0.7\n"
    "[time]\n"
    "coordinate = \"a\"\n"
    "birth = \"a\"\n"
    "[volume]\n"
    "box = 1024\n"
    "periodic = true\n"
    "[gauges]\n"
    "star_formation = true\n"
    "black_holes = true\n"
    "mass_budget = true\n"
    "tallies = true\n"
    "[gauges.wind_shells]\n"
    "lengths = \"physical\"\n"
    "unit = \"kpc\"\n"
    "shells = { from = 8, to = 72, count = 8, spacing = \"linear\" }\n"
    "stations = [\n";

#define STATIONS 80 /* more than have rows of their own */
#define NAMED 3
/* Whole numbers. The first lies near the corner of the box and moves, the second is within the shells of the first; both
   reach over the corner. The others are made. */
static int place_of[STATIONS][3] = {{2, 1020, 5}, {1003, 10, 1012}, {300, 700, 500}};
static int motion_of[STATIONS][3] = {{10, -20, 30}, {0, 0, 0}, {-7, 0, 64}};

static int rank, ranks = 1, failures;

#define FAIL(...)                                              \
    do {                                                       \
        fprintf(stderr, "deal, rank %d of %d: ", rank, ranks); \
        fprintf(stderr, __VA_ARGS__);                          \
        fputc('\n', stderr);                                   \
        failures++;                                            \
    } while (0)

/* ---- the particles, as 64-bit patterns of doubles ----------------------------------------------------------- */

/* splitmix64 (Steele, Lea & Flood 2014, OOPSLA) */
static uint64_t hash(uint64_t x)
{
    x += 0x9E3779B97F4A7C15u;
    x = (x ^ (x >> 30)) * 0xBF58476D1CE4E5B9u;
    x = (x ^ (x >> 27)) * 0x94D049BB133111EBu;
    return x ^ (x >> 31);
}

static uint64_t draw(int species, int step, uint64_t index, int what)
{
    return hash(hash(hash((uint64_t)species * 1000 + (uint64_t)step) + index) + (uint64_t)what);
}

/* integer × 2^power, for integers below 2^24: exact in float and double, also where float is subnormal. */
static uint64_t bits_of(int64_t integer, int power)
{
    if (integer == 0) return 0;
    uint64_t sign = integer < 0, magnitude = (uint64_t)(sign ? -integer : integer);
    int top = 63 - __builtin_clzll(magnitude);
    return sign << 63 | (uint64_t)(1023 + top + power) << 52 | (magnitude << (52 - top) & (((uint64_t)1 << 52) - 1));
}

static double number_of(uint64_t bits)
{
    double number;
    memcpy(&number, &bits, sizeof number);
    return number;
}

static const uint64_t bad_bits[4] = {0x7ff8000000000000u, 0x7ff0000000000000u, 0xfff0000000000000u, 0xfff8000000000000u};

static int is_bad(double number)
{
    uint64_t bits;
    memcpy(&bits, &number, sizeof bits);
    return (bits >> 52 & 0x7ff) == 0x7ff;
}

enum { GAS_X, GAS_Y, GAS_Z, GAS_VX, GAS_VY, GAS_VZ, GAS_MASS, GAS_RATE, GAS_FIELDS };
enum { STAR_MASS, STAR_BIRTH_MASS, STAR_BIRTH_TIME, STAR_FIELDS };
enum { HOLE_MASS, HOLE_SUBGRID, HOLE_RATE, HOLE_FIELDS };
#define FIELDS GAS_FIELDS

static char config_of_run[sizeof config + 100 * STATIONS];

/* The config with the stations from one number to before another. */
static const char *write_config(int from, int to)
{
    static const char *const names[NAMED] = {"corner", "beside", "aside"};
    size_t length = (size_t)snprintf(config_of_run, sizeof config_of_run, "%s", config);
    for (int s = NAMED; s < STATIONS; s++)
        for (int k = 0; k < 3; k++) {
            uint64_t word = draw(10, 0, (uint64_t)s, k);
            place_of[s][k] = (int)(word % EDGE);
            motion_of[s][k] = s % 4 ? (int)(word >> 32 & 127) - 64 : 0;
        }
    for (int s = from; s < to; s++) {
        const int *p = place_of[s], *v = motion_of[s];
        char name[20] = "";
        if (s < NAMED)
            snprintf(name, sizeof name, "%s", names[s]);
        else
            snprintf(name, sizeof name, "made %d", s);
        length += (size_t)snprintf(config_of_run + length, sizeof config_of_run - length,
                                   "{ name = \"%s\", position = [%d, %d, %d], velocity = [%d, %d, %d] },\n", name, p[0],
                                   p[1], p[2], v[0], v[1], v[2]);
    }
    snprintf(config_of_run + length, sizeof config_of_run - length, "]\n");
    return config_of_run;
}

static double gas[GAS][FIELDS], star[STARS][FIELDS], hole[HOLES][FIELDS], dark[DARK][FIELDS];
static uint64_t hole_id[HOLES];

static void make_particles(int step)
{
    for (uint64_t i = 0; i < GAS; i++) {
        /* Half of them near a station, most of these over the corner of the box; units of 2^-13. */
        const int *station = place_of[i % 8 == 7 ? 2 : i % 8 == 5];
        for (int k = 0; k < 3; k++) {
            uint64_t word = draw(1, step, i, k);
            int64_t place = (int64_t)(word >> 41);
            if (i % 2) place = ((int64_t)station[k] << 13) + (int64_t)(word >> 43) - (1 << 20);
            if (i % 97 == 1) place = (int64_t)station[k] << 13;                  /* where the station is */
            if (i % 97 == 3) { /* on an edge, where a is ½ */
                int off = k == (int)(i % 3) ? 2 * (8 + 8 * (int)(i % 9)) : 0;
                place = (int64_t)(station[k] + off) << 13;
            }
            place &= ((int64_t)EDGE << 13) - 1;
            gas[i][GAS_X + k] = number_of(bits_of(place, -13));
            gas[i][GAS_VX + k] = number_of(bits_of((int64_t)(draw(2, step, i, k) >> 44) - (1 << 19), -10));
        }
        /* Some masses are 2^100 times smaller than others, some 2^20 times larger, some zero. */
        uint64_t word = draw(3, step, i, 0);
        int power = i % 13 ? (int)(word % 7) : (int)(word % 121) - 100;
        gas[i][GAS_MASS] = number_of(i % 211 == 5 ? 0 : bits_of((int64_t)(1 + (word >> 41)), power - 22));
        gas[i][GAS_RATE] = number_of(i % 3 ? 0 : bits_of((int64_t)(draw(4, step, i, 0) >> 41), -26));
    }
    for (uint64_t i = 0; i < STARS; i++) {
        star[i][STAR_BIRTH_MASS] = number_of(bits_of((int64_t)(1 + (draw(5, 0, i, 0) >> 41)), -23));
        star[i][STAR_MASS] = number_of(bits_of((int64_t)(1 + (draw(5, step, i, 1) >> 41)), -24));
        star[i][STAR_BIRTH_TIME] = number_of(bits_of((int64_t)(1 << 19) + (int64_t)(draw(5, 0, i, 2) % (7 << 12)), -20));
        /* Some are born with a row, to the bit. */
        if (i % 9 == 0) star[i][STAR_BIRTH_TIME] = number_of(bits_of(127 + (int64_t)(i % 7), -8));
    }
    for (uint64_t i = 0; i < HOLES; i++) {
        hole[i][HOLE_MASS] = number_of(bits_of((int64_t)(1 + (draw(6, step, i, 0) >> 41)), -18));
        /* Several share the largest mass. */
        uint64_t subgrid = i % 31 == 7 ? 1 << 20 : draw(6, step, i, 1) % (1 << 20);
        hole[i][HOLE_SUBGRID] = number_of(bits_of((int64_t)(1 + subgrid), -14));
        hole[i][HOLE_RATE] = number_of(bits_of((int64_t)(draw(6, step, i, 2) >> 42), -27));
        hole_id[i] = draw(7, 0, i, 0) >> 33;
    }
    for (uint64_t i = 0; i < DARK; i++) {
        int64_t integer = (int64_t)(draw(8, step, i, 0) >> 40) - (1 << 23);
        dark[i][0] = number_of(bits_of(integer, (int)(draw(8, step, i, 1) % 181) - 120));
    }
    /* A few numbers that are none, in different fields and blocks, some in the same element. */
    static const int places[7] = {0, 77, 1024, 2047, 4500, 6800, 7000};
    for (int i = 0; i < 7; i++) {
        gas[places[i]][i % GAS_FIELDS] = number_of(bad_bits[(i + step) % 4]);
        gas[places[i] / 2 + 9][GAS_MASS] = number_of(bad_bits[i % 4]);
        gas[places[i] / 2 + 9][i % 3] = number_of(bad_bits[(i + 1) % 4]);
        star[places[i] / 8 + 1][i % STAR_FIELDS] = number_of(bad_bits[i % 4]);
    }
    hole[3][HOLE_MASS] = hole[40][HOLE_SUBGRID] = hole[7][HOLE_RATE] = number_of(bad_bits[step % 4]);
    hole[HOLES - 1][HOLE_RATE] = number_of(bad_bits[3]);
}

/* ---- what is told of them ----------------------------------------------------------------------------------- */

/* What the library names, and where its components stand. */
static const struct field {
    const char *species, *name;
    int first, components;
} checked[] = {
    {"gas", "position", GAS_X, 3},         {"gas", "velocity", GAS_VX, 3},
    {"gas", "mass", GAS_MASS, 1},          {"gas", "star_formation_rate", GAS_RATE, 1},
    {"star", "mass", STAR_MASS, 1},        {"star", "birth_mass", STAR_BIRTH_MASS, 1},
    {"star", "birth_time", STAR_BIRTH_TIME, 1}, {"black_hole", "mass", HOLE_MASS, 1},
    {"black_hole", "subgrid_mass", HOLE_SUBGRID, 1}, {"black_hole", "accretion_rate", HOLE_RATE, 1},
    {"dark_matter", "mass", 0, 1},
};
#define CHECKED (sizeof checked / sizeof *checked)
static size_t bad_here[CHECKED];

static void count_bad(const char *species, double (*all)[FIELDS], const size_t *which, size_t count)
{
    for (size_t f = 0; f < CHECKED; f++) {
        if (strcmp(checked[f].species, species) != 0) continue;
        bad_here[f] = 0;
        for (size_t i = 0; i < count; i++) {
            int bad = 0;
            const double *element = all[which ? which[i] : i] + checked[f].first;
            for (int k = 0; k < checked[f].components; k++) bad |= is_bad(element[k]);
            bad_here[f] += (size_t)bad;
        }
    }
}

static void check_text(limno_run *run, limno_status status)
{
    const char *text = limno_last_error(run);
    size_t total = 0;
    for (size_t f = 0; f < CHECKED; f++) {
        char part[100];
        total += bad_here[f];
        snprintf(part, sizeof part, "%zu of %s %s", bad_here[f], checked[f].species, checked[f].name);
        if (bad_here[f] > 0 && !strstr(text, part)) FAIL("the text lacks \"%s\": %s", part, text);
    }
    if (status != (total > 0 ? LIMNO_LEFT_OUT : LIMNO_OK))
        FAIL("%zu numbers are not finite, and limno_enter answers %s", total, limno_status_name(status));
}

/* ---- dealing out and laying down ---------------------------------------------------------------------------- */

static int has_structs, has_floats;
static uint64_t seed;
static const char *deal;

static int owner_of(size_t place, size_t count)
{
    if (strcmp(deal, "turn") == 0) return (int)(place % (size_t)ranks);
    if (strcmp(deal, "blocks") == 0) return (int)(place * (size_t)ranks / count);
    if (strcmp(deal, "odd") == 0) return ranks == 1 ? 0 : (int)(2 * (place % (size_t)(ranks / 2)) + 1);
    /* halves: each rank has half of what those before it left */
    int owner = 0;
    while (owner < ranks - 1 && (place >> owner & 1)) owner++;
    return owner;
}

/* The particles of this rank, in their order. */
static size_t choose(size_t count, uint64_t salt, size_t *mine)
{
    static size_t order[GAS];
    size_t found = 0;
    for (size_t i = 0; i < count; i++) order[i] = i;
    for (size_t i = count; seed && i > 1; i--) {
        size_t other = (size_t)(hash(seed * 1000 + salt + i) % i), kept = order[i - 1];
        order[i - 1] = order[other], order[other] = kept;
    }
    for (size_t place = 0; place < count; place++)
        if (owner_of(place, count) == rank) mine[found++] = order[place];
    return found;
}

static union {
    float f[GAS * FIELDS];
    double d[GAS * FIELDS];
} memory[4];

/* Lays this rank's particles down as structs or as arrays; field c of element i is at index base[c] + i * stride. */
static void lay_down(int slot, double (*all)[FIELDS], const size_t *mine, size_t count, size_t fields)
{
    for (size_t i = 0; i < count; i++)
        for (size_t c = 0; c < fields; c++) {
            size_t at = has_structs ? i * fields + c : c * count + i;
            if (has_floats)
                memory[slot].f[at] = (float)all[mine[i]][c];
            else
                memory[slot].d[at] = all[mine[i]][c];
        }
}

static void good(limno_run *run, limno_status status, const char *what)
{
    if (status != LIMNO_OK) FAIL("%s: %s: %s", what, limno_status_name(status), limno_last_error(run));
}

static void lend(limno_run *run, int slot, const struct field *field, size_t count, size_t fields)
{
    const size_t bytes = has_floats ? sizeof(float) : sizeof(double);
    const char *start = has_floats ? (const char *)memory[slot].f : (const char *)memory[slot].d;
    const ptrdiff_t stride = (ptrdiff_t)(bytes * (has_structs ? fields : 1));
    const int32_t scalar = has_floats ? LIMNO_F32 : LIMNO_F64;
    const char *at[3], *name = field->name;
    for (int k = 0; k < 3; k++) at[k] = start + bytes * (size_t)(field->first + k) * (has_structs ? 1 : count);
    if (field->components == 1)
        good(run, limno_lend(run, field->species, name, at[0], count, stride, scalar), name);
    else if (has_structs)
        good(run, limno_lend_vector(run, field->species, name, at[0], count, stride, scalar), name);
    else
        good(run, limno_lend_xyz(run, field->species, name, at[0], at[1], at[2], count, stride, scalar), name);
}

static void lend_species(limno_run *run, int slot, const char *species, double (*all)[FIELDS], size_t count,
                         size_t fields)
{
    static size_t mine[GAS];
    static uint64_t wide[4][HOLES];
    static uint32_t narrow[HOLES];
    size_t mine_count = choose(count, (uint64_t)slot * 100000, mine);
    count_bad(species, all, mine, mine_count);
    /* Of the ranks that have none, every other one does not lend at all. */
    if (mine_count == 0 && rank % 4 == 0) return;
    lay_down(slot, all, mine, mine_count, fields);
    for (size_t f = 0; f < CHECKED; f++)
        if (strcmp(checked[f].species, species) == 0) lend(run, slot, &checked[f], mine_count, fields);
    if (all != hole) return;
    for (size_t i = 0; i < mine_count; i++) wide[0][i] = hole_id[mine[i]], narrow[i] = (uint32_t)hole_id[mine[i]];
    if (has_floats)
        good(run, limno_lend(run, species, "id", narrow, mine_count, sizeof *narrow, LIMNO_U32), "id");
    else
        good(run, limno_lend(run, species, "id", wide[0], mine_count, sizeof **wide, LIMNO_U64), "id");
}

static void tally(limno_run *run, int step)
{
    static const char *const channels[3] = {"wind", "stellar_return", "black_hole"};
    for (uint64_t i = 0; i < EVENTS; i++) {
        if ((int)((i * 5 + seed) % (uint64_t)ranks) != rank) continue;
        int power = (int)(draw(9, step, i, 1) % 90) - 60, other = (int)(draw(9, step, i, 3) % 300) - 150;
        double mass = number_of(bits_of((int64_t)(1 + (draw(9, step, i, 0) >> 41)), power));
        double energy = number_of(bits_of((int64_t)(draw(9, step, i, 2) >> 41) - (1 << 22), other));
        limno_tally_batch batch = LIMNO_TALLY_BATCH_INIT;
        batch.channel = channels[i % 3], batch.count = 1, batch.mass = &mass, batch.energy = &energy;
        batch.momentum = &mass, batch.metals = &energy;
        good(run, limno_tally(run, &batch), "limno_tally");
    }
}

static void write_expected(const char *path)
{
    FILE *file = fopen(path, "w");
    count_bad("gas", gas, NULL, GAS), count_bad("star", star, NULL, STARS);
    count_bad("black_hole", hole, NULL, HOLES), count_bad("dark_matter", dark, NULL, DARK);
    for (size_t f = 0; file && f < CHECKED; f++)
        fprintf(file, "not_finite_%s_%s %zu\n", checked[f].species, checked[f].name, bad_here[f]);
    if (!file || fclose(file) != 0) FAIL("%s cannot be written", path);
}

int main(int argc, char **argv)
{
    int from = 0, to = 0;
    if (argc != 10 || sscanf(argv[9], "%d-%d", &from, &to) != 2 || from < 0 || from >= to || to > STATIONS) {
        fprintf(stderr, "usage: deal SERIES EXPECTED THREADS structs|arrays f32|f64 turn|blocks|halves|odd SEED "
                        "native|128|256|mixed FROM-TO\n");
        return 2;
    }
#ifndef ALONE
    MPI_Init(&argc, &argv);
    MPI_Comm_rank(MPI_COMM_WORLD, &rank);
    MPI_Comm_size(MPI_COMM_WORLD, &ranks);
#endif
#ifdef TRAPS
    feenableexcept(FE_INVALID | FE_DIVBYZERO | FE_OVERFLOW);
#endif
    has_structs = strcmp(argv[4], "structs") == 0, has_floats = strcmp(argv[5], "f32") == 0;
    deal = argv[6], seed = strtoull(argv[7], NULL, 10);
    const int is_mixed = strcmp(argv[8], "mixed") == 0;
    const int hides = is_mixed ? rank % 2 : strcmp(argv[8], "native") != 0;
    if (hides && !hide_wide_vectors(is_mixed ? 128 : atoi(argv[8]))) {
        fprintf(stderr, "deal: this machine cannot hide its vectors\n");
        return 77;
    }

    limno_options options = LIMNO_OPTIONS_INIT;
    limno_run *run = NULL;
    options.config_text = write_config(from, to), options.threads = atoi(argv[3]);
#ifdef ALONE
    limno_status opened = limno_open(LIMNO_VERSION, "deal", argv[1], &options, &run);
#else
    limno_status opened = limno_open_mpi(LIMNO_VERSION, "deal", argv[1], &options, MPI_COMM_WORLD, &run);
#endif
    if (opened != LIMNO_OK) {
        fprintf(stderr, "deal: %s: %s\n", limno_status_name(opened), limno_last_error(NULL));
        return 1;
    }
    for (int step = 1; step <= STEPS; step++) {
        limno_clock clock = LIMNO_CLOCK_INIT;
        clock.step = (uint64_t)step, clock.time = number_of(bits_of(127 + step, -8));
        clock.step_length = number_of(bits_of(1, -8));
        clock.checkpoint = step == 3;
        make_particles(step);
        good(run, limno_mark(run, &clock), "limno_mark");
        lend_species(run, 0, "gas", gas, GAS, GAS_FIELDS);
        lend_species(run, 1, "star", star, STARS, STAR_FIELDS);
        lend_species(run, 2, "black_hole", hole, HOLES, HOLE_FIELDS);
        lend_species(run, 3, "dark_matter", dark, DARK, 1);
        tally(run, step);
        limno_status status = limno_enter(run);
        check_text(run, status);
    }
    good(run, limno_close(run), "limno_close");
#ifdef TRAPS
    if (fegetexcept() != (FE_INVALID | FE_DIVBYZERO | FE_OVERFLOW)) FAIL("the traps are not as they were");
#endif
    if (hides && cpuid_answers == 0) FAIL("nothing asked what the processor can do, so nothing was hidden");
    if (rank == 0) write_expected(argv[2]);
#ifndef ALONE
    int all = 0;
    MPI_Allreduce(&failures, &all, 1, MPI_INT, MPI_SUM, MPI_COMM_WORLD);
    MPI_Finalize();
    failures = all;
#endif
    return failures ? 1 : 0;
}
