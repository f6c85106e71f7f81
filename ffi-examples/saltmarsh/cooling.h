/* Gas radiates. */
#ifndef SALTMARSH_COOLING_H
#define SALTMARSH_COOLING_H

#include "simulation.h"

/* Cools all gas over a step. */
void cool_gas(struct simulation *simulation, double time_step);

/* Cooling function for gas of a metallicity at a temperature, erg cm^3 / s. */
double cooling_function(double kelvin, double metallicity);

#endif
