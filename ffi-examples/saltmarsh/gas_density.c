/* The density estimate: a weighted count of neighbours within a radius that encloses a set number
 * of them (Springel & Hernquist 2002, MNRAS 333, 649, also for the gradient correction). */
#include <math.h>
#include <stdlib.h>

#include "gas.h"
#include "kernel.h"

/* A radius changes by at most this factor in a step, so that one exchange of ghosts suffices. */
#define GROWTH 1.1
/* Largest radius, of the box side: beyond it the nearest image is not the only one that counts. */
#define LARGEST_RADIUS 0.3
/* Accepted deviation of the neighbour count. */
#define COUNT_TOLERANCE 1.0

/* One particle's surroundings, as sifted from the candidates of its leaf. */
struct surroundings {
    size_t count;
    size_t capacity;
    size_t *candidate;
    double *distance;
    double *square;    /* of the distance of every candidate */
};

static void surroundings_reserve(struct surroundings *around, size_t capacity)
{
    if (capacity <= around->capacity)
        return;
    around->capacity = 2 * capacity;
    size_t size = around->capacity * sizeof(double);
    around->candidate = reallocate(around->candidate, around->capacity * sizeof(size_t));
    around->distance = reallocate(around->distance, size);
    around->square = reallocate(around->square, size);
}

static void surroundings_free(struct surroundings *around)
{
    free(around->candidate);
    free(around->distance);
    free(around->square);
}

/* Keeps the candidates within a radius of a place given relative to the leaf. Squares first: that
 * loop has no branch and is done several at a time. */
static void sift(struct surroundings *around, const struct candidates *candidates,
                 const double place[3], double radius)
{
    size_t total = candidates->count, count = 0;
    surroundings_reserve(around, total);
    const double *restrict x = candidates->offset[0];
    const double *restrict y = candidates->offset[1];
    const double *restrict z = candidates->offset[2];
    double *restrict square = around->square;
    double place_x = place[0], place_y = place[1], place_z = place[2];
    for (size_t c = 0; c < total; c++)
        square[c] = (x[c] - place_x) * (x[c] - place_x) + (y[c] - place_y) * (y[c] - place_y) +
                    (z[c] - place_z) * (z[c] - place_z);
    double limit = radius * radius;
    for (size_t c = 0; c < total; c++) {
        around->candidate[count] = c;
        count += square[c] < limit;
    }
    for (size_t i = 0; i < count; i++)
        around->distance[i] = sqrt(square[around->candidate[i]]);
    around->count = count;
}

/* Number of particles within a radius as the kernel counts them. */
static double weighted_count(const struct surroundings *around, double radius)
{
    double per_radius = 1.0 / radius, sum = 0.0;
    for (size_t i = 0; i < around->count; i++)
        sum += kernel_shape(around->distance[i] * per_radius);
    return 4.0 / 3.0 * PI * sum;
}

/* The radius that encloses the wanted number, or the nearest to it that is allowed. */
static double find_radius(const struct surroundings *around, double start, double wanted,
                          double smallest, double largest)
{
    double low = fmax(start / GROWTH, smallest), high = fmin(start * GROWTH, largest);
    double radius = fmin(fmax(start, smallest), largest);
    for (int attempt = 0; attempt < 30; attempt++) {
        double count = weighted_count(around, radius);
        if (fabs(count - wanted) < COUNT_TOLERANCE)
            break;
        if (count < wanted)
            low = radius;
        else
            high = radius;
        if (high - low < 1e-6 * high)
            break;
        /* The count grows about as the cube of the radius. A first guess beyond what is allowed
         * tries the end of that; later ones that leave the bracket halve it. */
        double guess = radius * cbrt(wanted / count);
        if (attempt == 0)
            radius = fmin(fmax(guess, low), high);
        else
            radius = guess > low && guess < high ? guess : 0.5 * (low + high);
    }
    return radius;
}

/* Copies the gas to elements, with velocities and couplings as of now. */
static void make_elements(struct gas_space *space, const struct simulation *simulation,
                          struct lag lag)
{
    const struct store *gas = &simulation->species[GAS];
    double a = simulation->clock.scale_factor;
    store_resize(&space->elements, gas->count);
    for (size_t i = 0; i < gas->count; i++) {
        const struct gas *from = gas_at(gas, i);
        struct element *element = gas_element(space, i);
        *element = (struct element){ .mass = from->body.mass,
                                     .radius = from->smoothing_length,
                                     .uncoupled = from->coupling_time > simulation->clock.time };
        for (int axis = 0; axis < 3; axis++) {
            element->position[axis] = from->body.position[axis];
            element->velocity[axis] =
                (from->body.velocity[axis] + lag.gravity * from->body.gravity[axis] +
                 lag.pressure * from->pressure_force[axis]) / a;
        }
    }
}

/* What pressure force and viscosity need besides density. */
static void set_state(const struct simulation *simulation, struct element *element,
                      const struct gas *gas)
{
    const struct parameters *parameters = &simulation->parameters;
    double a = simulation->clock.scale_factor;
    double per_density = (ADIABATIC_INDEX - 1.0) * gas->internal_energy;
    /* Gas must not fragment below what the mesh resolves: its pressure is at least what keeps the
     * Jeans length at some mesh cells (Truelove et al. 1997, ApJ 489, L179). */
    double shortest = parameters->jeans_cells * a * parameters->box / parameters->mesh;
    double jeans = GRAVITY * gas->density / (a * a * a) * shortest * shortest / PI / ADIABATIC_INDEX;
    per_density = fmax(per_density, jeans);
    element->density = gas->density;
    element->radius = gas->smoothing_length;
    element->sound_speed = sqrt(ADIABATIC_INDEX * per_density);
    element->pressure_term *= per_density / gas->density;
}

/* Sums over one particle's neighbours. */
struct sums {
    double density;
    double radius_slope; /* of density, by the radius */
};

/* Lists the neighbours of an own particle and sums over them. */
static struct sums gather(struct gas_space *space, size_t own, const struct surroundings *around,
                          const double place[3])
{
    double radius = gas_element(space, own)->radius, per_radius = 1.0 / radius;
    double per_cube = per_radius * per_radius * per_radius;
    const struct candidates *candidates = &space->candidates;
    struct sums sums = { 0.0, 0.0 };
    struct near_list *list = store_at(&space->near_lists, own);
    list->start = space->near.count;
    store_resize(&space->near, list->start + around->count);
    struct near *near = store_at(&space->near, list->start);
    for (size_t i = 0; i < around->count; i++) {
        double distance = around->distance[i], q = distance * per_radius;
        if (q >= 1.0)
            continue;
        size_t candidate = around->candidate[i];
        double per_distance = distance > 0.0 ? 1.0 / distance : 0.0;
        near->index = (uint32_t)candidates->index[candidate];
        near->distance = distance;
        for (int axis = 0; axis < 3; axis++)
            near->towards[axis] =
                (float)((place[axis] - candidates->offset[axis][candidate]) * per_distance);
        double mass = gas_element(space, near->index)->mass;
        double shape = kernel_shape(q);
        sums.density += mass * shape;
        sums.radius_slope -= mass * (3.0 * shape + q * kernel_slope(q));
        near++;
    }
    list->count = (size_t)(near - (struct near *)store_at(&space->near, list->start));
    space->near.count = list->start + list->count;
    sums.density *= per_cube;
    sums.radius_slope *= per_cube * per_radius;
    return sums;
}

static void finish(struct gas_space *space, const struct simulation *simulation, size_t own,
                   const struct sums *sums, double before)
{
    struct gas *gas = gas_at(&simulation->species[GAS], own);
    struct element *element = gas_element(space, own);
    double a = simulation->clock.scale_factor;
    size_t count;
    if (gas->density > 0.0) {
        double thinning = before / a;
        double ratio = sums->density / gas->density * thinning * thinning * thinning;
        gas->internal_energy *= pow(ratio, ADIABATIC_INDEX - 1.0);
    }
    gas->density = sums->density;
    gas->smoothing_length = element->radius;
    gas_near(space, own, &count);
    gas->neighbours = (uint32_t)count;
    double correction = 1.0 + element->radius / (3.0 * sums->density) * sums->radius_slope;
    element->pressure_term = 1.0 / fmin(fmax(correction, 0.3), 3.0);
    set_state(simulation, element, gas);
}

static void density_of_leaf(struct gas_space *space, const struct simulation *simulation,
                            const struct tree_node *leaf, struct surroundings *around,
                            double before)
{
    const struct parameters *parameters = &simulation->parameters;
    double reach = 0.0, largest = LARGEST_RADIUS * parameters->box;
    double smallest = parameters->smallest_cells * parameters->box / parameters->mesh;
    const size_t *member = space->tree.order + leaf->first;
    for (size_t i = 0; i < leaf->count; i++) {
        if (member[i] < space->ghosts.own)
            reach = fmax(reach, gas_element(space, member[i])->radius);
    }
    if (reach <= 0.0)
        return;
    tree_candidates(&space->tree, leaf, GROWTH * reach, &space->candidates);
    for (size_t i = 0; i < leaf->count; i++) {
        size_t own = member[i];
        if (own >= space->ghosts.own)
            continue;
        struct element *element = gas_element(space, own);
        double place[3];
        for (int axis = 0; axis < 3; axis++)
            place[axis] = nearest_image(element->position[axis] - leaf->centre[axis],
                                        parameters->box);
        sift(around, &space->candidates, place, GROWTH * element->radius);
        element->radius =
            find_radius(around, element->radius, parameters->neighbours, smallest, largest);
        struct sums sums = gather(space, own, around, place);
        finish(space, simulation, own, &sums, before);
    }
}

void gas_density(struct gas_space *space, struct simulation *simulation, struct lag lag,
                 double before)
{
    make_elements(space, simulation, lag);
    ghosts_fetch(&space->ghosts, &space->elements, simulation->parameters.box, GROWTH);
    tree_build(&space->tree, &space->elements);
    space->near.count = 0;
    store_resize(&space->near_lists, space->ghosts.own);
    struct surroundings around = { 0, 0, NULL, NULL, NULL };
    for (size_t n = 0; n < space->tree.nodes.count; n++) {
        const struct tree_node *node = tree_node(&space->tree, n);
        if (node->left == 0)
            density_of_leaf(space, simulation, node, &around, before);
    }
    surroundings_free(&around);
    ghosts_refresh(&space->ghosts, &space->elements);
}
