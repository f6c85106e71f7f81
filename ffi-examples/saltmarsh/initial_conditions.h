/* Where the particles begin. */
#ifndef SALTMARSH_INITIAL_CONDITIONS_H
#define SALTMARSH_INITIAL_CONDITIONS_H

#include "simulation.h"

/* Fills dark matter and gas at the start redshift and deals them to their ranks. Collective. */
void initial_conditions(struct simulation *simulation);

#endif
