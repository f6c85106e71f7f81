/* A run from its first moment to its last. */
#ifndef SALTMARSH_RUN_H
#define SALTMARSH_RUN_H

#include "parameters.h"

/* Collective. Returns 1, or when check_history is set whether the star formation history is as it
 * should be. */
int run(const struct parameters *parameters, int check_history);

#endif
