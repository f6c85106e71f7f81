#include "report.h"

#include <math.h>
#include <string.h>

#define SMOOTHING_GYR 0.5

/* Order in which the sums travel. */
enum {
    AT_COUNTS,
    AT_MASSES = AT_COUNTS + SPECIES_COUNT,
    AT_STAR_FORMATION = AT_MASSES + SPECIES_COUNT,
    AT_ACCRETION,
    AT_METALS,
    AT_TOTALS,
    SUM_COUNT = AT_TOTALS + 5
};

static void add_up(const struct simulation *simulation, double sums[SUM_COUNT])
{
    for (int s = 0; s < SPECIES_COUNT; s++) {
        const struct store *store = &simulation->species[s];
        sums[AT_COUNTS + s] = (double)store->count;
        for (size_t i = 0; i < store->count; i++)
            sums[AT_MASSES + s] += body_at(store, i)->mass;
    }
    const struct store *gas = &simulation->species[GAS];
    for (size_t i = 0; i < gas->count; i++) {
        sums[AT_STAR_FORMATION] += gas_at(gas, i)->star_formation_rate;
        sums[AT_METALS] += gas_at(gas, i)->body.mass * gas_at(gas, i)->metallicity;
    }
    const struct store *stars = &simulation->species[STARS];
    for (size_t i = 0; i < stars->count; i++)
        sums[AT_METALS] += star_at(stars, i)->body.mass * star_at(stars, i)->metallicity;
    const struct store *holes = &simulation->species[BLACK_HOLES];
    for (size_t i = 0; i < holes->count; i++) {
        sums[AT_ACCRETION] += black_hole_at(holes, i)->accretion_rate;
        sums[AT_METALS] += black_hole_at(holes, i)->metal_mass;
    }
    memcpy(&sums[AT_TOTALS], &simulation->totals, sizeof simulation->totals);
}

struct summary summarise(const struct simulation *simulation)
{
    double mine[SUM_COUNT] = { 0.0 }, all[SUM_COUNT], heaviest = 0.0, heaviest_of_all;
    add_up(simulation, mine);
    const struct store *holes = &simulation->species[BLACK_HOLES];
    for (size_t i = 0; i < holes->count; i++)
        heaviest = fmax(heaviest, black_hole_at(holes, i)->subgrid_mass);
    MPI_Allreduce(mine, all, SUM_COUNT, MPI_DOUBLE, MPI_SUM, simulation->comm);
    MPI_Allreduce(&heaviest, &heaviest_of_all, 1, MPI_DOUBLE, MPI_MAX, simulation->comm);

    double h = simulation->parameters.cosmology.hubble;
    struct summary summary = { .scale_factor = simulation->clock.scale_factor,
                               .gyr = simulation->clock.time * TIME_GYR_H / h };
    memcpy(summary.counts, &all[AT_COUNTS], sizeof summary.counts);
    memcpy(summary.masses, &all[AT_MASSES], sizeof summary.masses);
    memcpy(&summary.totals, &all[AT_TOTALS], sizeof summary.totals);
    summary.baryons = summary.masses[GAS] + summary.masses[STARS] + summary.masses[BLACK_HOLES];
    summary.star_formation =
        all[AT_STAR_FORMATION] * RATE_MSUN_PER_YEAR * h * h * h / box_volume(simulation);
    summary.accretion = all[AT_ACCRETION] * RATE_MSUN_PER_YEAR;
    summary.heaviest_hole = heaviest_of_all * 1e10 / h;
    summary.metals = all[AT_METALS];
    return summary;
}

void history_init(struct history *history, const struct simulation *simulation)
{
    store_init(&history->lines, sizeof(struct summary));
    history->file = NULL;
    history->started = MPI_Wtime();
    history->last_twentieth = -1;
    if (simulation->rank != 0 || simulation->parameters.history_path == NULL)
        return;
    history->file = fopen(simulation->parameters.history_path, "w");
    if (history->file == NULL) {
        perror(simulation->parameters.history_path);
        fatal("cannot write the history; check that the folder exists and is writable");
    }
    fprintf(history->file, "# step a age[Gyr] sfr_density[Msun/yr/Mpc^3] star_mass[1e10Msun/h] "
                           "stars holes accretion[Msun/yr] heaviest_hole[Msun] "
                           "wind_launched[1e10Msun/h] stars_formed[1e10Msun/h]\n");
}

void history_free(struct history *history)
{
    store_free(&history->lines);
    if (history->file != NULL && fclose(history->file) != 0)
        perror("saltmarsh: the history is incomplete");
}

static void progress(struct history *history, const struct simulation *simulation,
                     const struct summary *now)
{
    if (simulation->parameters.quiet)
        return;
    double start = -log1p(simulation->parameters.start_redshift);
    double end = -log1p(simulation->parameters.end_redshift);
    double done = (log(now->scale_factor) - start) / (end - start);
    int twentieth = (int)floor(done * 20.0 + 1e-9);
    if (twentieth == history->last_twentieth)
        return;
    history->last_twentieth = twentieth;
    printf("step %5llu  z %6.3f  %3.0f%%  sfrd %.2e Msun/yr/Mpc^3  stars %6.0f  %5.1f s\n",
           (unsigned long long)simulation->clock.step,
           fabs(redshift(simulation)), 100.0 * done, now->star_formation, now->counts[STARS],
           MPI_Wtime() - history->started);
    fflush(stdout);
}

void history_add(struct history *history, const struct simulation *simulation)
{
    struct summary now = summarise(simulation);
    if (simulation->rank != 0)
        return;
    struct summary *line = store_append(&history->lines);
    *line = now;
    progress(history, simulation, &now);
    if (history->file != NULL)
        fprintf(history->file, "%llu %.10g %.10g %.10g %.10g %.0f %.0f %.10g %.10g %.10g %.10g\n",
                (unsigned long long)simulation->clock.step, now.scale_factor, now.gyr,
                now.star_formation, now.masses[STARS], now.counts[STARS], now.counts[BLACK_HOLES],
                now.accretion, now.heaviest_hole, now.totals.wind_launched,
                now.totals.stars_formed);
}

static const struct summary *line_at(const struct history *history, size_t index)
{
    return (const struct summary *)store_at(&history->lines, index);
}

/* The mean over a window that moves through the history: the trapezium rule on whole steps. */
struct window {
    size_t first, last; /* steps within, as the lines they end at: [first, last) */
    double area, width;
};

static void include(struct window *window, const struct history *history, size_t index, double sign)
{
    const struct summary *left = line_at(history, index - 1), *right = line_at(history, index);
    double width = sign * (right->gyr - left->gyr);
    window->area += 0.5 * (left->star_formation + right->star_formation) * width;
    window->width += width;
}

/* Mean over the half Gyr around a step; steps are asked for in rising order. */
static double smoothed(struct window *window, const struct history *history, size_t centre)
{
    double from = line_at(history, centre)->gyr - 0.5 * SMOOTHING_GYR;
    double to = line_at(history, centre)->gyr + 0.5 * SMOOTHING_GYR;
    for (; window->last < history->lines.count && line_at(history, window->last)->gyr <= to;
         window->last++)
        include(window, history, window->last, 1.0);
    for (; window->first < window->last && line_at(history, window->first - 1)->gyr < from;
         window->first++)
        include(window, history, window->first, -1.0);
    return window->first < window->last ? window->area / window->width
                                        : line_at(history, centre)->star_formation;
}

struct star_peak find_star_peak(const struct history *history)
{
    struct star_peak peak = { 0.0, 0.0, 0.0 };
    struct window window = { 1, 1, 0.0, 0.0 };
    for (size_t i = 0; i < history->lines.count; i++) {
        double rate = smoothed(&window, history, i);
        peak.last = rate;
        if (rate > peak.height) {
            peak.height = rate;
            peak.redshift = 1.0 / line_at(history, i)->scale_factor - 1.0;
        }
    }
    return peak;
}

void history_close(const struct history *history, const struct simulation *simulation)
{
    const struct summary *first = line_at(history, 0);
    const struct summary *last = line_at(history, history->lines.count - 1);
    double h = simulation->parameters.cosmology.hubble;
    double to_msun = 1e10 / h;
    printf("%llu steps in %.1f s on %d ranks, to z = %.2f (variant %s)\n",
           (unsigned long long)simulation->clock.step, MPI_Wtime() - history->started,
           simulation->ranks, fabs(redshift(simulation)), simulation->parameters.variant);
    if (simulation->parameters.dark_only)
        return;
    struct star_peak peak = find_star_peak(history);
    printf("star formation peaked at z = %.2f with %.3g Msun/yr/Mpc^3 and ends at %.3g\n",
           peak.redshift, peak.height, peak.last);
    printf("formed %.3g Msun of stars, launched %.3g Msun of wind; %.0f black holes, "
           "heaviest %.3g Msun, %.0f mergers\n",
           last->totals.stars_formed * to_msun, last->totals.wind_launched * to_msun,
           last->counts[BLACK_HOLES], last->heaviest_hole, last->totals.mergers);
    printf("baryon mass changed by %.3g of itself\n",
           (last->baryons - first->baryons) / first->baryons);
}
