#include "quantities.h"

#include <math.h>

#include "statistics.h"

void quantities_add(struct quantities *mine, const struct quantities *other)
{
    mine->star_formation_rate += other->star_formation_rate;
    mine->mass += other->mass;
    for (int shell = 0; shell < SHELLS; shell++) {
        mine->outward[shell] += other->outward[shell];
        mine->inward[shell] += other->inward[shell];
        mine->shell_mass[shell] += other->shell_mass[shell];
        mine->elements[shell] += other->elements[shell];
    }
}

static void must_agree(const char *who, const char *what, int shell, double found, double expected, double tolerance)
{
    if (!(fabs(found - expected) <= tolerance * fabs(expected)))
        give_up("%s finds %.17g for %s of shell %d (-1: all gas); the library %.17g", who, found, what, shell,
                expected);
}

void quantities_must_agree(const char *who, const struct quantities *found, const struct quantities *expected,
                           double tolerance)
{
    must_agree(who, "star formation rate", -1, found->star_formation_rate, expected->star_formation_rate, tolerance);
    must_agree(who, "mass", -1, found->mass, expected->mass, tolerance);
    for (int shell = 0; shell < SHELLS; shell++) {
        must_agree(who, "outflow", shell, found->outward[shell], expected->outward[shell], tolerance);
        must_agree(who, "inflow", shell, found->inward[shell], expected->inward[shell], tolerance);
        must_agree(who, "mass", shell, found->shell_mass[shell], expected->shell_mass[shell], tolerance);
        must_agree(who, "elements", shell, (double)found->elements[shell], (double)expected->elements[shell],
                   tolerance);
    }
}
