/* Pressure and artificial viscosity between neighbours.
 *
 * A pair's force has one part with the kernel of each partner. The part with a particle's own
 * kernel needs only the neighbours within its own radius, so each rank runs over its own lists,
 * pushes both partners in opposite directions, and ghosts hand their pushes to their owners:
 * momentum is kept to rounding. */
#include <math.h>
#include <string.h>

#include "gas.h"
#include "kernel.h"
#include "numbers.h"

/* Strength of the viscosity, in the signal-speed form of Monaghan 1997 (J. Comput. Phys. 136, 298). */
#define VISCOSITY 1.0

void gas_space_init(struct gas_space *space, const struct simulation *simulation)
{
    ghosts_init(&space->ghosts, simulation->comm);
    store_init(&space->elements, sizeof(struct element));
    tree_init(&space->tree, simulation->parameters.box);
    candidates_init(&space->candidates);
    store_init(&space->near, sizeof(struct near));
    store_init(&space->near_lists, sizeof(struct near_list));
    store_init(&space->pushes, sizeof(struct push));
}

void gas_space_free(struct gas_space *space)
{
    ghosts_free(&space->ghosts);
    store_free(&space->elements);
    tree_free(&space->tree);
    candidates_free(&space->candidates);
    store_free(&space->near);
    store_free(&space->near_lists);
    store_free(&space->pushes);
}

static void push_pair(const struct element *self, const struct element *other,
                      const struct near *near, double scale_factor, double hubble,
                      struct push *on_self, struct push *on_other)
{
    double radius = self->radius;
    double slope = kernel_slope(near->distance / radius) / (radius * radius * radius * radius);
    double approach = scale_factor * hubble * near->distance;
    for (int axis = 0; axis < 3; axis++)
        approach += (self->velocity[axis] - other->velocity[axis]) * (double)near->towards[axis];
    double signal = self->sound_speed + other->sound_speed;
    double strength = self->pressure_term * slope;
    if (approach < 0.0) {
        signal -= 3.0 * approach;
        double viscous = -0.5 * VISCOSITY * signal * approach /
                         (0.5 * (self->density + other->density));
        /* Half, as the other half comes with the partner's kernel; likewise the heat is shared. */
        double half = 0.5 * viscous * slope;
        strength += half;
        double heat = 0.5 * half * approach / scale_factor;
        on_self->heating += other->mass * heat;
        on_other->heating += self->mass * heat;
    }
    for (int axis = 0; axis < 3; axis++) {
        on_self->force[axis] -= other->mass * strength * (double)near->towards[axis];
        on_other->force[axis] += self->mass * strength * (double)near->towards[axis];
    }
    on_self->signal_speed = larger(on_self->signal_speed, signal);
    on_other->signal_speed = larger(on_other->signal_speed, signal);
}

static void combine_pushes(void *own, const void *copy)
{
    struct push *push = own;
    const struct push *other = copy;
    for (int axis = 0; axis < 3; axis++)
        push->force[axis] += other->force[axis];
    push->heating += other->heating;
    push->signal_speed = larger(push->signal_speed, other->signal_speed);
}

void gas_forces(struct gas_space *space, struct simulation *simulation)
{
    double a = simulation->clock.scale_factor;
    double hubble = hubble_rate(&simulation->parameters.cosmology, a);
    store_resize(&space->pushes, space->elements.count);
    memset(space->pushes.items, 0, space->pushes.count * space->pushes.item_size);
    struct push *pushes = (struct push *)(void *)space->pushes.items;
    for (size_t i = 0; i < space->ghosts.own; i++) {
        const struct element *self = gas_element(space, i);
        size_t count;
        const struct near *near = gas_near(space, i, &count);
        pushes[i].signal_speed = larger(pushes[i].signal_speed, self->sound_speed);
        for (size_t n = 0; n < count; n++) {
            const struct element *other = gas_element(space, near[n].index);
            if (near[n].distance > 0.0 && !self->uncoupled && !other->uncoupled)
                push_pair(self, other, &near[n], a, hubble, &pushes[i], &pushes[near[n].index]);
        }
    }
    ghosts_return(&space->ghosts, &space->pushes, combine_pushes);
    for (size_t i = 0; i < space->ghosts.own; i++) {
        struct gas *gas = gas_at(&simulation->species[GAS], i);
        memcpy(gas->pressure_force, pushes[i].force, sizeof gas->pressure_force);
        gas->shock_heating = pushes[i].heating;
        gas->signal_speed = pushes[i].signal_speed;
    }
}
