/* The expanding background: a flat universe of matter and a cosmological constant. */
#ifndef SALTMARSH_COSMOLOGY_H
#define SALTMARSH_COSMOLOGY_H

struct cosmology {
    double hubble;         /* h */
    double omega_matter;   /* dark matter and baryons */
    double omega_baryon;
    double spectral_index; /* n_s */
    double sigma8;
};

/* H(a), in km/s per Mpc/h; 100 today. */
double hubble_rate(const struct cosmology *cosmology, double a);

/* Age in units of time (units.h), from the closed form for a flat universe. */
double age(const struct cosmology *cosmology, double a);

/* Scale factor at an age: the inverse of the above. */
double scale_factor_at(const struct cosmology *cosmology, double time);

/* Linear growth factor of matter, 1 today, and its slope dlnD/dlna. */
double growth_factor(const struct cosmology *cosmology, double a);
double growth_rate(const struct cosmology *cosmology, double a);

/* What multiplies the velocity (a^2 dx/dt) in a drift: the integral of dt/a^2. */
double drift_factor(const struct cosmology *cosmology, double from, double to);

/* What multiplies the gradient of the comoving potential in a kick: the integral of dt/a. */
double kick_factor(const struct cosmology *cosmology, double from, double to);

#endif
