/* Gravity in the periodic box by the particle-mesh method. */
#ifndef SALTMARSH_MESH_GRAVITY_H
#define SALTMARSH_MESH_GRAVITY_H

#include "domain.h"
#include "mesh.h"
#include "particles.h"

/* Leaves the modes of the density contrast in the mesh: delta(x) = sum over k of mode exp(ikx).
 * The window of the assignment is not divided out. Collective. */
void mesh_density_contrast(struct mesh *mesh, const struct domain *domain,
                           const struct store species[SPECIES_COUNT]);

/* Sets gravity and potential of every body. Collective. */
void mesh_gravity(struct mesh *mesh, const struct domain *domain,
                  struct store species[SPECIES_COUNT]);

#endif
