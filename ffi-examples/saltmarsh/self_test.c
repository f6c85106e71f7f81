#include "self_test.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include "initial_conditions.h"
#include "mesh_gravity.h"
#include "power_spectrum.h"
#include "run.h"
#include "step.h"

/* Prints one figure with its bounds on rank 0; returns whether it holds. */
static int figure(int rank, const char *what, double value, double least, double most)
{
    int holds = value >= least && value <= most;
    if (rank == 0)
        printf("%-4s %-58s %.6g (expected %.6g to %.6g)\n", holds ? "ok" : "BAD", what, value,
               least, most);
    fflush(stdout);
    return holds;
}

/* Power in the modes of the box, and what linear theory gives for the same modes today. */
struct power_sum {
    const struct power_spectrum *spectrum;
    double fundamental;
    double volume;
    int largest;  /* integer wavenumber */
    double measured;
    double linear;
};

static void add_power(void *context, const int wave[3], double complex *mode)
{
    struct power_sum *sum = context;
    int square = wave[0] * wave[0] + wave[1] * wave[1] + wave[2] * wave[2];
    if (square == 0 || square > sum->largest * sum->largest)
        return;
    /* A mode with positive third number stands for its mirror image too. */
    double images = wave[2] > 0 ? 2.0 : 1.0;
    double amplitude = cabs(*mode);
    sum->measured += images * amplitude * amplitude;
    sum->linear += images * power_at(sum->spectrum, sum->fundamental * sqrt(square)) / sum->volume;
}

/* Measured over today's linear power in the modes up to a wavenumber. */
static double relative_power(struct simulation *simulation, const struct power_spectrum *spectrum,
                             int largest)
{
    struct power_sum sum = { spectrum, 2.0 * PI / simulation->parameters.box,
                             box_volume(simulation), largest, 0.0, 0.0 };
    mesh_density_contrast(&simulation->mesh, &simulation->domain, simulation->species);
    mesh_for_each_mode(&simulation->mesh, add_power, &sum);
    double mine[2] = { sum.measured, sum.linear }, all[2];
    MPI_Allreduce(mine, all, 2, MPI_DOUBLE, MPI_SUM, simulation->comm);
    return all[0] / all[1];
}

/* The lowest modes of a large box of dark matter against the growth factor by quadrature. */
static int growth_test(const struct parameters *chosen)
{
    static const double stops[] = { 9.0, 4.0, 2.0, 1.0, 0.5, 0.0 };
    const int lowest = 2, many = 6;
    struct parameters parameters = *chosen;
    parameters.box = 600.0;
    parameters.side = 32;
    parameters.mesh = 64;
    parameters.dark_only = 1;
    parameters.start_redshift = 24.0;
    parameters.max_log_step = 0.03;
    struct simulation simulation;
    struct gas_space space;
    struct power_spectrum spectrum;
    simulation_init(&simulation, MPI_COMM_WORLD, &parameters);
    gas_space_init(&space, &simulation);
    power_spectrum_init(&spectrum, &parameters.cosmology);
    initial_conditions(&simulation);

    int holds = 1;
    double start_growth = growth_factor(&parameters.cosmology, simulation.clock.scale_factor);
    double start_power = relative_power(&simulation, &spectrum, lowest);
    double realised = relative_power(&simulation, &spectrum, many) / (start_growth * start_growth);
    /* Some 900 modes: their mean power scatters by 5%, three times that is allowed. */
    holds &= figure(simulation.rank, "power at the start over the linear spectrum", realised, 0.85, 1.15);
    first_forces(&simulation, &space);
    for (size_t s = 0; s < sizeof stops / sizeof stops[0]; s++) {
        simulation.parameters.end_redshift = stops[s];
        while (simulation.clock.scale_factor < 1.0 / (1.0 + stops[s]))
            advance(&simulation, &space);
        double measured = sqrt(relative_power(&simulation, &spectrum, lowest) / start_power);
        double expected = growth_factor(&parameters.cosmology, simulation.clock.scale_factor) / start_growth;
        char what[80];
        snprintf(what, sizeof what, "growth to z = %.1f: %.4f, over D(a)/D(start) = %.4f", stops[s],
                 measured, expected);
        holds &= figure(simulation.rank, what, measured / expected, 0.95, 1.05);
    }
    gas_space_free(&space);
    simulation_free(&simulation);
    return holds;
}

/* Sum of mass times velocity, and of its magnitude, over all bodies. */
static void total_momentum(const struct simulation *simulation, double momentum[3],
                           double *magnitude)
{
    double mine[4] = { 0.0 }, all[4];
    for (int s = 0; s < SPECIES_COUNT; s++) {
        const struct store *store = &simulation->species[s];
        for (size_t i = 0; i < store->count; i++) {
            const struct body *body = body_at(store, i);
            double square = 0.0;
            for (int axis = 0; axis < 3; axis++) {
                mine[axis] += body->mass * body->velocity[axis];
                square += body->velocity[axis] * body->velocity[axis];
            }
            mine[3] += body->mass * sqrt(square);
        }
    }
    MPI_Allreduce(mine, all, 4, MPI_DOUBLE, MPI_SUM, simulation->comm);
    memcpy(momentum, all, 3 * sizeof *momentum);
    *magnitude = all[3];
}

static void begin_small_run(struct simulation *simulation, struct gas_space *space,
                            const struct parameters *parameters)
{
    simulation_init(simulation, MPI_COMM_WORLD, parameters);
    gas_space_init(space, simulation);
    initial_conditions(simulation);
    first_forces(simulation, space);
}

static void go_to(struct simulation *simulation, struct gas_space *space)
{
    while (simulation->clock.scale_factor < 1.0 / (1.0 + simulation->parameters.end_redshift))
        advance(simulation, space);
}

/* Without stars, winds and holes, gravity and pressure must keep total momentum. */
static int momentum_test(struct parameters parameters)
{
    struct simulation simulation;
    struct gas_space space;
    double before[3], after[3], magnitude, change = 0.0;
    parameters.star_threshold = 1e9;
    parameters.end_redshift = 3.0;
    begin_small_run(&simulation, &space, &parameters);
    total_momentum(&simulation, before, &magnitude);
    go_to(&simulation, &space);
    total_momentum(&simulation, after, &magnitude);
    for (int axis = 0; axis < 3; axis++)
        change = fmax(change, fabs(after[axis] - before[axis]));
    int holds = figure(simulation.rank, "total momentum gained over the sum of its magnitudes",
                       change / magnitude, 0.0, 1e-12);
    gas_space_free(&space);
    simulation_free(&simulation);
    return holds;
}

/* With everything switched on, baryons are kept exactly and metals are those that stars made. Stars
 * form and holes grow faster than they should, so that a small box sees it all, swallowing too. */
static int baryon_test(struct parameters parameters)
{
    struct simulation simulation;
    struct gas_space space;
    parameters.end_redshift = 1.0;
    parameters.star_efficiency *= 5.0;
    parameters.hole_threshold = 1.5;
    parameters.hole_metallicity = 1e-4;
    parameters.hole_seed_mass = 1.0; /* no more than the particle it was */
    parameters.hole_coupling = 0.005;
    begin_small_run(&simulation, &space, &parameters);
    struct summary first = summarise(&simulation);
    go_to(&simulation, &space);
    struct summary last = summarise(&simulation);
    int rank = simulation.rank, holds = 1;
    double particles = last.counts[GAS] + last.counts[STARS] + last.counts[BLACK_HOLES];
    holds &= figure(rank, "stars", last.counts[STARS], 1.0, first.counts[GAS]);
    holds &= figure(rank, "black holes", last.counts[BLACK_HOLES], 1.0, first.counts[GAS]);
    holds &= figure(rank, "mass launched in winds, 1e10 Msun/h", last.totals.wind_launched, 1e-9, INFINITY);
    holds &= figure(rank, "energy given to gas by black holes", last.totals.heat_injected, 1e-9, INFINITY);
    holds &= figure(rank, "gas particles swallowed and holes merged",
                    first.counts[GAS] - particles, 1.0, first.counts[GAS]);
    holds &= figure(rank, "baryon mass gained, relative", last.baryons / first.baryons - 1.0, 0.0, 0.0);
    holds &= figure(rank, "metals in the box over metals made", last.metals / last.totals.metals_made,
                    1.0 - 1e-10, 1.0 + 1e-10);
    holds &= figure(rank, "dark matter mass gained, relative",
                    last.masses[DARK_MATTER] / first.masses[DARK_MATTER] - 1.0, 0.0, 0.0);
    gas_space_free(&space);
    simulation_free(&simulation);
    return holds;
}

static int conservation_test(const struct parameters *chosen)
{
    struct parameters parameters = *chosen;
    parameters.box = 5.0;
    parameters.side = 12;
    parameters.mesh = 30;
    int holds = momentum_test(parameters);
    return baryon_test(parameters) && holds;
}

int history_holds(const struct history *history)
{
    struct star_peak peak = find_star_peak(history);
    int holds = figure(0, "redshift of the peak of star formation", peak.redshift, 1.0, 5.0);
    holds &= figure(0, "peak over the last rate", peak.height / peak.last, 3.0, INFINITY);
    return holds;
}

int self_test(const char *name, const struct parameters *chosen)
{
    if (strcmp(name, "growth") == 0)
        return growth_test(chosen);
    if (strcmp(name, "conservation") == 0)
        return conservation_test(chosen);
    if (strcmp(name, "history") == 0)
        return run(chosen, 1);
    return -1;
}
