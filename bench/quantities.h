/* What is measured: the same by the library and by every rival. */
#ifndef BENCH_QUANTITIES_H
#define BENCH_QUANTITIES_H

#include <stdint.h>

enum { SHELLS = 8 };

/* Where the station and its shells are, in the host's units; what the library works out from its config. */
struct geometry {
    double box;
    double station[3];
    double edges[SHELLS + 1];
    double hubble; /* velocity per length: shells have a fixed physical radius */
};

struct quantities {
    double star_formation_rate, mass;
    /* For each shell: the sum of mass times radial velocity outward, and inward (negative); mass; elements. */
    double outward[SHELLS], inward[SHELLS], shell_mass[SHELLS];
    uint64_t elements[SHELLS];
};

/* Adds another's to one's own. */
void quantities_add(struct quantities *mine, const struct quantities *other);

/* Ends the program unless every number agrees to the relative difference `tolerance`. */
void quantities_must_agree(const char *who, const struct quantities *found, const struct quantities *expected,
                           double tolerance);

#endif
