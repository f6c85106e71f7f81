/*
 * Once warm, a thousand measured steps with every gauge on ask the heap for memory fewer than twenty times, all threads
 * together, the one that writes the series included; on one thread and on several.
 *
 * seconds: 120
 */
#define _GNU_SOURCE
#include "check.h"
#include "heap.h"

enum { ELEMENTS = 4000, WARM = 200, STEPS = 1000 };

static float *position, *velocity, *mass, *rate;

static void fill(void)
{
    position = room_for(12 * ELEMENTS), velocity = room_for(12 * ELEMENTS);
    mass = room_for(4 * ELEMENTS), rate = room_for(4 * ELEMENTS);
    for (int i = 0; i < ELEMENTS; i++) {
        for (int k = 0; k < 3; k++) {
            position[3 * i + k] = (float)(500.0 + (3.0 + i % 90) * sin(1.0 + 0.7 * i + 2.1 * k));
            velocity[3 * i + k] = (float)(100.0 * cos(0.3 * i + 1.3 * k));
        }
        mass[i] = 1e5f * (1.0f + 0.01f * (float)(i % 17));
        rate[i] = 1e-3f / (1.0f + (float)(i % 13));
    }
}

/* As EXPECT, which asks for the text of the last error each time: that is a copy on the heap. */
#define GOOD(run, call)                                  \
    do {                                                 \
        limno_status found = (call);                     \
        if (found != LIMNO_OK) EXPECT(run, found, LIMNO_OK); \
    } while (0)

static void lend_one(limno_run *run, const char *species, const char *field, const float *numbers)
{
    GOOD(run, limno_lend(run, species, field, numbers, ELEMENTS, sizeof *numbers, LIMNO_F32));
}

static void step_once(limno_run *run, uint64_t step)
{
    double energy = 1e50;
    limno_tally_batch batch = LIMNO_TALLY_BATCH_INIT;
    struct timespec pause = {0, 200000}; /* a host has something to do between its steps */
    batch.channel = "wind", batch.count = 1, batch.energy = &energy;
    GOOD(run, limno_tally(run, &batch));
    GOOD(run, mark_step(run, step));
    GOOD(run, limno_lend_vector(run, "gas", "position", position, ELEMENTS, 12, LIMNO_F32));
    /* Three arrays of their own, which happen to stand in one. */
    GOOD(run, limno_lend_xyz(run, "gas", "velocity", velocity, velocity + 1, velocity + 2, ELEMENTS, 12, LIMNO_F32));
    lend_one(run, "gas", "mass", mass);
    lend_one(run, "gas", "star_formation_rate", rate);
    lend_one(run, "star", "mass", mass);
    lend_one(run, "star", "birth_mass", mass);
    lend_one(run, "star", "birth_time", rate);
    lend_one(run, "black_hole", "mass", mass);
    lend_one(run, "black_hole", "accretion_rate", rate);
    GOOD(run, limno_enter(run));
    nanosleep(&pause, NULL);
}

static void test(void)
{
    fill();
    for (int threads = 1; threads <= 3; threads++) {
        char name[32];
        limno_options options = options_with(check_config);
        limno_run *run;
        snprintf(name, sizeof name, "threads%d", threads);
        options.threads = threads;
        EXPECT(NULL, limno_open(LIMNO_VERSION, "check.toml", series_path(name), &options, &run), LIMNO_OK);
        for (uint64_t step = 1; step <= WARM; step++) step_once(run, step);
        long before = __atomic_load_n(&heap_calls, __ATOMIC_RELAXED);
        for (uint64_t step = WARM + 1; step <= WARM + STEPS; step++) step_once(run, step);
        long calls = __atomic_load_n(&heap_calls, __ATOMIC_RELAXED) - before;
        CHECK(calls < 20, "%d threads: %ld calls in %d steps", threads, calls, (int)STEPS);
        EXPECT(run, limno_close(run), LIMNO_OK);
        struct sheet *sheet = read_back(series_path(name), "run");
        CHECK(sheet->rows == WARM + STEPS, "found %zu rows", sheet->rows);
        CELL(sheet, WARM + STEPS, "black_holes", ELEMENTS);
        CELL(sheet, WARM + STEPS, "tally_wind_events", 1);
    }
    /* The count counts. */
    void *(*volatile ask)(size_t) = malloc;
    long before = heap_calls;
    free(ask(10));
    CHECK(heap_calls == before + 1, "calls of this program are not counted");
}
