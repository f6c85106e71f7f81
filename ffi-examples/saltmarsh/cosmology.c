#include "cosmology.h"

#include <math.h>

#include "units.h"

double hubble_rate(const struct cosmology *cosmology, double a)
{
    double omega_lambda = 1.0 - cosmology->omega_matter;
    return HUBBLE_0 * sqrt(cosmology->omega_matter / (a * a * a) + omega_lambda);
}

double age(const struct cosmology *cosmology, double a)
{
    double omega_lambda = 1.0 - cosmology->omega_matter;
    double ratio = sqrt(omega_lambda / cosmology->omega_matter);
    return 2.0 / (3.0 * HUBBLE_0 * sqrt(omega_lambda)) * asinh(ratio * pow(a, 1.5));
}

double scale_factor_at(const struct cosmology *cosmology, double time)
{
    double omega_lambda = 1.0 - cosmology->omega_matter;
    double ratio = sqrt(omega_lambda / cosmology->omega_matter);
    return pow(sinh(1.5 * HUBBLE_0 * sqrt(omega_lambda) * time) / ratio, 2.0 / 3.0);
}

typedef double integrand(const struct cosmology *cosmology, double x);

/* Simpson's rule; every integrand here is smooth in its variable. */
static double integrate(integrand *function, const struct cosmology *cosmology, double from,
                        double to, int intervals)
{
    double width = (to - from) / intervals;
    double sum = function(cosmology, from) + function(cosmology, to);
    for (int i = 1; i < intervals; i++)
        sum += (i % 2 == 1 ? 4.0 : 2.0) * function(cosmology, from + i * width);
    return sum * width / 3.0;
}

/* da / (a E)^3 with a = x^2, which takes the root of a out of the integrand at early times. */
static double growth_integrand(const struct cosmology *cosmology, double x)
{
    if (x <= 0.0)
        return 0.0;
    double a = x * x;
    double expansion = a * hubble_rate(cosmology, a) / HUBBLE_0;
    return 2.0 * x / (expansion * expansion * expansion);
}

static double growth_integral(const struct cosmology *cosmology, double a)
{
    return integrate(growth_integrand, cosmology, 0.0, sqrt(a), 512);
}

/* The growing mode of pressureless matter: D(a) is H(a) times the integral of da/(aH)^3 (Heath
 * 1977, MNRAS 179, 351). */
double growth_factor(const struct cosmology *cosmology, double a)
{
    return hubble_rate(cosmology, a) * growth_integral(cosmology, a) /
           (HUBBLE_0 * growth_integral(cosmology, 1.0));
}

double growth_rate(const struct cosmology *cosmology, double a)
{
    double expansion = hubble_rate(cosmology, a) / HUBBLE_0;
    double matter = cosmology->omega_matter / (a * a * a) / (expansion * expansion);
    double integral = growth_integral(cosmology, a);
    return -1.5 * matter + 1.0 / (a * a * expansion * expansion * expansion * integral);
}

static double drift_integrand(const struct cosmology *cosmology, double log_a)
{
    double a = exp(log_a);
    return 1.0 / (a * a * hubble_rate(cosmology, a));
}

static double kick_integrand(const struct cosmology *cosmology, double log_a)
{
    double a = exp(log_a);
    return 1.0 / (a * hubble_rate(cosmology, a));
}

double drift_factor(const struct cosmology *cosmology, double from, double to)
{
    return integrate(drift_integrand, cosmology, log(from), log(to), 8);
}

double kick_factor(const struct cosmology *cosmology, double from, double to)
{
    return integrate(kick_integrand, cosmology, log(from), log(to), 8);
}
