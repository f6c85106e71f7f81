/* The only place where Saltmarsh meets the library that measures it.
 *
 * Built with -DSALTMARSH_PLAIN all of this is empty, which is how the cost of being measured is
 * found. */
#ifndef SALTMARSH_LENDING_H
#define SALTMARSH_LENDING_H

#include "simulation.h"

struct lending;

/* Begins to record when a series was asked for; NULL if not, or if it cannot be. Collective. */
struct lending *lending_open(const struct simulation *simulation);

/* Lends the state at the end of a step and posts its events. Collective. */
void lending_step(struct lending *lending, const struct simulation *simulation);

/* Ends the recording and frees it; does nothing for NULL. Collective. */
void lending_close(struct lending *lending);

#endif
