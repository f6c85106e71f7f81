/* Kinetic winds, launched with constant energy per mass of stars formed. */
#ifndef SALTMARSH_WIND_H
#define SALTMARSH_WIND_H

#include "simulation.h"

/* Launch speed where a gas particle is, physical km/s. */
double wind_speed(const struct simulation *simulation, const struct gas *gas);

/* Mass launched per mass of stars formed: constant energy makes it fall as the speed squared. */
double wind_loading(const struct simulation *simulation, double speed);

/* Kicks a gas particle out of its galaxy and records the event. */
void wind_launch(struct simulation *simulation, struct gas *gas);

/* Lets wind particles that are late or far enough feel pressure again. */
void wind_recouple(struct simulation *simulation);

#endif
