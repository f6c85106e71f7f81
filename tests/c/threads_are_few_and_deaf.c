/*
 * With one thread to measure the library has one of its own, which writes the series; with three it has two more, beside
 * the host's that calls. All of them block every signal, and end when the run is closed. The numbers are the same.
 */
#define _GNU_SOURCE
#include "check.h"

#include <dirent.h>
#include <signal.h>

#define N 20000

static struct gas gas[N];

/* Counts the threads of this process, and those besides the first that would take some signal. */
static int count_threads(int *hearing)
{
    DIR *tasks = opendir("/proc/self/task");
    struct dirent *task;
    int count = 0;
    *hearing = 0;
    while ((task = readdir(tasks)) != NULL) {
        if (task->d_name[0] == '.') continue;
        count++;
        char path[300];
        snprintf(path, sizeof path, "/proc/self/task/%s/status", task->d_name);
        char *status = read_file(path), *blocked = status ? strstr(status, "SigBlk:") : NULL;
        if (atoi(task->d_name) != getpid() && blocked) {
            /* All but the two that cannot be blocked (9 and 19), and those the C library keeps to itself (32, 33). */
            unsigned long long mask = strtoull(blocked + 7, NULL, 16);
            const unsigned long long all = ~(1ull << 8 | 1ull << 18 | 1ull << 31 | 1ull << 32);
            if ((mask & all) != all) *hearing += 1;
        }
        free(status);
    }
    closedir(tasks);
    return count;
}

static void check_threads(int line, int expected)
{
    int hearing = 0, count = 0;
    /* A thread that has ended may stay in the list for a moment. */
    for (int i = 0; i < 500; i++) {
        count = count_threads(&hearing);
        if (count == expected && hearing == 0) return;
        usleep(10000);
    }
    check_fail(line, "expected %d threads, found %d; %d would take a signal", expected, count, hearing);
}

static void run_with(int threads, const char *name)
{
    limno_options options = options_with(check_config);
    limno_run *run = NULL;
    sigset_t before, after;
    options.threads = threads;
    pthread_sigmask(SIG_SETMASK, NULL, &before);
    EXPECT(NULL, limno_open(LIMNO_VERSION, "c", series_path(name), &options, &run), LIMNO_OK);
    const int expected = 2 + (threads > 1 ? threads - 1 : 0);
    check_threads(__LINE__, expected);
    for (uint64_t step = 1; step <= 4; step++) {
        EXPECT(run, mark_step(run, step), LIMNO_OK);
        lend_gas(run, gas, step == 4 ? 700 : N);
        EXPECT(run, limno_enter(run), LIMNO_OK);
        check_threads(__LINE__, expected);
    }
    EXPECT(run, limno_close(run), LIMNO_OK);
    check_threads(__LINE__, 1);
    pthread_sigmask(SIG_SETMASK, NULL, &after);
    CHECK(memcmp(&before, &after, sizeof before) == 0, "the host's own signal mask has changed");
}

static void test(void)
{
    for (int i = 0; i < N; i++) {
        for (int k = 0; k < 3; k++) {
            gas[i].position[k] = 500 + (i % 70) * sin(i + 2.0 * k);
            gas[i].velocity[k] = (float)cos(0.1 * i + k);
        }
        gas[i].mass = 1.0f / (float)(1 + i % 97), gas[i].rate = 1.0f / (float)(1 + i % 89);
    }
    run_with(1, "one");
    run_with(3, "three");
    run_with(0, "default");
    struct sheet *one = read_back(series_path("one"), "run"), *three = read_back(series_path("three"), "run");
    struct sheet *shells = read_back(series_path("one"), "wind_shells"), *other = read_back(series_path("three"), "wind_shells");
    for (uint64_t step = 1; step <= 4; step++) {
        SAME_ROW(one, step, three, step, NULL);
        SAME_ROW(shells, step, other, step, NULL);
    }
}
