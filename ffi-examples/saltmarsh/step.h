/* The universe moves on by one step. */
#ifndef SALTMARSH_STEP_H
#define SALTMARSH_STEP_H

#include "gas.h"
#include "simulation.h"

/* Computes forces where the particles stand; once, before the first step. Collective. */
void first_forces(struct simulation *simulation, struct gas_space *space);

/* Advances by one step, whose length it chooses. At the end positions and velocities belong to
 * the same moment. Collective. */
void advance(struct simulation *simulation, struct gas_space *space);

#endif
