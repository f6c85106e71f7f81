/* Gas becomes stars, stars drive winds and give back mass and metals. */
#ifndef SALTMARSH_STAR_FORMATION_H
#define SALTMARSH_STAR_FORMATION_H

#include "gas.h"

/* Forms stars and launches winds over a step, at the rates found at its beginning. Collective. */
void form_stars(struct simulation *simulation, struct gas_space *space, double time_step);

/* Sets the rate of every gas particle as of now. */
void star_formation_rates(struct simulation *simulation);

#endif
