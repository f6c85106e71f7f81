/* The larger and smaller of two numbers, for inner loops: fmax and fmin take care of NaN, which
 * costs a function call. */
#ifndef SALTMARSH_NUMBERS_H
#define SALTMARSH_NUMBERS_H

static inline double larger(double a, double b)
{
    return a > b ? a : b;
}

static inline double smaller(double a, double b)
{
    return a < b ? a : b;
}

#endif
