/*
 * minimal.c: the least a host needs. One process, a lump of gas that expands, ten steps, one series.
 *
 *   cc minimal.c -o minimal $(pkg-config --cflags --libs limnograph)
 *   ./minimal minimal.toml minimal.limno
 *   limnograph sight minimal.limno
 */
#include <limnograph.h>
#include <stdio.h>

#define N 1000

struct element {
    double position[3];
    float velocity[3];
    float mass, star_formation_rate;
};
static struct element gas[N];

int main(int argc, char **argv)
{
    limno_run *run = NULL;
    if (argc != 3) {
        fprintf(stderr, "usage: minimal CONFIG SERIES\n");
        return 2;
    }
    if (limno_open(LIMNO_VERSION, argv[1], argv[2], NULL, &run) != LIMNO_OK) {
        fprintf(stderr, "minimal: runs on without a series: %s\n", limno_last_error(NULL));
    }
    for (int i = 0; i < N; i++) { /* a lattice of 10 x 10 x 10, 10 kpc apart, that expands at 2 km/s per kpc */
        int place[3] = {i % 10, i / 10 % 10, i / 100};
        for (int k = 0; k < 3; k++) {
            gas[i].position[k] = 10.0 * place[k] - 45.0;
            gas[i].velocity[k] = 2.0f * (float)gas[i].position[k];
        }
        gas[i].mass = 1e6f, gas[i].star_formation_rate = 1e-3f;
    }
    for (int step = 1; step <= 10; step++) {
        limno_clock clock = LIMNO_CLOCK_INIT;
        clock.step = (uint64_t)step, clock.time = 0.01 * step, clock.step_length = 0.01;
        for (int i = 0; i < N; i++)
            for (int k = 0; k < 3; k++) gas[i].position[k] += 1.0227 * gas[i].velocity[k] * 0.01; /* kpc in 0.01 Gyr */

        limno_mark(run, &clock);
        limno_lend_vector(run, "gas", "position", gas[0].position, N, sizeof gas[0], LIMNO_F64);
        limno_lend_vector(run, "gas", "velocity", gas[0].velocity, N, sizeof gas[0], LIMNO_F32);
        limno_lend(run, "gas", "mass", &gas[0].mass, N, sizeof gas[0], LIMNO_F32);
        limno_lend(run, "gas", "star_formation_rate", &gas[0].star_formation_rate, N, sizeof gas[0], LIMNO_F32);
        limno_enter(run);
    }
    return limno_close(run) == LIMNO_OK ? 0 : 1;
}
