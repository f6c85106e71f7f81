/*
 * check.h: what the tests of the C interface share. A test is one file that defines `static void test(void)`, named
 * after the promise it holds the library to. It says what failed and ends with a status other than 0.
 *
 * While a test runs, its standard output and error are caught in a file: a library that prints fails every test.
 * With `#include <limnograph_mpi.h>` before this header the test starts and ends MPI.
 */
#ifndef CHECK_H
#define CHECK_H

#ifndef _GNU_SOURCE
#error "begin a test with #define _GNU_SOURCE, before anything is included"
#endif

#include <errno.h>
#include <fcntl.h>
#include <math.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <time.h>
#include <unistd.h>

#include "limnograph.h"

#define UNUSED __attribute__((unused))

/* ---- what failed ------------------------------------------------------------------------------------------- */

static int check_failures;
static int check_out = 2;      /* where failures are told: the error output as it was */
static char check_folder[512]; /* a folder of the test's own */
static int check_rank;
static int check_ranks = 1;

static UNUSED void check_tell(int line, const char *condition, const char *format, va_list arguments)
{
    char text[1024];
    int length, room = (int)sizeof text - 2;
    if (check_failures++ > 25) return;
    length = snprintf(text, sizeof text, "line %d", line);
    if (check_ranks > 1) length += snprintf(text + length, sizeof text - (size_t)length, ", rank %d", check_rank);
    length += snprintf(text + length, sizeof text - (size_t)length, ": %.300s%s", condition, *condition ? ": " : "");
    length += vsnprintf(text + length, sizeof text - (size_t)length, format, arguments);
    if (length > room) length = room;
    text[length++] = '\n';
    if (write(check_out, text, (size_t)length) < 0) _exit(99);
}

static UNUSED __attribute__((format(printf, 2, 3))) void check_fail(int line, const char *format, ...)
{
    va_list arguments;
    va_start(arguments, format);
    check_tell(line, "", format, arguments);
    va_end(arguments);
}

static UNUSED __attribute__((format(printf, 3, 4))) void check_failed(int line, const char *condition, const char *format, ...)
{
    va_list arguments;
    va_start(arguments, format);
    check_tell(line, condition, format, arguments);
    va_end(arguments);
}

#define CHECK(condition, ...)                                                  \
    do {                                                                       \
        if (!(condition)) check_failed(__LINE__, #condition, __VA_ARGS__);     \
    } while (0)

/* The call answers this status. */
#define EXPECT(run, call, status) check_status(__LINE__, run, #call, call, status, NULL)
/* The call answers this status, and the text of the error has each of the parts. */
#define REFUSED(run, call, status, ...) check_status(__LINE__, run, #call, call, status, __VA_ARGS__, NULL)

static UNUSED void check_status(int line, const limno_run *run, const char *call, limno_status found,
                                limno_status expected, ...)
{
    const char *text = limno_last_error(run), *part;
    if (found != expected) {
        check_fail(line, "%s: expected %s, found %s (last error: %.300s)", call, limno_status_name(expected),
                   limno_status_name(found), text);
        return;
    }
    va_list parts;
    va_start(parts, expected);
    while ((part = va_arg(parts, const char *)) != NULL)
        if (!strstr(text, part)) check_fail(line, "%s: the text lacks \"%s\": %.600s", call, part, text);
    va_end(parts);
}

/* ---- configs ------------------------------------------------------------------------------------------------ */

#define CHECK_BASE                      \
    "[units]\n"                         \
    "length = \"kpc\"\n"                \
    "mass = \"Msun\"\n"                 \
    "velocity = \"km/s\"\n"             \
    "star_formation_rate = \"Msun/yr\"\n" \
    "accretion_rate = \"Msun/yr\"\n"    \
    "[cosmology]\n"                     \
    "expanding = false\n"               \
    "[time]\n"                          \
    "coordinate = \"t\"\n"              \
    "unit = \"Myr\"\n"                  \
    "[volume]\n"                        \
    "box = 1000\n"                      \
    "periodic = true\n"
#define CHECK_GAUGES             \
    "[gauges]\n"                 \
    "star_formation = true\n"    \
    "black_holes = true\n"       \
    "mass_budget = true\n"       \
    "tallies = true\n"           \
    "[gauges.wind_shells]\n"     \
    "lengths = \"physical\"\n"   \
    "unit = \"kpc\"\n"           \
    "edges = [10, 40, 80]\n"     \
    "station = { name = \"middle\", position = [500, 500, 500] }\n"

/* Nothing expands; every step is measured; every gauge is on. */
static const char check_config[] UNUSED = CHECK_BASE CHECK_GAUGES;

/* ---- runs --------------------------------------------------------------------------------------------------- */

static UNUSED const char *series_path(const char *name)
{
    static char path[640];
    snprintf(path, sizeof path, "%s/%s.limno", check_folder, name);
    return path;
}

static UNUSED limno_options options_with(const char *config_text)
{
    limno_options options = LIMNO_OPTIONS_INIT;
    options.host_name = "check";
    options.config_text = config_text;
    return options;
}

/* A run of this process alone. */
static UNUSED limno_run *open_alone(const char *config_text, const char *name)
{
    limno_options options = options_with(config_text);
    limno_run *run = NULL;
    limno_status status = limno_open(LIMNO_VERSION, "check.toml", series_path(name), &options, &run);
    if (status != LIMNO_OK) {
        check_fail(0, "%s cannot be opened: %s: %s", name, limno_status_name(status), limno_last_error(NULL));
        exit(1);
    }
    return run;
}

static UNUSED limno_clock clock_of(uint64_t step, double time)
{
    limno_clock clock = LIMNO_CLOCK_INIT;
    clock.step = step, clock.time = time, clock.step_length = 1.0;
    return clock;
}

static UNUSED limno_status mark_step(limno_run *run, uint64_t step)
{
    limno_clock clock = clock_of(step, (double)step);
    return limno_mark(run, &clock);
}

/* ---- a little universe: arrays of structs ------------------------------------------------------------------ */

struct gas {
    double position[3];
    float velocity[3];
    float mass, rate;
    int32_t padding;
};
struct star {
    double birth_mass, birth_time, mass;
    int64_t id;
};
struct hole {
    double mass, subgrid_mass, rate;
    uint64_t id;
};
#define GASES 300
#define STARS 40
#define HOLES 7
struct universe {
    struct gas gas[GASES];
    struct star star[STARS];
    struct hole hole[HOLES];
};

/* Awkward numbers, so that sums in another order or precision would differ. */
static UNUSED void fill_universe(struct universe *all)
{
    memset(all, 0, sizeof *all);
    for (int i = 0; i < GASES; i++) {
        struct gas *gas = &all->gas[i];
        for (int k = 0; k < 3; k++) {
            gas->position[k] = 500.0 + (3.0 + i % 60) * sin(1.0 + 0.7 * i + 2.1 * k);
            gas->velocity[k] = (float)(100.0 * cos(0.3 * i + 1.3 * k));
        }
        gas->mass = 1e5f * (1.0f + 0.01f * (float)(i % 17));
        gas->rate = 1e-3f / (1.0f + (float)(i % 13));
    }
    for (int i = 0; i < STARS; i++) {
        all->star[i].birth_mass = 1e4 / 3.0 * (i + 1);
        all->star[i].mass = 0.8 * all->star[i].birth_mass;
        all->star[i].birth_time = 0.25 * i;
        all->star[i].id = 1000 + i;
    }
    for (int i = 0; i < HOLES; i++) {
        all->hole[i].mass = 1e6 * (i + 1);
        all->hole[i].subgrid_mass = 1e5 / 7.0 * (i + 1);
        all->hole[i].rate = 1e-4 / (i + 1.0);
        all->hole[i].id = (uint64_t)(50 + i);
    }
}

static UNUSED void lend_gas(limno_run *run, const struct gas *gas, size_t count)
{
    EXPECT(run, limno_lend_vector(run, "gas", "position", gas->position, count, sizeof *gas, LIMNO_F64), LIMNO_OK);
    EXPECT(run, limno_lend_vector(run, "gas", "velocity", gas->velocity, count, sizeof *gas, LIMNO_F32), LIMNO_OK);
    EXPECT(run, limno_lend(run, "gas", "mass", &gas->mass, count, sizeof *gas, LIMNO_F32), LIMNO_OK);
    EXPECT(run, limno_lend(run, "gas", "star_formation_rate", &gas->rate, count, sizeof *gas, LIMNO_F32), LIMNO_OK);
}

static UNUSED void lend_stars(limno_run *run, const struct star *star, size_t count)
{
    EXPECT(run, limno_lend(run, "star", "birth_mass", &star->birth_mass, count, sizeof *star, LIMNO_F64), LIMNO_OK);
    EXPECT(run, limno_lend(run, "star", "birth_time", &star->birth_time, count, sizeof *star, LIMNO_F64), LIMNO_OK);
    EXPECT(run, limno_lend(run, "star", "mass", &star->mass, count, sizeof *star, LIMNO_F64), LIMNO_OK);
}

static UNUSED void lend_holes(limno_run *run, const struct hole *hole, size_t count)
{
    EXPECT(run, limno_lend(run, "black_hole", "mass", &hole->mass, count, sizeof *hole, LIMNO_F64), LIMNO_OK);
    EXPECT(run, limno_lend(run, "black_hole", "subgrid_mass", &hole->subgrid_mass, count, sizeof *hole, LIMNO_F64),
           LIMNO_OK);
    EXPECT(run, limno_lend(run, "black_hole", "accretion_rate", &hole->rate, count, sizeof *hole, LIMNO_F64), LIMNO_OK);
    EXPECT(run, limno_lend(run, "black_hole", "id", &hole->id, count, sizeof *hole, LIMNO_U64), LIMNO_OK);
}

/* Lends all of a universe but what other ranks have, from room of the caller's: element i belongs to rank i % ranks. */
static UNUSED void lend_share_from(struct universe *mine, limno_run *run, const struct universe *all, int rank, int ranks)
{
    size_t gases = 0, stars = 0, holes = 0;
    for (int i = rank; i < GASES; i += ranks) mine->gas[gases++] = all->gas[i];
    for (int i = rank; i < STARS; i += ranks) mine->star[stars++] = all->star[i];
    for (int i = rank; i < HOLES; i += ranks) mine->hole[holes++] = all->hole[i];
    lend_gas(run, mine->gas, gases);
    lend_stars(run, mine->star, stars);
    lend_holes(run, mine->hole, holes);
}

/* The same for hosts with one run. */
static UNUSED void lend_share(limno_run *run, const struct universe *all, int rank, int ranks)
{
    static struct universe mine;
    lend_share_from(&mine, run, all, rank, ranks);
}

static UNUSED void lend_universe(limno_run *run, const struct universe *all)
{
    lend_gas(run, all->gas, GASES);
    lend_stars(run, all->star, STARS);
    lend_holes(run, all->hole, HOLES);
}

/* A whole step that must be measured without a word. */
#define GOOD_STEP(run, step, all)                     \
    do {                                              \
        EXPECT(run, mark_step(run, step), LIMNO_OK);  \
        lend_universe(run, all);                      \
        EXPECT(run, limno_enter(run), LIMNO_OK);      \
    } while (0)

/* ---- reading back ------------------------------------------------------------------------------------------- */

/* One table of a series, as the program exports it. */
struct sheet {
    char *text;
    size_t columns, rows;
    char **cell; /* (1 + rows) * columns; the first row holds the names */
    struct sheet *before;
};
static struct sheet *check_sheets; /* all there are; they last as long as the test */

static UNUSED char *read_file(const char *path)
{
    FILE *file = fopen(path, "rb");
    if (!file) return NULL;
    size_t room = 1 << 16, length = 0, got;
    char *text = malloc(room);
    while (text && (got = fread(text + length, 1, room - length - 1, file)) > 0) {
        length += got;
        if (room - length < 2) text = realloc(text, room *= 2);
    }
    fclose(file);
    if (text) text[length] = 0;
    return text;
}

/* Splits one record of comma-separated values at its commas, taking quotes away; returns what follows it. */
static UNUSED char *split_record(char *at, char **cells, size_t *count)
{
    for (*count = 0;; at++) {
        char *to = at;
        cells[(*count)++] = to;
        if (*at == '"') {
            for (at++; *at && !(at[0] == '"' && at[1] != '"'); at++) {
                if (*at == '"') at++;
                *to++ = *at;
            }
            if (*at) at++;
        } else {
            at += strcspn(at, ",\n");
            to = at;
        }
        char end = *at;
        *to = 0;
        if (end != ',') return end ? at + 1 : at;
    }
}

static UNUSED struct sheet *read_back(const char *series, const char *table)
{
    static char command[2048], path[640];
    const char *program = getenv("LIMNOGRAPH");
    struct sheet *sheet = calloc(1, sizeof *sheet);
    sheet->before = check_sheets, check_sheets = sheet;
    /* Every rank may read at the same time. */
    snprintf(path, sizeof path, "%s/read_back_%ld.csv", check_folder, (long)getpid());
    snprintf(command, sizeof command, "'%s' export '%s' --to csv --table %s -o '%s' 2>'%s.txt'",
             program ? program : "limnograph", series, table, path, path);
    unlink(path);
    int status = system(command);
    sheet->text = status == 0 ? read_file(path) : NULL;
    if (!sheet->text) {
        check_fail(0, "the series cannot be read: %s", command);
        exit(1);
    }
    /* Lines that begin with # are about the file. */
    char *at = sheet->text;
    while (*at == '#') at += strcspn(at, "\n") + 1;
    static char *cells[4096];
    size_t count, room = 0;
    while (*at) {
        at = split_record(at, cells, &count);
        if (!sheet->columns) {
            sheet->columns = count;
        } else if (count == sheet->columns) {
            sheet->rows++;
        } else {
            continue;
        }
        if ((1 + sheet->rows) * sheet->columns > room) {
            room = 2 * (1 + sheet->rows) * sheet->columns;
            sheet->cell = realloc(sheet->cell, room * sizeof *sheet->cell);
        }
        memcpy(sheet->cell + sheet->rows * sheet->columns, cells, count * sizeof *cells);
    }
    /* The unit stands behind the name. */
    for (size_t c = 0; c < sheet->columns; c++) sheet->cell[c][strcspn(sheet->cell[c], " [(")] = 0;
    return sheet;
}

static UNUSED long column_of(const struct sheet *sheet, const char *name)
{
    for (size_t c = 0; c < sheet->columns; c++)
        if (strcmp(sheet->cell[c], name) == 0) return (long)c;
    check_fail(0, "there is no column %s", name);
    return 0;
}

/* The cell of the row of a step (of several, the first); NULL when there is no such row. Empty: null. */
static UNUSED const char *cell(const struct sheet *sheet, uint64_t step, const char *column)
{
    size_t at = (size_t)column_of(sheet, column), steps = (size_t)column_of(sheet, "step");
    for (size_t r = 1; r <= sheet->rows; r++)
        if (strtoull(sheet->cell[r * sheet->columns + steps], NULL, 10) == step)
            return sheet->cell[r * sheet->columns + at];
    return NULL;
}

static UNUSED void check_cell(int line, const struct sheet *sheet, uint64_t step, const char *column, double expected)
{
    const char *found = cell(sheet, step, column);
    if (!found)
        check_fail(line, "step %llu has no row", (unsigned long long)step);
    else if (isnan(expected) ? *found != 0 : *found == 0 || strtod(found, NULL) != expected)
        check_fail(line, "%s of step %llu: expected %.17g, found '%s'", column, (unsigned long long)step, expected, found);
}
#define CELL(sheet, step, column, expected) check_cell(__LINE__, sheet, step, column, expected)
#define NULL_CELL(sheet, step, column) check_cell(__LINE__, sheet, step, column, NAN)

/* Columns that tell of the machine and not of the universe. */
static UNUSED int is_about_the_machine(const char *name)
{
    return strstr(name, "_seconds") || strcmp(name, "wall_clock") == 0;
}

/* The row of one step equals that of another in every bit, but for the columns about the machine and those named. */
static UNUSED void check_rows_equal(int line, const struct sheet *one, uint64_t step, const struct sheet *other,
                                    uint64_t other_step, const char *except)
{
    for (size_t c = 0; c < one->columns; c++) {
        const char *name = one->cell[c];
        if (is_about_the_machine(name) || (except && strstr(except, name))) continue;
        const char *left = cell(one, step, name), *right = cell(other, other_step, name);
        if (!left || !right || strcmp(left, right) != 0)
            check_fail(line, "%s differs: '%s' and '%s'", name, left ? left : "no row", right ? right : "no row");
    }
}
#define SAME_ROW(one, step, other, other_step, except) \
    check_rows_equal(__LINE__, one, step, other, other_step, except)

/* Is there an event with this text? Events are looked for in all steps. */
static UNUSED int has_event(const char *series, const char *part)
{
    struct sheet *events = read_back(series, "events");
    size_t at = (size_t)column_of(events, "text");
    for (size_t r = 1; r <= events->rows; r++)
        if (strstr(events->cell[r * events->columns + at], part)) return 1;
    return 0;
}

/* ---- beginning and end -------------------------------------------------------------------------------------- */

static void test(void);

static UNUSED void check_silence_begins(void)
{
    char path[640];
    snprintf(path, sizeof path, "%s/printed.%d", check_folder, check_rank);
    int file = open(path, O_RDWR | O_CREAT | O_TRUNC | O_APPEND | O_CLOEXEC, 0600);
    check_out = fcntl(2, F_DUPFD_CLOEXEC, 10);
    if (file < 0 || check_out < 0 || dup2(file, 1) < 0 || dup2(file, 2) < 0) {
        fprintf(stderr, "the test cannot catch its output in %s: %s\n", path, strerror(errno));
        exit(1);
    }
    close(file);
}

static UNUSED void check_silence_ends(void)
{
    char path[640];
    fflush(NULL);
    snprintf(path, sizeof path, "%s/printed.%d", check_folder, check_rank);
    char *printed = read_file(path);
    if (printed && *printed) check_fail(0, "something was printed: %.800s", printed);
    free(printed);
    while (check_sheets) {
        struct sheet *sheet = check_sheets;
        check_sheets = sheet->before;
        free(sheet->text), free(sheet->cell), free(sheet);
    }
}

/* With -DCHECK_TRAPS every test runs in a host that dies of an invalid operation, a division by zero, an overflow. */
#ifdef CHECK_TRAPS
#include <fenv.h>
#define CHECK_SET_TRAPS() feenableexcept(FE_INVALID | FE_DIVBYZERO | FE_OVERFLOW)
#else
#define CHECK_SET_TRAPS() (void)0
#endif

static UNUSED void check_begins(int argc, char **argv)
{
    const char *folder = argc > 1 ? argv[1] : ".", *program = getenv("LIMNOGRAPH");
    char full[512];
    if (!realpath(folder, check_folder)) {
        fprintf(stderr, "usage: %s FOLDER\n", argv[0]);
        exit(2);
    }
    if (program && strchr(program, '/') && realpath(program, full)) setenv("LIMNOGRAPH", full, 1);
}

#ifdef LIMNOGRAPH_MPI_H
#ifndef CHECK_OWN_MAIN
#ifndef CHECK_THREADS
#define CHECK_THREADS MPI_THREAD_SINGLE
#endif

/* A run over a communicator. */
static UNUSED limno_run *open_over(MPI_Comm communicator, const char *config_text, const char *name)
{
    limno_options options = options_with(config_text);
    limno_run *run = NULL;
    limno_status status = limno_open_mpi(LIMNO_VERSION, "check.toml", series_path(name), &options, communicator, &run);
    if (status != LIMNO_OK) {
        check_fail(0, "%s cannot be opened: %s: %s", name, limno_status_name(status), limno_last_error(NULL));
        MPI_Abort(MPI_COMM_WORLD, 1);
    }
    return run;
}

#define GOOD_SHARED_STEP(run, step, all)                  \
    do {                                                  \
        EXPECT(run, mark_step(run, step), LIMNO_OK);      \
        lend_share(run, all, check_rank, check_ranks);    \
        EXPECT(run, limno_enter(run), LIMNO_OK);          \
    } while (0)

int main(int argc, char **argv)
{
    int provided, all = 0;
    check_begins(argc, argv);
    MPI_Init_thread(&argc, &argv, CHECK_THREADS, &provided);
    MPI_Comm_rank(MPI_COMM_WORLD, &check_rank);
    MPI_Comm_size(MPI_COMM_WORLD, &check_ranks);
    check_silence_begins();
    CHECK_SET_TRAPS();
    test();
    check_silence_ends();
    MPI_Allreduce(&check_failures, &all, 1, MPI_INT, MPI_SUM, MPI_COMM_WORLD);
    MPI_Finalize();
    return all ? 1 : 0;
}
#endif
#else
int main(int argc, char **argv)
{
    check_begins(argc, argv);
    check_silence_begins();
    CHECK_SET_TRAPS();
    test();
    check_silence_ends();
    return check_failures ? 1 : 0;
}
#endif

#endif
