#include "library.h"

#include <math.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "statistics.h"

/* Shells are of fixed physical radius, so that the Hubble flow has to be added. */
#define SCALE_FACTOR 0.5
#define KPC_PER_LENGTH (1000.0 * SCALE_FACTOR) /* kpc/h in one comoving Mpc/h */

static const double station[3] = { 1.1, 0.3, 9.1 }; /* shells reach over three faces of the box */

struct request usual_request(void)
{
    return (struct request){ ALL_GAUGES, SHELLS, 0, 0.5, 3.91 };
}

struct request many_stations_request(int stations)
{
    double pi = 3.14159265358979323846;
    double outer = cbrt(0.3 * BOX * BOX * BOX / (4.0 / 3.0 * pi * stations));
    return (struct request){ ALL_GAUGES, SHELLS, stations, outer / 8.0, outer < 0.5 * BOX ? outer : 0.499 * BOX };
}

struct geometry usual_geometry(void)
{
    struct request usual = usual_request();
    /* H in km/s per comoving Mpc/h of a flat universe with a cosmological constant. */
    double hubble = 100.0 * SCALE_FACTOR * sqrt(0.31 / pow(SCALE_FACTOR, 3.0) + 0.69);
    struct geometry geometry = { BOX, { station[0], station[1], station[2] }, { 0 }, hubble };
    for (int edge = 0; edge <= SHELLS; edge++)
        geometry.edges[edge] = usual.inner + (usual.outer - usual.inner) * edge / SHELLS;
    return geometry;
}

struct text {
    char *start;
    size_t length, room;
};

static void say(struct text *text, const char *format, ...)
{
    if (text->room < text->length + 512) {
        text->room = 2 * text->room + 4096;
        text->start = realloc(text->start, text->room);
        if (text->start == NULL)
            give_up("no memory for a config of %zu bytes", text->room);
    }
    va_list list;
    va_start(list, format);
    text->length += (size_t)vsnprintf(text->start + text->length, text->room - text->length, format, list);
    va_end(list);
}

static void say_wind_shells(struct text *text, const struct request *request)
{
    say(text, "[gauges.wind_shells]\nlengths = \"physical\"\nunit = \"kpc/h\"\n");
    say(text, "shells = { from = %.17g, to = %.17g, count = %d }\n", request->inner * KPC_PER_LENGTH,
        request->outer * KPC_PER_LENGTH, request->shells);
    if (request->stations == 0) {
        say(text, "station = { position = [%.17g, %.17g, %.17g] }\n", station[0], station[1], station[2]);
        return;
    }
    struct gas places = gas_scattered(DOUBLE, (uint64_t)1 << 40, (size_t)request->stations);
    const double *place = places.position;
    say(text, "stations = [\n");
    for (int s = 0; s < request->stations; s++)
        say(text, "  { name = \"s%d\", position = [%.17g, %.17g, %.17g] },\n", s, place[3 * s], place[3 * s + 1],
            place[3 * s + 2]);
    say(text, "]\n");
    gas_free(&places);
}

char *config_of(const struct request *request)
{
    struct text text = { NULL, 0, 0 };
    say(&text, "[units]\nlength = \"a Mpc/h\"\nmass = \"1e10 Msun/h\"\nvelocity = \"km/s\"\n"
               "velocity_form = \"peculiar\"\nstar_formation_rate = \"Msun/yr\"\naccretion_rate = \"Msun/yr\"\n"
               "[cosmology]\nhubble = 68.0\nomega_matter = 0.31\nomega_lambda = 0.69\n"
               "[time]\ncoordinate = \"a\"\n[gauges]\n");
    const char *const names[] = { "star_formation", "mass_budget", "tallies", "black_holes" };
    for (int g = 0; g < 4; g++)
        say(&text, "%s = %s\n", names[g], request->gauges >> g & 1 ? "true" : "false");
    if (request->gauges & WIND_SHELLS)
        say_wind_shells(&text, request);
    say(&text, "[volume]\nbox = %g\nperiodic = true\n", BOX);
    return text.start;
}

limno_run *library_open(const char *series, const struct request *request, int threads)
{
    char *config = config_of(request);
    limno_options options = LIMNO_OPTIONS_INIT;
    options.host_name = "bench", options.config_text = config, options.threads = threads;
    limno_run *run = NULL;
    if (limno_open(LIMNO_VERSION, NULL, series, &options, &run) != LIMNO_OK)
        give_up("%s", limno_last_error(NULL));
    free(config);
    return run;
}

void library_must(limno_status status, limno_run *run)
{
    if (status != LIMNO_OK)
        give_up("%s: %s", limno_status_name(status), limno_last_error(run));
}

void library_step(limno_run *run, const struct gas *gas, uint64_t step)
{
    int scalar = gas->precision == SINGLE ? LIMNO_F32 : LIMNO_F64;
    ptrdiff_t stride = (ptrdiff_t)gas->precision;
    size_t n = gas->count;
    limno_clock clock = LIMNO_CLOCK_INIT;
    clock.step = step, clock.time = SCALE_FACTOR;
    library_must(limno_mark(run, &clock), run);
    library_must(limno_lend_vector(run, "gas", "position", gas->position, n, 3 * stride, scalar), run);
    library_must(limno_lend_vector(run, "gas", "velocity", gas->velocity, n, 3 * stride, scalar), run);
    library_must(limno_lend(run, "gas", "mass", gas->mass, n, stride, scalar), run);
    library_must(limno_lend(run, "gas", "star_formation_rate", gas->star_formation_rate, n, stride, scalar), run);
    library_must(limno_lend(run, "gas", "internal_energy", gas->internal_energy, n, stride, scalar), run);
    library_must(limno_lend(run, "gas", "metallicity", gas->metallicity, n, stride, scalar), run);
    library_must(limno_enter(run), run);
}

void library_close(limno_run *run)
{
    if (limno_close(run) != LIMNO_OK)
        give_up("closing: %s", limno_last_error(NULL));
}

/* --- Reading back ------------------------------------------------------------------------------------------- */

enum { LINE = 8192 };

/* Where a column stands in a line of names; its unit in brackets does not count. */
static int column_of(const char *names, const char *name)
{
    int column = 0;
    size_t length = strlen(name);
    for (const char *at = names; at != NULL; at = strchr(at, ','), column++) {
        at += *at == ',';
        if (strncmp(at, name, length) == 0 && strchr(" ,\n", at[length]) != NULL)
            return column;
    }
    give_up("the series has no column %s", name);
}

static double number_in(const char *line, int column)
{
    const char *at = line;
    for (int passed = 0; passed < column && at != NULL; passed++) {
        at = strchr(at, ',');
        at = at == NULL ? NULL : at + 1;
    }
    if (at == NULL || *at == ',' || *at == '\n' || *at == '\0')
        give_up("column %d of a row is null: %s", column, line);
    return strtod(at, NULL);
}

/* The header and the last lines of a table. */
static void last_lines(const char *program, const char *series, const char *table, char *names, char (*lines)[LINE],
                       int count)
{
    char command[LINE];
    snprintf(command, sizeof command, "'%s' export --to csv --table %s '%s'", program, table, series);
    FILE *pipe = popen(command, "r");
    if (pipe == NULL || fgets(names, LINE, pipe) == NULL)
        give_up("cannot run: %s", command);
    int read = 0;
    char line[LINE];
    while (fgets(line, sizeof line, pipe) != NULL) {
        if (read >= count)
            memmove(lines[0], lines[1], sizeof *lines * (size_t)(count - 1));
        strcpy(lines[read < count ? read : count - 1], line);
        read++;
    }
    if (pclose(pipe) != 0 || read < count)
        give_up("table %s of %s cannot be read back", table, series);
}

struct quantities library_read_back(const char *program, const char *series)
{
    struct quantities found = { 0 };
    char names[LINE], lines[SHELLS][LINE];
    double mass = 1e10 / 0.68; /* Msun in the host's unit of mass */
    last_lines(program, series, "run", names, lines, 1);
    found.star_formation_rate = number_in(lines[0], column_of(names, "star_formation_rate"));
    found.mass = number_in(lines[0], column_of(names, "mass_gas")) / mass;
    last_lines(program, series, "wind_shells", names, lines, SHELLS);
    for (int shell = 0; shell < SHELLS; shell++) {
        const char *line = lines[shell];
        /* A rate is the sum of mass times speed over the thickness: kpc in a Julian year for 1 km/s. */
        double pi = 3.14159265358979323846, kpc = 648000.0 / pi * 149597870.7 * 1e3;
        double thickness = number_in(line, column_of(names, "radius_outer")) -
                           number_in(line, column_of(names, "radius_inner"));
        double rate = mass / thickness * (365.25 * 86400.0 / kpc);
        found.outward[shell] = number_in(line, column_of(names, "mass_outflow_rate")) / rate;
        found.inward[shell] = -number_in(line, column_of(names, "mass_inflow_rate")) / rate;
        found.shell_mass[shell] = number_in(line, column_of(names, "gas_mass")) / mass;
        found.elements[shell] = (uint64_t)number_in(line, column_of(names, "elements"));
    }
    return found;
}
