/* Everything that a host lends or passes may lie in pages that cannot be written; writing there would end the process. */
#define _GNU_SOURCE
#include "check.h"

#include <sys/mman.h>

struct passed {
    struct universe all;
    limno_clock clock;
    limno_array array;
    limno_tally_batch batch;
    limno_options options;
    double amounts[4];
    const void *places[3];
    char config[sizeof check_config], species[8], field[32], channel[8];
};

static void test(void)
{
    struct passed *p = mmap(NULL, sizeof *p, PROT_READ | PROT_WRITE, MAP_PRIVATE | MAP_ANONYMOUS, -1, 0);
    unsigned char *copy = malloc(sizeof *p);
    limno_run *run = NULL;
    int32_t layout = -1, due = -1;
    fill_universe(&p->all);
    p->clock = clock_of(1, 1.0);
    p->amounts[1] = 2.5;
    for (int k = 0; k < 3; k++) p->places[k] = &p->all.gas[0].position[k];
    p->array = (limno_array)LIMNO_ARRAY_INIT;
    p->array.scalar = LIMNO_F64, p->array.components = 3, p->array.arrays = p->places, p->array.stride = sizeof(struct gas);
    p->batch = (limno_tally_batch)LIMNO_TALLY_BATCH_INIT;
    p->batch.channel = p->channel, p->batch.count = 4, p->batch.mass = p->batch.energy = p->amounts;
    strcpy(p->config, check_config), strcpy(p->species, "gas"), strcpy(p->field, "position"), strcpy(p->channel, "wind");
    p->options = options_with(p->config);
    memcpy(copy, p, sizeof *p);
    if (mprotect(p, sizeof *p, PROT_READ)) check_fail(__LINE__, "mprotect: %s", strerror(errno));

    EXPECT(NULL, limno_open(LIMNO_VERSION, NULL, series_path("read"), &p->options, &run), LIMNO_OK);
    EXPECT(run, limno_due(run, &p->clock, &due), LIMNO_OK);
    EXPECT(run, limno_mark(run, &p->clock), LIMNO_OK);
    lend_universe(run, &p->all);
    EXPECT(run, limno_lend_array(run, p->species, p->field, &p->array, GASES), LIMNO_OK);
    EXPECT(run, limno_describe(run, p->species, p->field, &p->array, &layout), LIMNO_OK);
    EXPECT(run, limno_lend_again_arrays(run, layout, p->places, GASES), LIMNO_OK);
    EXPECT(run, limno_tally(run, &p->batch), LIMNO_OK);
    EXPECT(run, limno_sound(run, p->species), LIMNO_OK);
    EXPECT(run, limno_enter(run), LIMNO_OK);
    EXPECT(run, limno_close(run), LIMNO_OK);
    CHECK(memcmp(copy, p, sizeof *p) == 0, "something changed all the same");
    CELL(read_back(series_path("read"), "run"), 1, "tally_wind_mass", 2.5);
    CELL(read_back(series_path("read"), "run"), 1, "black_holes", HOLES);
    free(copy);
    munmap(p, sizeof *p);
}
