/*
 * What the library takes of the heap stays under 16 MiB and 2 MiB for each thread, however many elements are lent, also
 * while the disk refuses rows.
 *
 * seconds: 180
 */
#define _GNU_SOURCE
#include "check.h"
#include "heap.h"

#include <sys/resource.h>

enum { MANY = 4000000 };
static float *vectors, *numbers;

static void step_once(limno_run *run, uint64_t step, size_t count)
{
    EXPECT(run, mark_step(run, step), LIMNO_OK);
    EXPECT(run, limno_lend_vector(run, "gas", "position", vectors, count, 12, LIMNO_F32), LIMNO_OK);
    EXPECT(run, limno_lend_vector(run, "gas", "velocity", vectors, count, 12, LIMNO_F32), LIMNO_OK);
    EXPECT(run, limno_lend(run, "gas", "mass", numbers, count, 4, LIMNO_F32), LIMNO_OK);
    EXPECT(run, limno_lend(run, "gas", "star_formation_rate", numbers, count, 4, LIMNO_F32), LIMNO_OK);
    EXPECT(run, limno_lend(run, "black_hole", "mass", numbers, count, 4, LIMNO_F32), LIMNO_OK);
    EXPECT(run, limno_lend(run, "black_hole", "accretion_rate", numbers, count, 4, LIMNO_F32), LIMNO_OK);
    limno_status status = limno_enter(run);
    CHECK(status == LIMNO_OK || status == LIMNO_DISK, "%s", limno_last_error(run));
}

static limno_run *open_with(int threads, const char *name)
{
    limno_options options = options_with(check_config);
    limno_run *run = NULL;
    options.threads = threads;
    EXPECT(NULL, limno_open(LIMNO_VERSION, "check.toml", series_path(name), &options, &run), LIMNO_OK);
    return run;
}

static void check_peak(long before, int threads, const char *what)
{
    long most = (16L << 20) + threads * (2L << 20), peak = heap_peak - before;
    CHECK(peak < most, "%s on %d threads: %ld bytes, at most %ld", what, threads, peak, most);
    CHECK(peak > 10000, "%s: nothing was counted", what);
}

static void test(void)
{
    struct rlimit high, low;
    vectors = room_for(12 * (size_t)MANY), numbers = room_for(4 * (size_t)MANY);
    for (size_t i = 0; i < 3 * (size_t)MANY; i++) vectors[i] = (float)(i % 997);
    for (size_t i = 0; i < (size_t)MANY; i++) numbers[i] = 1.0f + (float)(i % 13);
    for (int threads = 1; threads <= 3; threads++) {
        char name[32];
        for (size_t count = 100000; count <= MANY; count *= 40) {
            long before = heap_peak = heap_bytes;
            snprintf(name, sizeof name, "of%d_%zu", threads, count);
            limno_run *run = open_with(threads, name);
            for (uint64_t step = 1; step <= 3; step++) step_once(run, step, count);
            EXPECT(run, limno_close(run), LIMNO_OK);
            check_peak(before, threads, name);
        }
    }
    /* So many rows that the library leaves some out rather than keep them. */
    long before = heap_peak = heap_bytes;
    limno_run *run = open_with(1, "refused");
    limno_standing standing = LIMNO_STANDING_INIT;
    step_once(run, 1, 100);
    getrlimit(RLIMIT_FSIZE, &high);
    low = high, low.rlim_cur = 40000;
    setrlimit(RLIMIT_FSIZE, &low);
    for (uint64_t step = 2; step <= 10000; step++) {
        EXPECT(run, mark_step(run, step), LIMNO_OK);
        limno_status status = limno_enter(run);
        CHECK(status == LIMNO_OK || status == LIMNO_DISK, "%s", limno_last_error(run));
    }
    EXPECT(run, limno_how_it_stands(run, &standing), LIMNO_OK);
    CHECK(standing.rows == 10000 && standing.rows_lost > 0 && standing.rows_written < 1000, "%llu rows, %llu lost, %llu written",
          (unsigned long long)standing.rows, (unsigned long long)standing.rows_lost,
          (unsigned long long)standing.rows_written);
    setrlimit(RLIMIT_FSIZE, &high);
    EXPECT(run, limno_close(run), LIMNO_OK);
    check_peak(before, 1, "a disk that refuses");
}
