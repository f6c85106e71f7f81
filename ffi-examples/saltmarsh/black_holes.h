/* Black holes: seeding, accretion, heating, mergers. */
#ifndef SALTMARSH_BLACK_HOLES_H
#define SALTMARSH_BLACK_HOLES_H

#include "simulation.h"

/* Everything black holes do in a step. Collective. */
void black_holes(struct simulation *simulation, double time_step);

/* All holes of all ranks, in order of id, the same on every rank. The caller frees the store. */
struct store all_black_holes(const struct simulation *simulation);

/* Turns at most one gas particle of the box into a black hole. Collective. */
void seed_black_hole(struct simulation *simulation, const struct store *holes);

#endif
