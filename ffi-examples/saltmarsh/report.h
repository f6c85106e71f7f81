/* What the person at the terminal sees, and the history of the box. */
#ifndef SALTMARSH_REPORT_H
#define SALTMARSH_REPORT_H

#include <stdio.h>

#include "simulation.h"

/* The box at one step, summed over all ranks. */
struct summary {
    double scale_factor;
    double gyr;               /* age */
    double counts[SPECIES_COUNT];
    double masses[SPECIES_COUNT];
    double baryons;           /* mass of gas, stars and black holes */
    double star_formation;    /* Msun/yr per comoving Mpc^3 */
    double accretion;         /* of black holes, Msun/yr */
    double heaviest_hole;     /* subgrid mass, Msun */
    double metals;            /* mass of metals in all baryons */
    struct totals totals;
};

/* Collective; the same on every rank. */
struct summary summarise(const struct simulation *simulation);

struct history {
    struct store lines; /* struct summary, one per step; on rank 0 */
    FILE *file;
    double started;     /* wall clock */
    int last_twentieth;
};

void history_init(struct history *history, const struct simulation *simulation);
void history_free(struct history *history);

/* Adds the present state, and prints progress now and then. Collective. */
void history_add(struct history *history, const struct simulation *simulation);

/* Prints how the run went. Rank 0 only. */
void history_close(const struct history *history, const struct simulation *simulation);

/* The star formation history smoothed over about half a Gyr: where it peaks and how far it has
 * fallen by the end. Rank 0 only. */
struct star_peak {
    double redshift;
    double height;  /* Msun/yr per comoving Mpc^3 */
    double last;
};
struct star_peak find_star_peak(const struct history *history);

#endif
