/* The units Saltmarsh computes in, stated once.
 *
 *   length    comoving Mpc/h
 *   mass      1e10 Msun/h
 *   velocity  a^2 dx/dt in km/s: the momentum that belongs to the comoving position, so that
 *             free particles keep it unchanged; the peculiar velocity is this divided by a
 *   time      (Mpc/h) / (km/s), about 977.8 Gyr/h
 *   energy    per mass, in (km/s)^2, physical
 *   density   comoving, 1e10 Msun/h per (Mpc/h)^3; physical density is this divided by a^3
 *   rates     mass per time: 1e10 Msun/h per (Mpc/h)/(km/s); h cancels, it is 0.0102 Msun/yr
 *
 * Constants in cgs are CODATA 2018 and IAU 2015 nominal values, written from memory.
 */
#ifndef SALTMARSH_UNITS_H
#define SALTMARSH_UNITS_H

#define PI 3.14159265358979323846

#define CM_PER_MPC 3.0856775814913673e24
#define GRAM_PER_MSUN 1.98841e33
#define SECONDS_PER_YEAR 3.15576e7
#define GRAVITY_CGS 6.6743e-8
#define PROTON_GRAM 1.67262192369e-24
#define BOLTZMANN_CGS 1.380649e-16
#define THOMSON_CM2 6.6524587321e-25
#define LIGHT_KM_S 299792.458

/* G and the Hubble constant in the units above; neither contains h. */
#define GRAVITY (GRAVITY_CGS * 1e10 * GRAM_PER_MSUN / CM_PER_MPC * 1e-10)
#define HUBBLE_0 100.0

/* One unit of time in seconds and in Gyr, before division by h. */
#define TIME_SECONDS_H (CM_PER_MPC / 1e5)
#define TIME_GYR_H (TIME_SECONDS_H / SECONDS_PER_YEAR * 1e-9)

/* One unit of a rate in Msun/yr. */
#define RATE_MSUN_PER_YEAR (1e10 / (TIME_GYR_H * 1e9))

#define ADIABATIC_INDEX (5.0 / 3.0)
#define HYDROGEN_FRACTION 0.76
/* One molecular weight for all gas, that of ionised hydrogen and helium. */
#define MOLECULAR_WEIGHT 0.59

/* Temperature in kelvin of gas whose energy per mass is 1 (km/s)^2. */
#define KELVIN_PER_ENERGY \
    ((ADIABATIC_INDEX - 1.0) * MOLECULAR_WEIGHT * PROTON_GRAM / BOLTZMANN_CGS * 1e10)

/* Physical hydrogen number density per cm^3 of one unit of physical density, before the factor h^2. */
#define HYDROGEN_PER_DENSITY_H2 \
    (HYDROGEN_FRACTION * 1e10 * GRAM_PER_MSUN / (CM_PER_MPC * CM_PER_MPC * CM_PER_MPC) / PROTON_GRAM)

/* Mean density of a critical universe, 3 H0^2 / (8 pi G), in units of density. */
#define CRITICAL_DENSITY (3.0 * HUBBLE_0 * HUBBLE_0 / (8.0 * PI * GRAVITY))

#endif
