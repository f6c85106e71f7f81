/* Is the universe right? Each test prints its figures and says whether they hold. */
#ifndef SALTMARSH_SELF_TEST_H
#define SALTMARSH_SELF_TEST_H

#include "parameters.h"
#include "report.h"

/* Runs the test of a name: 1 when all figures hold, 0 when not, -1 when there is no such test.
 * The history test takes the run as chosen; the others choose their own. Collective. */
int self_test(const char *name, const struct parameters *chosen);

/* Does the star formation history of a finished run peak where it should, and fall? Rank 0 only. */
int history_holds(const struct history *history);

#endif
