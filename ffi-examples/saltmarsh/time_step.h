/* How far the next step may go. */
#ifndef SALTMARSH_TIME_STEP_H
#define SALTMARSH_TIME_STEP_H

#include "simulation.h"

/* Scale factor at the end of the next step: the same on every rank. Collective. */
double choose_scale_factor(const struct simulation *simulation);

#endif
