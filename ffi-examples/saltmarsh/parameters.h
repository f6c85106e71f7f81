/* Everything about a run that can be chosen. */
#ifndef SALTMARSH_PARAMETERS_H
#define SALTMARSH_PARAMETERS_H

#include <stdint.h>

#include "cosmology.h"

struct parameters {
    struct cosmology cosmology;

    /* The box and its sampling. */
    double box;              /* comoving Mpc/h */
    int side;                /* particles per side, of dark matter and of gas alike */
    int mesh;                /* mesh cells per side */
    uint64_t seed;
    double start_redshift;
    double end_redshift;
    int dark_only;           /* all matter is dark, no gas */

    /* Steps. */
    double max_log_step;     /* largest step in ln a */
    int64_t max_steps;       /* stop early after so many; 0: no limit */

    /* Gas. */
    double neighbours;       /* within the kernel */
    double smallest_cells;   /* least radius of a kernel, in mesh cells: gravity sees no finer */
    double initial_kelvin;
    double reionisation_redshift; /* from here on gas is not colder than 1e4 K */
    double jeans_cells;      /* pressure keeps the Jeans length at so many mesh cells */

    /* Star formation. */
    double star_threshold;   /* hydrogen atoms per physical cm^3 */
    double star_overdensity; /* of gas over the mean of baryons */
    double star_efficiency;  /* per free-fall time */
    double star_kelvin;      /* hotter gas forms no stars */
    double return_fraction;  /* of the mass of a star, back to the gas around it */
    double metal_yield;      /* mass of new metals per mass of stars formed */

    /* Winds. */
    double wind_energy;      /* per mass of stars formed, (km/s)^2 */
    double wind_escape;      /* launch speed over the local escape speed */
    double wind_min_speed;   /* km/s */
    double wind_max_speed;
    double wind_free_gyr;    /* longest time without pressure after the launch */

    /* Black holes. */
    double hole_threshold;   /* density of gas in which one is seeded, in star_threshold */
    double hole_metallicity; /* least metallicity of that gas: stars have formed nearby */
    double hole_distance;    /* none is seeded this close to another, comoving Mpc/h */
    double hole_seed_mass;   /* subgrid mass, 1e10 Msun/h */
    double hole_boost;       /* factor on the Bondi rate for the density we do not resolve */
    double hole_radiative;   /* efficiency: radiated energy per accreted rest energy */
    double hole_coupling;    /* share of that energy that heats gas */
    double hole_kelvin;      /* temperature by which a heated particle is raised */

    /* What to write, and which self-test to run instead of a run. */
    const char *test;
    const char *history_path;
    const char *cost_path;
    int64_t dump_step;       /* -1: none */
    const char *dump_path;
    const char *config_path; /* for the recording library */
    const char *series_path;
    const char *variant;
    int quiet;
};

enum parse_result { PARSE_RUN, PARSE_DONE, PARSE_WRONG };

void parameters_default(struct parameters *parameters);

/* Reads the command line; speak says whether this rank may print. Wrong use is explained. */
enum parse_result parameters_parse(struct parameters *parameters, int argc, char **argv, int speak);

#endif
