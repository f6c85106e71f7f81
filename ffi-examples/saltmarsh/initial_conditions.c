/* A Gaussian field with the linear power spectrum, from white noise hashed cell by cell, moves
 * two interleaved lattices by the approximation of Zel'dovich 1970 (A&A 5, 84): displacement
 * psi = i k / k^2 delta, velocity a^2 dx/dt = a^2 H dlnD/dlna psi. */
#include "initial_conditions.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "chance.h"
#include "power_spectrum.h"

/* Each axis of a lattice of particles, displaced: what one species starts from. */
struct lattice {
    enum species species;
    double offset; /* of every axis, in lattice spacings */
    double mass;
};

static void white_noise(struct mesh *mesh, uint64_t seed)
{
    for (ptrdiff_t x = 0; x < mesh->planes; x++) {
        for (ptrdiff_t y = 0; y < mesh->cells; y++) {
            double *row = mesh->field + (x * mesh->cells + y) * mesh->row;
            for (ptrdiff_t z = 0; z < mesh->cells; z++) {
                ptrdiff_t cell = ((mesh->first_plane + x) * mesh->cells + y) * mesh->cells + z;
                row[z] = chance_gaussian(seed, (uint64_t)cell);
            }
        }
    }
}

struct colouring {
    struct power_spectrum spectrum;
    double growth;
    double fundamental;
    double volume;
    int nyquist;
    double noise_power; /* of an uncoloured mode: the number of cells */
};

static void colour(void *context, const int wave[3], double complex *mode)
{
    const struct colouring *colouring = context;
    double square = 0.0;
    int beyond = 0;
    for (int axis = 0; axis < 3; axis++) {
        square += (double)wave[axis] * wave[axis];
        /* A mode at the Nyquist frequency has no defined gradient. */
        beyond |= wave[axis] == colouring->nyquist;
    }
    double power = power_at(&colouring->spectrum, colouring->fundamental * sqrt(square));
    double amplitude = colouring->growth * sqrt(power / colouring->volume / colouring->noise_power);
    *mode *= beyond ? 0.0 : amplitude;
}

struct displacing {
    int axis;
    double fundamental;
    double shift; /* phase per wave number: where the lattice lies within the cells */
};

static void displace(void *context, const int wave[3], double complex *mode)
{
    const struct displacing *displacing = context;
    double square = 0.0, sum = 0.0;
    for (int axis = 0; axis < 3; axis++) {
        square += (double)wave[axis] * wave[axis];
        sum += wave[axis];
    }
    if (square <= 0.0) {
        *mode = 0.0;
        return;
    }
    double phase = displacing->shift * sum;
    *mode *= I * (wave[displacing->axis] / square / displacing->fundamental) *
             (cos(phase) + I * sin(phase));
}

/* Adds this rank's planes of one lattice to its species, undisplaced. */
static void lay_out(struct simulation *simulation, const struct mesh *mesh,
                    const struct lattice *lattice)
{
    struct store *store = &simulation->species[lattice->species];
    double spacing = mesh->box / (double)mesh->cells;
    uint64_t first_id = lattice->species == GAS
                            ? (uint64_t)(mesh->cells * mesh->cells * mesh->cells)
                            : 0;
    for (ptrdiff_t x = 0; x < mesh->planes; x++) {
        for (ptrdiff_t y = 0; y < mesh->cells; y++) {
            for (ptrdiff_t z = 0; z < mesh->cells; z++) {
                struct body *body = store_append(store);
                ptrdiff_t place[3] = { mesh->first_plane + x, y, z };
                body->id = first_id + (uint64_t)((place[0] * mesh->cells + y) * mesh->cells + z);
                body->mass = lattice->mass;
                for (int axis = 0; axis < 3; axis++)
                    body->position[axis] = spacing * ((double)place[axis] + lattice->offset);
            }
        }
    }
}

/* Moves the lattice along one axis by the displacement in the mesh. */
static void move(struct simulation *simulation, const struct mesh *mesh,
                 const struct lattice *lattice, int axis)
{
    const struct cosmology *cosmology = &simulation->parameters.cosmology;
    double a = simulation->clock.scale_factor;
    double speed = a * a * hubble_rate(cosmology, a) * growth_rate(cosmology, a);
    size_t index = 0;
    for (ptrdiff_t x = 0; x < mesh->planes; x++) {
        for (ptrdiff_t y = 0; y < mesh->cells; y++) {
            const double *row = mesh->field + (x * mesh->cells + y) * mesh->row;
            for (ptrdiff_t z = 0; z < mesh->cells; z++) {
                struct body *body = body_at(&simulation->species[lattice->species], index++);
                body->position[axis] += row[z];
                body->velocity[axis] = speed * row[z];
            }
        }
    }
}

/* Masses are rounded to 24 bits: sums of whole particles are then exact in any order, and the
 * baryons of the box can be counted without rounding. */
static double particle_mass(const struct simulation *simulation, double omega)
{
    double side = simulation->parameters.side;
    return (double)(float)(omega * CRITICAL_DENSITY * box_volume(simulation) / (side * side * side));
}

static void warm_gas(struct simulation *simulation)
{
    const struct parameters *parameters = &simulation->parameters;
    struct store *gas = &simulation->species[GAS];
    double radius = parameters->box / parameters->side * cbrt(0.75 * parameters->neighbours / PI);
    double smallest = parameters->smallest_cells * parameters->box / parameters->mesh;
    for (size_t i = 0; i < gas->count; i++) {
        gas_at(gas, i)->internal_energy = parameters->initial_kelvin / KELVIN_PER_ENERGY;
        gas_at(gas, i)->smoothing_length = fmax(radius, smallest);
    }
}

void initial_conditions(struct simulation *simulation)
{
    const struct parameters *parameters = &simulation->parameters;
    const struct cosmology *cosmology = &parameters->cosmology;
    double gas_omega = parameters->dark_only ? 0.0 : cosmology->omega_baryon;
    struct lattice lattices[2] = {
        { DARK_MATTER, 0.0, particle_mass(simulation, cosmology->omega_matter - gas_omega) },
        { GAS, 0.5, particle_mass(simulation, gas_omega) },
    };
    int lattice_count = parameters->dark_only ? 1 : 2;
    simulation->gas_particle_mass = lattices[1].mass;

    struct mesh mesh;
    mesh_init(&mesh, simulation->comm, parameters->side, parameters->box);
    white_noise(&mesh, parameters->seed);
    fftw_execute(mesh.forward);
    struct colouring colouring = { .fundamental = 2.0 * PI / parameters->box,
                                   .volume = box_volume(simulation),
                                   .nyquist = parameters->side / 2,
                                   .noise_power = pow(parameters->side, 3.0) };
    power_spectrum_init(&colouring.spectrum, cosmology);
    colouring.growth = growth_factor(cosmology, simulation->clock.scale_factor);
    mesh_for_each_mode(&mesh, colour, &colouring);

    size_t modes = (size_t)(mesh.columns * mesh.cells * mesh.row);
    double *density = allocate(modes, sizeof *density);
    memcpy(density, mesh.field, modes * sizeof *density);
    for (int l = 0; l < lattice_count; l++) {
        lay_out(simulation, &mesh, &lattices[l]);
        for (int axis = 0; axis < 3; axis++) {
            memcpy(mesh.field, density, modes * sizeof *density);
            struct displacing displacing = {
                .axis = axis,
                .fundamental = colouring.fundamental,
                .shift = 2.0 * PI * lattices[l].offset / parameters->side,
            };
            mesh_for_each_mode(&mesh, displace, &displacing);
            fftw_execute(mesh.backward);
            move(simulation, &mesh, &lattices[l], axis);
        }
    }
    free(density);
    mesh_free(&mesh);
    warm_gas(simulation);
    domain_migrate(&simulation->domain, simulation->species);
}
