/*
 * A host that is killed by invalid operations, divisions by zero and overflows runs on: none of ours reaches it, not even
 * from arrays full of what provokes them, on one thread of ours and on three.
 */
#define _GNU_SOURCE
#include "check.h"

#include <fenv.h>

#define N 4000

static struct gas gas[N];
static struct hole hole[N];

static float float_from(uint32_t bits)
{
    float number;
    memcpy(&number, &bits, sizeof number);
    return number;
}

static double double_from(uint64_t bits)
{
    double number;
    memcpy(&number, &bits, sizeof number);
    return number;
}

static void test(void)
{
    static const uint64_t wide[] = {0x7ff0000000000001, 0x7ff8000000000000, 0x7ff0000000000000, 0xfff0000000000000,
                                    0x7fefffffffffffff, 0xffefffffffffffff, 0x0000000000000001, 0x8000000000000000};
    static const uint32_t narrow[] = {0x7f800001, 0x7fc00000, 0x7f800000, 0xff800000, 0x7f7fffff, 0xff7fffff, 1, 0x80000000};
    for (int i = 0; i < N; i++) {
        for (int k = 0; k < 3; k++) {
            gas[i].position[k] = i % 5 == k ? double_from(wide[i % 8]) : 500.0 + i % 60;
            gas[i].velocity[k] = i % 4 == k ? float_from(narrow[i % 8]) : (float)i;
        }
        gas[i].mass = float_from(narrow[(i / 3) % 8]);
        gas[i].rate = float_from(narrow[(i / 5) % 8]);
        hole[i].mass = double_from(wide[i % 8]);
        hole[i].subgrid_mass = double_from(wide[(i / 2) % 8]);
        hole[i].rate = double_from(wide[(i / 3) % 8]);
    }
    feenableexcept(FE_INVALID | FE_DIVBYZERO | FE_OVERFLOW);
    for (int threads = 1; threads <= 3; threads += 2) {
        limno_options options = options_with(check_config);
        limno_run *run = NULL;
        options.threads = threads;
        EXPECT(NULL, limno_open(LIMNO_VERSION, "c", series_path(threads == 1 ? "one" : "three"), &options, &run), LIMNO_OK);
        for (uint64_t step = 1; step <= 3; step++) {
            EXPECT(run, mark_step(run, step), LIMNO_OK);
            lend_gas(run, gas, N);
            lend_holes(run, hole, N);
            REFUSED(run, limno_enter(run), LIMNO_LEFT_OUT, "gas position", "gas velocity", "gas mass", "black_hole subgrid_mass");
        }
        /* Clocks too. */
        limno_clock clock = clock_of(4, 4.0);
        clock.time = double_from(wide[0]);
        REFUSED(run, limno_mark(run, &clock), LIMNO_BAD_CLOCK, "finite");
        EXPECT(run, limno_enter(run), LIMNO_OK);
        EXPECT(run, limno_close(run), LIMNO_OK);
    }
    CHECK(fegetexcept() == (FE_INVALID | FE_DIVBYZERO | FE_OVERFLOW), "the traps are not as they were");
    fedisableexcept(FE_ALL_EXCEPT);
    struct sheet *one = read_back(series_path("one"), "run"), *three = read_back(series_path("three"), "run");
    CHECK(one->rows == 3, "found %zu rows", one->rows);
    for (uint64_t step = 1; step <= 3; step++) SAME_ROW(one, step, three, step, NULL);
    size_t bad = 0;
    for (int i = 0; i < N; i++) bad += (i / 3) % 8 < 4;
    CELL(one, 1, "not_finite_gas_mass", (double)bad);
}
