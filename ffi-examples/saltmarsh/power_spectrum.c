#include "power_spectrum.h"

#include <math.h>

#include "units.h"

/* Temperature of the microwave background in units of 2.7 K. */
#define THETA (2.7255 / 2.7)

/* Transfer function without acoustic wiggles: Eisenstein & Hu 1998, ApJ 496, 605, eqs. 26, 28-31. */
static double transfer(const struct cosmology *cosmology, double wavenumber)
{
    double h = cosmology->hubble;
    double matter = cosmology->omega_matter * h * h;
    double baryon = cosmology->omega_baryon * h * h;
    double fraction = baryon / matter;
    double sound_horizon = 44.5 * log(9.83 / matter) / sqrt(1.0 + 10.0 * pow(baryon, 0.75));
    double alpha = 1.0 - 0.328 * log(431.0 * matter) * fraction +
                   0.38 * log(22.3 * matter) * fraction * fraction;
    double crossing = pow(0.43 * wavenumber * h * sound_horizon, 4.0);
    double shape = cosmology->omega_matter * h * (alpha + (1.0 - alpha) / (1.0 + crossing));
    double q = wavenumber * THETA * THETA / shape;
    double logarithm = log(2.0 * exp(1.0) + 1.8 * q);
    double curvature = 14.2 + 731.0 / (1.0 + 62.5 * q);
    return logarithm / (logarithm + curvature * q * q);
}

double power_at(const struct power_spectrum *spectrum, double wavenumber)
{
    if (wavenumber <= 0.0)
        return 0.0;
    double t = transfer(&spectrum->cosmology, wavenumber);
    return spectrum->amplitude * pow(wavenumber, spectrum->cosmology.spectral_index) * t * t;
}

static double top_hat(double x)
{
    if (x < 1e-3)
        return 1.0 - x * x / 10.0;
    return 3.0 * (sin(x) - x * cos(x)) / (x * x * x);
}

void power_spectrum_init(struct power_spectrum *spectrum, const struct cosmology *cosmology)
{
    const double radius = 8.0;
    const double log_from = log(1e-5), log_to = log(1e2);
    const int intervals = 8000;
    spectrum->cosmology = *cosmology;
    spectrum->amplitude = 1.0;
    double width = (log_to - log_from) / intervals;
    double variance = 0.0;
    for (int i = 0; i <= intervals; i++) {
        double k = exp(log_from + i * width);
        double window = top_hat(k * radius);
        double simpson = i == 0 || i == intervals ? 1.0 : (i % 2 == 1 ? 4.0 : 2.0);
        variance += simpson * k * k * k * power_at(spectrum, k) * window * window;
    }
    variance *= width / 3.0 / (2.0 * PI * PI);
    spectrum->amplitude = cosmology->sigma8 * cosmology->sigma8 / variance;
}
