/* Linear power spectrum of matter today. */
#ifndef SALTMARSH_POWER_SPECTRUM_H
#define SALTMARSH_POWER_SPECTRUM_H

#include "cosmology.h"

struct power_spectrum {
    struct cosmology cosmology;
    double amplitude;
};

/* Finds the amplitude at which the variance in spheres of 8 Mpc/h is sigma8 squared. */
void power_spectrum_init(struct power_spectrum *spectrum, const struct cosmology *cosmology);

/* P(k) in (Mpc/h)^3 for k in h/Mpc; zero at k = 0. */
double power_at(const struct power_spectrum *spectrum, double wavenumber);

#endif
