/* Mass goes to the eight nearest mesh points in proportion to the overlap of a cell-sized cloud
 * (cloud in cell; Hockney & Eastwood 1981); the potential follows by division by -k^2; its
 * gradient is the four-point difference, brought to the particles with the same clouds. As
 * assignment and interpolation are the same and the difference is antisymmetric, no particle
 * acts on itself and total momentum is kept to rounding. */
#include "mesh_gravity.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "units.h"

/* Mesh planes on either side that a four-point difference reaches. */
#define REACH 2

/* The cloud of a particle: lower mesh point on each axis and the share of the upper one. */
struct cloud {
    ptrdiff_t lower[3];
    double upper_share[3];
};

static struct cloud cloud_of(const double position[3], double cells_per_length)
{
    struct cloud cloud;
    for (int axis = 0; axis < 3; axis++) {
        double place = position[axis] * cells_per_length;
        double lower = floor(place);
        cloud.lower[axis] = (ptrdiff_t)lower;
        cloud.upper_share[axis] = place - lower;
    }
    return cloud;
}

/* The memory is the mesh's own and valid until the next call. */
static struct planes planes_of_domain(struct mesh *mesh, const struct domain *domain,
                                      ptrdiff_t margin)
{
    double cells_per_length = (double)mesh->cells / mesh->box;
    struct planes planes;
    planes.first = (ptrdiff_t)floor(domain->edges[domain->rank] * cells_per_length) - margin;
    planes.count = (ptrdiff_t)floor(domain->edges[domain->rank + 1] * cells_per_length) + 2 +
                   margin - planes.first;
    store_resize(&mesh->lent, (size_t)(planes.count * mesh->cells * mesh->cells));
    planes.values = store_at(&mesh->lent, 0);
    return planes;
}

static void deposit(const struct mesh *mesh, struct planes *planes, const struct store *store)
{
    double cells_per_length = (double)mesh->cells / mesh->box;
    ptrdiff_t cells = mesh->cells;
    for (size_t i = 0; i < store->count; i++) {
        const struct body *body = body_at(store, i);
        struct cloud cloud = cloud_of(body->position, cells_per_length);
        ptrdiff_t y[2] = { cloud.lower[1] % cells, (cloud.lower[1] + 1) % cells };
        ptrdiff_t z[2] = { cloud.lower[2] % cells, (cloud.lower[2] + 1) % cells };
        double *plane = planes->values + (cloud.lower[0] - planes->first) * cells * cells;
        for (int corner = 0; corner < 4; corner++) {
            int up_x = corner >> 1, up_y = corner & 1;
            double share = body->mass *
                           (up_x ? cloud.upper_share[0] : 1.0 - cloud.upper_share[0]) *
                           (up_y ? cloud.upper_share[1] : 1.0 - cloud.upper_share[1]);
            double *row = plane + (up_x * cells + y[up_y]) * cells;
            row[z[0]] += share * (1.0 - cloud.upper_share[2]);
            row[z[1]] += share * cloud.upper_share[2];
        }
    }
}

/* Mass per mesh cell, transformed. */
static void transform_mass(struct mesh *mesh, const struct domain *domain,
                           const struct store species[SPECIES_COUNT])
{
    struct planes planes = planes_of_domain(mesh, domain, 0);
    memset(planes.values, 0, mesh->lent.count * sizeof *planes.values);
    for (int s = 0; s < SPECIES_COUNT; s++)
        deposit(mesh, &planes, &species[s]);
    mesh_clear(mesh);
    mesh_collect(mesh, &planes);
    fftw_execute(mesh->forward);
}

struct contrast {
    double per_mass;
};

static void to_contrast(void *context, const int wave[3], double complex *mode)
{
    const struct contrast *contrast = context;
    if (wave[0] == 0 && wave[1] == 0 && wave[2] == 0)
        *mode = 0.0;
    else
        *mode *= contrast->per_mass;
}

void mesh_density_contrast(struct mesh *mesh, const struct domain *domain,
                           const struct store species[SPECIES_COUNT])
{
    double mass = 0.0, total = 0.0;
    for (int s = 0; s < SPECIES_COUNT; s++) {
        for (size_t i = 0; i < species[s].count; i++)
            mass += body_at(&species[s], i)->mass;
    }
    MPI_Allreduce(&mass, &total, 1, MPI_DOUBLE, MPI_SUM, mesh->comm);
    transform_mass(mesh, domain, species);
    struct contrast contrast = { 1.0 / total };
    mesh_for_each_mode(mesh, to_contrast, &contrast);
}

/* Turns the modes of mass per cell into those of the comoving potential. The window of the clouds
 * is left in: it softens forces below two cells or so. To divide it out would bring forward the
 * images of the particle lattice beyond the mesh frequency, and modes would grow too fast for as
 * long as particles remember their lattice. */
static void to_potential(struct mesh *mesh)
{
    int cells = (int)mesh->cells, half = cells / 2;
    double fundamental = 2.0 * PI / mesh->box;
    double strength = -4.0 * PI * GRAVITY / (mesh->box * mesh->box * mesh->box);
    double *square = allocate((size_t)cells, sizeof *square); /* k^2 along an axis */
    for (int i = 0; i < cells; i++) {
        double wave = fundamental * (i > half ? i - cells : i);
        square[i] = wave * wave;
    }
    double complex *mode = (double complex *)mesh->field;
    for (ptrdiff_t column = 0; column < mesh->columns; column++) {
        ptrdiff_t y = mesh->first_column + column;
        for (int x = 0; x < cells; x++) {
            for (int z = 0; z <= half; z++) {
                double total = square[x] + square[y] + square[z];
                *mode++ *= total > 0.0 ? strength / total : 0.0;
            }
        }
    }
    free(square);
}

/* The row of mesh points through a cloud's corner, shifted by whole cells along x and y. */
struct neighbourhood {
    const double *plane[2 * REACH + 2];
    ptrdiff_t y[2 * REACH + 2];
    ptrdiff_t z[2 * REACH + 2];
};

static double four_point(double further_down, double down, double up, double further_up)
{
    return (8.0 * (up - down) - (further_up - further_down)) / 12.0;
}

static void interpolate(const struct mesh *mesh, const struct planes *planes, struct store *store)
{
    double cells_per_length = (double)mesh->cells / mesh->box;
    ptrdiff_t cells = mesh->cells;
    for (size_t i = 0; i < store->count; i++) {
        struct body *body = body_at(store, i);
        struct cloud cloud = cloud_of(body->position, cells_per_length);
        struct neighbourhood near;
        for (int n = 0; n < 2 * REACH + 2; n++) {
            ptrdiff_t shift = n - REACH;
            near.plane[n] = planes->values + (cloud.lower[0] + shift - planes->first) * cells * cells;
            near.y[n] = (cloud.lower[1] + shift + cells) % cells * cells;
            near.z[n] = (cloud.lower[2] + shift + cells) % cells;
        }
        double gradient[3] = { 0.0, 0.0, 0.0 }, potential = 0.0;
        for (int corner = 0; corner < 8; corner++) {
            int x = (corner >> 2) + REACH, y = (corner >> 1 & 1) + REACH, z = (corner & 1) + REACH;
            double share = (corner & 4 ? cloud.upper_share[0] : 1.0 - cloud.upper_share[0]) *
                           (corner & 2 ? cloud.upper_share[1] : 1.0 - cloud.upper_share[1]) *
                           (corner & 1 ? cloud.upper_share[2] : 1.0 - cloud.upper_share[2]);
            ptrdiff_t in_plane = near.y[y] + near.z[z];
            const double *row = near.plane[x] + near.y[y];
            potential += share * row[near.z[z]];
            gradient[0] += share * four_point(near.plane[x - 2][in_plane], near.plane[x - 1][in_plane],
                                              near.plane[x + 1][in_plane], near.plane[x + 2][in_plane]);
            const double *column = near.plane[x] + near.z[z];
            gradient[1] += share * four_point(column[near.y[y - 2]], column[near.y[y - 1]],
                                              column[near.y[y + 1]], column[near.y[y + 2]]);
            gradient[2] += share * four_point(row[near.z[z - 2]], row[near.z[z - 1]],
                                              row[near.z[z + 1]], row[near.z[z + 2]]);
        }
        for (int axis = 0; axis < 3; axis++)
            body->gravity[axis] = -gradient[axis] * cells_per_length;
        body->potential = potential;
    }
}

void mesh_gravity(struct mesh *mesh, const struct domain *domain,
                  struct store species[SPECIES_COUNT])
{
    transform_mass(mesh, domain, species);
    to_potential(mesh);
    fftw_execute(mesh->backward);
    struct planes planes = planes_of_domain(mesh, domain, REACH);
    mesh_share(mesh, &planes);
    for (int s = 0; s < SPECIES_COUNT; s++)
        interpolate(mesh, &planes, &species[s]);
}
