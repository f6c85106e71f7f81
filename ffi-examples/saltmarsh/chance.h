/* Chance without a generator that has a state.
 *
 * Every random number is a hash of what it is for: the seed, the purpose, the particle and the
 * step. The same question has the same answer on any rank, in any order, so neither the initial
 * conditions nor star formation depend on how particles are dealt out. The mixing function is the
 * finaliser of SplitMix (Steele, Lea & Flood 2014).
 */
#ifndef SALTMARSH_CHANCE_H
#define SALTMARSH_CHANCE_H

#include <math.h>
#include <stdint.h>

#include "units.h"

enum purpose {
    CHANCE_NOISE_RADIUS = 1,
    CHANCE_NOISE_ANGLE,
    CHANCE_STAR,
    CHANCE_WIND,
    CHANCE_WIND_HEIGHT,
    CHANCE_WIND_AZIMUTH,
    CHANCE_SWALLOW
};

static inline uint64_t chance_mix(uint64_t bits)
{
    bits += UINT64_C(0x9e3779b97f4a7c15);
    bits = (bits ^ (bits >> 30)) * UINT64_C(0xbf58476d1ce4e5b9);
    bits = (bits ^ (bits >> 27)) * UINT64_C(0x94d049bb133111eb);
    return bits ^ (bits >> 31);
}

/* Uniform in (0, 1), both ends excluded. */
static inline double chance(uint64_t seed, enum purpose purpose, uint64_t who, uint64_t when)
{
    uint64_t bits = chance_mix(seed ^ chance_mix((uint64_t)purpose));
    bits = chance_mix(bits ^ who);
    bits = chance_mix(bits ^ when);
    return ((double)(bits >> 12) + 0.5) * 0x1p-52;
}

/* Gaussian of mean zero and unit variance, by the method of Box & Muller 1958. */
static inline double chance_gaussian(uint64_t seed, uint64_t who)
{
    double radius = sqrt(-2.0 * log(chance(seed, CHANCE_NOISE_RADIUS, who, 0)));
    return radius * cos(2.0 * PI * chance(seed, CHANCE_NOISE_ANGLE, who, 0));
}

#endif
