/*
 * A host that is interrupted by its own timer all the time, without restarting system calls, gets every row; its handler
 * runs only on its own thread, and with the host's own floating-point control outside our calls.
 */
#define _GNU_SOURCE
#include "check.h"

#include <signal.h>
#include <sys/syscall.h>
#include <sys/time.h>

static volatile sig_atomic_t caught, elsewhere;

static void handle(int signal)
{
    (void)signal;
    caught++;
    if (syscall(SYS_gettid) != getpid()) elsewhere++;
}

static void test(void)
{
    static struct universe all;
    struct sigaction action, found;
    struct itimerval storm = {{0, 300}, {0, 300}}, calm = {{0, 0}, {0, 0}};
    char config[640];
    memset(&action, 0, sizeof action);
    action.sa_handler = handle; /* no SA_RESTART */
    sigaction(SIGALRM, &action, NULL);
    fill_universe(&all);
    snprintf(config, sizeof config, "%s/limnograph.toml", check_folder);
    FILE *file = fopen(config, "w");
    fputs(check_config, file), fclose(file);

    setitimer(ITIMER_REAL, &storm, NULL);
    for (int round = 0; round < 5; round++) {
        limno_run *run = NULL;
        char name[32];
        snprintf(name, sizeof name, "storm%d", round);
        EXPECT(NULL, limno_open(LIMNO_VERSION, config, series_path(name), NULL, &run), LIMNO_OK);
        for (uint64_t step = 1; step <= 40; step++) {
            limno_clock clock = clock_of(step, (double)step);
            clock.checkpoint = step % 10 == 0;
            EXPECT(run, limno_mark(run, &clock), LIMNO_OK);
            lend_universe(run, &all);
            EXPECT(run, limno_enter(run), LIMNO_OK);
        }
        EXPECT(run, limno_close(run), LIMNO_OK);
    }
    setitimer(ITIMER_REAL, &calm, NULL);
    sigaction(SIGALRM, NULL, &found);
    CHECK(found.sa_handler == handle, "the handler is another");
    CHECK(caught > 50, "no storm: %d signals", (int)caught);
    CHECK(elsewhere == 0, "%d signals were taken by a thread of ours", (int)elsewhere);
    for (int signal = 1; signal < 32; signal++) {
        if (signal == SIGALRM || signal == SIGKILL || signal == SIGSTOP) continue;
        sigaction(signal, NULL, &found);
        CHECK(found.sa_handler == SIG_DFL, "signal %d has another handler than before", signal);
    }
    for (int round = 0; round < 5; round++) {
        char name[32];
        snprintf(name, sizeof name, "storm%d", round);
        struct sheet *sheet = read_back(series_path(name), "run");
        CHECK(sheet->rows == 40, "found %zu rows", sheet->rows);
        SAME_ROW(sheet, 2, sheet, 2, NULL);
        CELL(sheet, 40, "checkpoint", 1);
        CELL(sheet, 40, "baryon_mass_drift", 0);
    }
}
