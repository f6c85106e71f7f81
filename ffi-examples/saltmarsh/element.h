/* The working copy of gas that neighbours see: own particles first, then ghosts, which are copies
 * of particles of other ranks near enough to matter. */
#ifndef SALTMARSH_ELEMENT_H
#define SALTMARSH_ELEMENT_H

#include <stdint.h>

enum fate { STAYS, BECOMES_STAR, BECOMES_WIND };

struct element {
    double position[3];
    double velocity[3];   /* peculiar, physical, at the present moment */
    double mass;
    double radius;        /* of the kernel */
    double density;       /* comoving */
    double pressure_term; /* P / rho^2 with the kernel's gradient correction */
    double sound_speed;
    int32_t uncoupled;    /* a wind particle on its way out: neither feels nor exerts pressure */
    int32_t fate;
};

#endif
