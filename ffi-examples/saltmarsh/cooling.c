/* The cooling function is a sum of three power laws, of the size and slope of collisional
 * ionisation equilibrium: hydrogen and helium lines that fall from 1e5 K, metal lines that fall
 * from there more slowly, and free-free emission. Nothing cools below 1e4 K; from reionisation on
 * gas is not colder than that either. The implicit equation is solved by bisection, so any step
 * is stable. */
#include "cooling.h"

#include <math.h>

#define FLOOR_KELVIN 1e4
#define SOLAR_METALLICITY 0.0134
/* Relative, of the energy after a step. */
#define ACCURACY 1e-4

double cooling_function(double kelvin, double metallicity)
{
    if (kelvin <= FLOOR_KELVIN)
        return 0.0;
    double warm = kelvin / 1e5;
    /* Lines need some ionisation: they set in steeply above 1e4 K. */
    double onset = 1.0 - FLOOR_KELVIN / kelvin;
    double lines = 6e-23 * (warm < 1.0 ? 1.0 : 1.0 / warm);
    double metals = 4e-22 * (metallicity / SOLAR_METALLICITY) *
                    (warm < 1.0 ? warm : pow(warm, -0.7));
    double free_free = 2.3e-27 * sqrt(kelvin);
    return onset * (lines + metals) + free_free;
}

/* Loss of energy per mass and time, (km/s)^2 per unit of time. */
static double cooling_rate(const struct simulation *simulation, const struct gas *gas,
                           double energy)
{
    double hydrogen = hydrogen_number(simulation, gas->density);
    double emissivity =
        hydrogen * cooling_function(energy * KELVIN_PER_ENERGY, gas->metallicity);
    /* erg per second and hydrogen atom, to (km/s)^2 per unit of time. */
    double per_gram_second = emissivity * HYDROGEN_FRACTION / PROTON_GRAM;
    return per_gram_second * 1e-10 * TIME_SECONDS_H / simulation->parameters.cosmology.hubble;
}

/* The energy after a step at which energy + rate(energy) step equals the present one. */
static double cooled_energy(const struct simulation *simulation, const struct gas *gas,
                            double time_step)
{
    double low = FLOOR_KELVIN / KELVIN_PER_ENERGY, high = gas->internal_energy;
    if (high <= low || cooling_rate(simulation, gas, high) * time_step < 1e-6 * high)
        return high;
    for (int i = 0; i < 60 && high - low > ACCURACY * high; i++) {
        double middle = sqrt(low * high);
        if (middle + cooling_rate(simulation, gas, middle) * time_step > gas->internal_energy)
            high = middle;
        else
            low = middle;
    }
    return high;
}

void cool_gas(struct simulation *simulation, double time_step)
{
    struct store *store = &simulation->species[GAS];
    int ionised = redshift(simulation) <= simulation->parameters.reionisation_redshift;
    double floor_energy = FLOOR_KELVIN / KELVIN_PER_ENERGY;
    for (size_t i = 0; i < store->count; i++) {
        struct gas *gas = gas_at(store, i);
        gas->internal_energy = cooled_energy(simulation, gas, time_step);
        if (ionised)
            gas->internal_energy = fmax(gas->internal_energy, floor_energy);
    }
}
