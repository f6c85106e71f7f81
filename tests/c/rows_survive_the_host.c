/*
 * A host that is killed without warning leaves every row that limno_how_it_stands called written, and the row of every
 * checkpoint whose limno_enter returned; a reader sees rows while the host runs.
 */
#define _GNU_SOURCE
#include "check.h"

#include <signal.h>
#include <sys/wait.h>

static struct universe all;

static void test(void)
{
    int pipes[2];
    fill_universe(&all);
    if (pipe(pipes)) check_fail(__LINE__, "pipe: %s", strerror(errno));
    pid_t host = fork();
    if (host == 0) {
        limno_standing standing = LIMNO_STANDING_INIT;
        limno_run *run = open_alone(check_config, "killed");
        for (uint64_t step = 1; step <= 50; step++) {
            limno_clock clock = clock_of(step, (double)step);
            clock.checkpoint = step == 50;
            if (limno_mark(run, &clock) != LIMNO_OK) _exit(3);
            lend_universe(run, &all);
            if (limno_enter(run) != LIMNO_OK) _exit(4);
        }
        limno_how_it_stands(run, &standing);
        if (standing.rows_written != 50) _exit(5);
        if (write(pipes[1], "x", 1) != 1) _exit(6);
        for (;;) pause();
    }
    close(pipes[1]);
    char ready = 0;
    if (read(pipes[0], &ready, 1) != 1) ready = 0;
    CHECK(ready == 'x', "the host did not come to its checkpoint");
    struct sheet *alive = read_back(series_path("killed"), "run");
    CHECK(alive->rows == 50, "a reader sees %zu rows while the host runs", alive->rows);
    kill(host, SIGKILL);
    int status = 0;
    waitpid(host, &status, 0);
    CHECK(WIFSIGNALED(status), "the host ended by itself, status %x", (unsigned)status);
    struct sheet *dead = read_back(series_path("killed"), "run");
    CHECK(dead->rows == 50, "found %zu rows", dead->rows);
    CELL(dead, 50, "checkpoint", 1);
    CELL(dead, 50, "black_holes", HOLES);

    /* The next leg goes on from there. */
    limno_run *run = open_alone(check_config, "killed");
    GOOD_STEP(run, 51, &all);
    EXPECT(run, limno_close(run), LIMNO_OK);
    struct sheet *both = read_back(series_path("killed"), "run");
    CHECK(both->rows == 51, "found %zu rows", both->rows);
    CELL(both, 51, "baryon_mass_drift", 0);
    CELL(both, 51, "stars_formed", 0);
}
