/*
 * A host built with -Ofast, whose every thread flushes tiny numbers to zero, gets the same rows to the bit as it would
 * without, also from tiny numbers that it does not see itself; on one thread of ours and on three.
 *
 * flags: -Ofast
 * variants: clang
 */
#define _GNU_SOURCE
#include "check.h"

#define N 5000

static double mass[N], rate[N];

static uint64_t bits_of(const char *text)
{
    double number = strtod(text, NULL);
    uint64_t bits;
    memcpy(&bits, &number, sizeof bits);
    return bits;
}

static void run_steps(const char *name, int threads)
{
    limno_options options = options_with(check_config);
    limno_run *run = NULL;
    options.threads = threads;
    EXPECT(NULL, limno_open(LIMNO_VERSION, "c", series_path(name), &options, &run), LIMNO_OK);
    for (uint64_t step = 1; step <= 3; step++) {
        EXPECT(run, mark_step(run, step), LIMNO_OK);
        EXPECT(run, limno_lend(run, "gas", "mass", mass, N, 8, LIMNO_F64), LIMNO_OK);
        EXPECT(run, limno_lend(run, "gas", "star_formation_rate", rate, N, 8, LIMNO_F64), LIMNO_OK);
        EXPECT(run, limno_enter(run), LIMNO_OK);
    }
    EXPECT(run, limno_close(run), LIMNO_OK);
}

static void test(void)
{
#if defined(__x86_64__)
    unsigned control = __builtin_ia32_stmxcsr();
    if ((control & 0x8040) != 0x8040) {
        /* Not every compiler sets it up; the host may do so itself. */
        control |= 0x8040;
        __builtin_ia32_ldmxcsr(control);
    }
#endif
    uint64_t state = 1;
    for (int i = 0; i < N; i++) {
        state = state * 6364136223846793005u + 1442695040888963407u;
        uint64_t tiny = 1 + (state >> 13) % 1000000; /* a multiple of the least number there is */
        memcpy(&mass[i], &tiny, sizeof tiny);
        tiny = i % 7 ? 3 : (uint64_t)0x3fb999999999999a; /* 0.1 among them */
        memcpy(&rate[i], &tiny, sizeof tiny);
    }
    run_steps("flushing", 1);
    run_steps("flushing3", 3);
#if defined(__x86_64__)
    __builtin_ia32_ldmxcsr(0x1f80);
#endif
    run_steps("plain", 1);

    struct sheet *plain = read_back(series_path("plain"), "run"), *flushing = read_back(series_path("flushing"), "run"),
                 *three = read_back(series_path("flushing3"), "run");
    uint64_t expected = 0;
    for (int i = 0; i < N; i++) {
        uint64_t tiny;
        memcpy(&tiny, &mass[i], sizeof tiny);
        expected += tiny;
    }
    for (uint64_t step = 1; step <= 3; step++) {
        CHECK(bits_of(cell(plain, step, "mass_gas")) == expected, "expected %llu times the least number, found %s",
              (unsigned long long)expected, cell(plain, step, "mass_gas"));
        SAME_ROW(plain, step, flushing, step, NULL);
        SAME_ROW(plain, step, three, step, NULL);
    }
}
