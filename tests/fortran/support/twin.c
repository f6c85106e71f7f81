/* The C half of same_numbers_as_c.f90: the same gas, stars and events, lent in the ways of C. */
#include "limnograph.h"
#include <stdlib.h>

enum { GAS = 3000, STARS = 700 };

struct element {
    double position[3];
    float velocity[3];
    float mass;
    int32_t id;
};

/* Lehmer's sequence, of 1 and less; Fortran has the same. */
static int64_t state;
static double next(void)
{
    state = state * 16807 % 2147483647;
    return (double)state / 2147483647.0;
}

int32_t c_twin(const char *config, const char *series)
{
    limno_options options = LIMNO_OPTIONS_INIT;
    limno_clock clock = LIMNO_CLOCK_INIT;
    limno_run *run;
    struct element *gas = malloc(GAS * sizeof *gas);
    double *x = malloc(STARS * sizeof *x), *mass = malloc(2 * sizeof *mass);
    const double dark_mass = 0.1;
    limno_status worst = LIMNO_OK, status;

    options.config_text = config;
    options.host_name = "twin";
    status = limno_open(LIMNO_VERSION, "inline", series, &options, &run);
    if (status != LIMNO_OK || gas == NULL || x == NULL || mass == NULL)
        return status != LIMNO_OK ? status : LIMNO_NO_MEMORY;
#define TRY(call) do { status = (call); if (status != LIMNO_OK) worst = status; } while (0)
    state = 1;
    for (int step = 1; step <= 3; step++) {
        for (int i = 0; i < GAS; i++) {
            for (int axis = 0; axis < 3; axis++)
                gas[i].position[axis] = 4.0 * next() - 2.0;
            for (int axis = 0; axis < 3; axis++)
                gas[i].velocity[axis] = (float)(200.0 * next() - 100.0);
            gas[i].mass = (float)(1e5 * next());
            gas[i].id = i + 1;
        }
        for (int i = 0; i < STARS; i++)
            x[i] = 1e4 * next();
        mass[0] = next();
        mass[1] = next();

        limno_tally_batch batch = LIMNO_TALLY_BATCH_INIT;
        batch.channel = "wind";
        batch.count = 2;
        batch.mass = mass;
        batch.energy = mass;
        TRY(limno_tally(run, &batch));

        clock.step = (uint64_t)step;
        clock.time = 0.1 * step;
        clock.step_length = 0.1;
        TRY(limno_mark(run, &clock));
        TRY(limno_lend_vector(run, "gas", "position", gas[0].position, GAS, sizeof gas[0],
                              LIMNO_F64));
        TRY(limno_lend_vector(run, "gas", "velocity", gas[0].velocity, GAS, sizeof gas[0],
                              LIMNO_F32));
        TRY(limno_lend(run, "gas", "mass", &gas[0].mass, GAS, sizeof gas[0], LIMNO_F32));
        TRY(limno_lend(run, "gas", "id", &gas[0].id, GAS, sizeof gas[0], LIMNO_I32));
        TRY(limno_lend(run, "star", "mass", x, STARS, sizeof x[0], LIMNO_F64));
        TRY(limno_sound(run, "star"));
        TRY(limno_lend(run, "dark_matter", "mass", &dark_mass, 1000, 0, LIMNO_F64));
        TRY(limno_enter(run));
    }
    TRY(limno_close(run));
    free(gas);
    free(x);
    free(mass);
    return worst;
}
