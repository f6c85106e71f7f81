/*
 * Whatever rounding, masks, flushing and flags a host has set, every call leaves them to the bit, and the numbers do not
 * depend on them.
 *
 * variants: clang fast
 */
#define _GNU_SOURCE
#include "check.h"

#include <fenv.h>

#if defined(__x86_64__)
#include <xmmintrin.h>
struct control {
    unsigned sse;
    unsigned short unit[14]; /* control, status and tag words of the old unit, and where its last instruction was */
};
static void get_control(struct control *control)
{
    memset(control, 0, sizeof *control);
    __asm__ volatile("stmxcsr %0" : "=m"(control->sse));
    /* Storing the environment masks the exceptions of the old unit: load it again. */
    __asm__ volatile("fnstenv %0\n\tfldenv %0" : "=m"(control->unit));
    /* The addresses of the last instruction and operand are nobody's business. */
    memset(control->unit + 6, 0, sizeof control->unit - 12);
}
static void set_control(unsigned sse, unsigned short unit_control)
{
    __asm__ volatile("ldmxcsr %0" : : "m"(sse));
    __asm__ volatile("fldcw %0" : : "m"(unit_control));
}
static const struct {
    unsigned sse;
    unsigned short unit;
} settings[] = {
    {0x1f80, 0x037f}, /* as a process begins */
    {0x9fc0, 0x037f}, /* flushing to zero, as -Ofast has it */
    {0x7f80, 0x0f7f}, /* rounding towards zero */
    {0x3f80, 0x077f}, /* down */
    {0x5f80, 0x0b7f}, /* up */
    {0x1f80, 0x007f}, /* the old unit in single precision */
    {0x1fbf, 0x037f}, /* every flag set */
    {0x1920, 0x0372}, /* invalid operation, division by zero and overflow trapped, inexact set */
    {0x0000, 0x0340}, /* everything trapped */
};
#define SETTINGS (sizeof settings / sizeof *settings)
#else
struct control {
    fenv_t environment;
};
static void get_control(struct control *control)
{
    memset(control, 0, sizeof *control);
    fegetenv(&control->environment);
}
static const int settings[] = {FE_TONEAREST, FE_TOWARDZERO, FE_DOWNWARD, FE_UPWARD};
#define SETTINGS (sizeof settings / sizeof *settings)
#endif

static struct universe all;
static struct control before, after;

#define KEEPS(call)                                                                                            \
    do {                                                                                                       \
        limno_status status_;                                                                                  \
        get_control(&before);                                                                                  \
        status_ = call;                                                                                        \
        get_control(&after);                                                                                   \
        if (memcmp(&before, &after, sizeof before) != 0) changed |= 1;                                         \
        if (status_ != LIMNO_OK && status_ != LIMNO_LEFT_OUT) refused |= 1;                                    \
    } while (0)

static void test(void)
{
    const size_t bytes = sizeof all.gas[0];
    limno_run *runs[SETTINGS];
    char name[32];
    double amount = 1e-310;
    limno_tally_batch batch = LIMNO_TALLY_BATCH_INIT;
    limno_standing standing = LIMNO_STANDING_INIT;
    batch.channel = "wind", batch.count = 1, batch.mass = &amount;
    fill_universe(&all);
    all.gas[7].mass = 1e-41f; /* less than the least normal number */
    all.gas[8].velocity[1] = 1e38f;
    for (size_t s = 0; s < SETTINGS; s++) {
        volatile int changed = 0, refused = 0;
        int32_t due;
        limno_options options = options_with(check_config);
        snprintf(name, sizeof name, "setting%zu", s);
        const char *path = series_path(name);
        fenv_t own;
        fegetenv(&own);
#if defined(__x86_64__)
        set_control(settings[s].sse, settings[s].unit);
#else
        fesetround(settings[s]);
#endif
        KEEPS(limno_open(LIMNO_VERSION, "c", path, &options, &runs[s]));
        limno_run *run = runs[s];
        for (uint64_t step = 1; step <= 3; step++) {
            /* Made before: a host that traps would stumble over its own arithmetic. */
            static const double times[] = {0, 1, 2, 3};
            limno_clock clock = LIMNO_CLOCK_INIT;
            clock.step = step, clock.time = times[step];
            KEEPS(limno_due(run, &clock, &due));
            KEEPS(limno_mark(run, &clock));
            KEEPS(limno_lend_vector(run, "gas", "position", all.gas->position, GASES, bytes, LIMNO_F64));
            KEEPS(limno_lend_vector(run, "gas", "velocity", all.gas->velocity, GASES, bytes, LIMNO_F32));
            KEEPS(limno_lend(run, "gas", "mass", &all.gas->mass, GASES, bytes, LIMNO_F32));
            KEEPS(limno_lend(run, "gas", "star_formation_rate", &all.gas->rate, GASES, bytes, LIMNO_F32));
            KEEPS(limno_lend(run, "star", "birth_mass", &all.star->birth_mass, STARS, sizeof *all.star, LIMNO_F64));
            KEEPS(limno_lend(run, "star", "birth_time", &all.star->birth_time, STARS, sizeof *all.star, LIMNO_F64));
            KEEPS(limno_sound(run, "star"));
            KEEPS(limno_tally(run, &batch));
            KEEPS(limno_enter(run));
            KEEPS(limno_how_it_stands(run, &standing));
            limno_last_error(run), limno_status_name(3), limno_version();
        }
        /* Refusals too. */
        int before_refused = refused;
        KEEPS(limno_enter(run));
        KEEPS(limno_lend(run, "gaz", "mass", NULL, 1, 1, 77));
        KEEPS(limno_mark(NULL, NULL));
        refused = before_refused;
        KEEPS(limno_close(run));
        fesetenv(&own);
        CHECK(!changed, "in setting %zu a call left other floating-point control than it found", s);
        CHECK(!refused, "in setting %zu a call was refused", s);
    }
    snprintf(name, sizeof name, "setting0");
    struct sheet *first = read_back(series_path(name), "run");
    CHECK(first->rows == 3, "found %zu rows", first->rows);
    CHECK(strncmp(cell(first, 2, "tally_wind_mass"), "1e-310", 6) == 0, "found %s", cell(first, 2, "tally_wind_mass"));
    for (size_t s = 1; s < SETTINGS; s++) {
        snprintf(name, sizeof name, "setting%zu", s);
        struct sheet *other = read_back(series_path(name), "run");
        for (uint64_t step = 1; step <= 3; step++) SAME_ROW(first, step, other, step, NULL);
    }
}
