#include <math.h>

#include "rivals.h"
#include "statistics.h"

static double sum(const float *numbers, size_t count)
{
    double total = 0.0;
#pragma omp parallel for schedule(static) reduction(+ : total)
    for (size_t i = 0; i < count; i++)
        total += numbers[i];
    return total;
}

/* Distance from the station to the nearest image of element i. */
static inline double towards(const float *position, const struct geometry *where, double *d)
{
    double square = 0.0;
    for (int axis = 0; axis < 3; axis++) {
        d[axis] = position[axis] - where->station[axis];
        d[axis] -= where->box * rint(d[axis] / where->box);
        square += d[axis] * d[axis];
    }
    return sqrt(square);
}

/* The shell of a distance; -1 for none. */
static inline int shell_of(const struct geometry *where, double radius)
{
    if (radius < where->edges[0] || radius >= where->edges[SHELLS])
        return -1;
    int shell = 0;
    while (radius >= where->edges[shell + 1])
        shell++;
    return shell;
}

static void flow(const struct gas *gas, const struct geometry *where, double direction, double *flows)
{
    const float *position = gas->position, *velocity = gas->velocity, *mass = gas->mass;
#pragma omp parallel for schedule(static) reduction(+ : flows[ : SHELLS])
    for (size_t i = 0; i < gas->count; i++) {
        double d[3], radius = towards(position + 3 * i, where, d);
        int shell = shell_of(where, radius);
        if (shell < 0)
            continue;
        double along = d[0] * velocity[3 * i] + d[1] * velocity[3 * i + 1] + d[2] * velocity[3 * i + 2];
        double speed = along / radius + where->hubble * radius;
        if (speed * direction >= 0.0)
            flows[shell] += mass[i] * speed;
    }
}

static void masses(const struct gas *gas, const struct geometry *where, double *shell_mass)
{
    const float *position = gas->position, *mass = gas->mass;
#pragma omp parallel for schedule(static) reduction(+ : shell_mass[ : SHELLS])
    for (size_t i = 0; i < gas->count; i++) {
        double d[3];
        int shell = shell_of(where, towards(position + 3 * i, where, d));
        if (shell >= 0)
            shell_mass[shell] += mass[i];
    }
}

static void counts(const struct gas *gas, const struct geometry *where, uint64_t *elements)
{
    const float *position = gas->position;
#pragma omp parallel for schedule(static) reduction(+ : elements[ : SHELLS])
    for (size_t i = 0; i < gas->count; i++) {
        double d[3];
        int shell = shell_of(where, towards(position + 3 * i, where, d));
        if (shell >= 0)
            elements[shell]++;
    }
}

struct quantities one_loop_each(const struct gas *gas, const struct geometry *where)
{
    if (gas->precision != SINGLE)
        give_up("the loops for each quantity are written for float arrays");
    struct quantities found = { 0 };
    found.star_formation_rate = sum(gas->star_formation_rate, gas->count);
    found.mass = sum(gas->mass, gas->count);
    flow(gas, where, 1.0, found.outward);
    flow(gas, where, -1.0, found.inward);
    masses(gas, where, found.shell_mass);
    counts(gas, where, found.elements);
    return found;
}
