/* Gas as smoothed particles: density and pressure force.
 *
 * A working space holds what is known about neighbours between the moment densities are found
 * and the end of the step; star formation uses the same lists to give back mass and metals. */
#ifndef SALTMARSH_GAS_H
#define SALTMARSH_GAS_H

#include "element.h"
#include "ghosts.h"
#include "neighbour_tree.h"
#include "simulation.h"

struct gas_space {
    struct ghosts ghosts;
    struct store elements;       /* struct element: own gas in its order, then ghosts */
    struct neighbour_tree tree;
    struct candidates candidates;
    struct store near;           /* struct near: neighbours of own gas, within its own radius */
    struct store near_lists;     /* struct near_list: one per own gas particle */
    struct store pushes;         /* struct push: one per element */
};

struct near {
    uint32_t index;   /* of the element */
    float towards[3]; /* unit vector from the neighbour to the particle */
    double distance;
};

struct near_list {
    size_t start;     /* in near */
    size_t count;
};

/* What pressure does to an element. */
struct push {
    double force[3];
    double heating;
    double signal_speed;
};

void gas_space_init(struct gas_space *space, const struct simulation *simulation);
void gas_space_free(struct gas_space *space);

/* How far velocities stored in the particles lag behind the present moment: the kick factors for
 * gravity and pressure that are still to come. */
struct lag {
    double gravity;
    double pressure;
};

/* Finds smoothing lengths, densities, and the energies that adiabatic change gives since the
 * densities were last found, at scale factor before. Collective. */
void gas_density(struct gas_space *space, struct simulation *simulation, struct lag lag,
                 double before);

/* Sets pressure force, viscous heating and signal speed of all gas. Collective. */
void gas_forces(struct gas_space *space, struct simulation *simulation);

static inline struct element *gas_element(const struct gas_space *space, size_t index)
{
    return (struct element *)store_at(&space->elements, index);
}

static inline const struct near *gas_near(const struct gas_space *space, size_t own, size_t *count)
{
    const struct near_list *list = store_at(&space->near_lists, own);
    *count = list->count;
    return (const struct near *)store_at(&space->near, list->start);
}

#endif
