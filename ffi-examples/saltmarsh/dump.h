/* All particles of one step in a file, so that others can do the sums.
 *
 * Little-endian binary, everything 8 bytes or text of fixed length:
 *
 *   char[8]    "SALTDUMP"
 *   uint64     format version, 1
 *   uint64     step
 *   float64    scale factor, age, step in scale factor, step in age, side of the box, h
 *   uint64     number of tables
 *   then for each table (dark_matter, gas, stars, black_holes, events)
 *   char[32]   its name, padded with zeros
 *   uint64     rows
 *   uint64     columns
 *   char[32]   name of each column
 *   float64    [rows][columns]; ids are whole numbers below 2^53
 *
 * Units: units.h.
 */
#ifndef SALTMARSH_DUMP_H
#define SALTMARSH_DUMP_H

#include "simulation.h"

/* Rank 0 writes what all ranks hold, rank after rank, as they hold it. Collective. */
void dump_particles(const struct simulation *simulation, const char *path);

#endif
