/* The cubic-spline kernel of Monaghan & Lattanzio 1985 (A&A 149, 135), zero from radius on.
 *
 * Written as a difference of two cubes instead of two cases: the same polynomial without a branch
 * that no processor can guess. */
#ifndef SALTMARSH_KERNEL_H
#define SALTMARSH_KERNEL_H

#include "units.h"

static inline double positive_part(double x)
{
    return x > 0.0 ? x : 0.0;
}

/* The kernel times the cube of its radius, for a distance in units of the radius. */
static inline double kernel_shape(double q)
{
    double outer = positive_part(1.0 - q), inner = positive_part(0.5 - q);
    return 16.0 / PI * (outer * outer * outer - 4.0 * inner * inner * inner);
}

/* Derivative of the above. */
static inline double kernel_slope(double q)
{
    double outer = positive_part(1.0 - q), inner = positive_part(0.5 - q);
    return -48.0 / PI * (outer * outer - 4.0 * inner * inner);
}

#endif
