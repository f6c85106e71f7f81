/*
 * However early or late a rank sees a reduction complete, every call answers with the same status at the same step on
 * all ranks: the second measured step after the one at which they contradicted each other, or a flush.
 *
 * ranks: 2 3 4
 * seconds: 120
 */
#define _GNU_SOURCE
#include <limnograph_mpi.h>

#include "check.h"

enum { STEPS = 12, CALLS = 3 };

/* `late`: the rank that comes late to every step; the one after it dawdles within the step, so that it finds more
 * reductions complete than others when it enters. */
static void contradict(int number, uint64_t at, int late, int flushes)
{
    char name[32];
    int found[STEPS + 1][CALLS], least[STEPS + 1][CALLS], most[STEPS + 1][CALLS];
    snprintf(name, sizeof name, "run%d", number);
    limno_run *run = open_over(MPI_COMM_WORLD, check_config, name);
    memset(found, 0, sizeof found);
    for (uint64_t step = 1; step <= STEPS; step++) {
        double one = (double)step;
        limno_clock clock = clock_of(step, step == at && check_rank == check_ranks - 1 ? step + 0.25 : (double)step);
        if (check_rank == late) usleep(20000);
        found[step][0] = limno_mark(run, &clock);
        if (check_rank == (late + 1) % check_ranks) usleep(15000);
        found[step][1] = limno_lend(run, "gas", "mass", &one, 1, 8, LIMNO_F64);
        found[step][2] = limno_enter(run);
        if (flushes && step == at) {
            int status = limno_flush(run);
            CHECK(status == LIMNO_ASLEEP, "a flush after the contradiction: %s", limno_status_name(status));
        }
    }
    MPI_Allreduce(found, least, (STEPS + 1) * CALLS, MPI_INT, MPI_MIN, MPI_COMM_WORLD);
    MPI_Allreduce(found, most, (STEPS + 1) * CALLS, MPI_INT, MPI_MAX, MPI_COMM_WORLD);
    for (uint64_t step = 1; step <= STEPS; step++)
        for (int call = 0; call < CALLS; call++) {
            /* Told by the very call that gives the second part after the contradiction. */
            int asleep = flushes ? step > at : step > at + 2 || (step == at + 2 && call == 2);
            int expected = asleep ? LIMNO_ASLEEP : LIMNO_OK;
            CHECK(least[step][call] == expected && most[step][call] == expected,
                  "run %d, step %llu, call %d: from %s to %s", number, (unsigned long long)step, call,
                  limno_status_name(least[step][call]), limno_status_name(most[step][call]));
        }
    REFUSED(NULL, limno_close(run), LIMNO_ASLEEP, "disagree on the time");
    MPI_Barrier(MPI_COMM_WORLD);
    if (check_rank == 0) {
        struct sheet *sheet = read_back(series_path(name), "run");
        CHECK(sheet->rows == at - 1, "run %d: %zu rows", number, sheet->rows);
        /* Ranks that are not equally fast wait, and the row says so. */
        CHECK(column_of(sheet, "wait_seconds") >= 0, "there is no column for waiting");
    }
}

static void test(void)
{
    for (int late = 0; late < check_ranks; late++)
        for (int flushes = 0; flushes < 2; flushes++) contradict(2 * late + flushes, 5, late, flushes);

    /* With rank 1 late at every step the wait of the others is in the row of the step after. */
    limno_run *run = open_over(MPI_COMM_WORLD, check_config, "waiting");
    for (uint64_t step = 1; step <= 8; step++) {
        if (check_rank == 1) usleep(50000);
        EXPECT(run, mark_step(run, step), LIMNO_OK);
        EXPECT(run, limno_enter(run), LIMNO_OK);
    }
    EXPECT(run, limno_close(run), LIMNO_OK);
    MPI_Barrier(MPI_COMM_WORLD);
    if (check_rank == 0) {
        struct sheet *sheet = read_back(series_path("waiting"), "run");
        double most = 0;
        for (uint64_t step = 1; step <= 8; step++) {
            const char *waited = cell(sheet, step, "wait_seconds"), *library = cell(sheet, step, "library_seconds");
            double seconds = waited ? strtod(waited, NULL) : -1;
            CHECK(seconds >= 0 && library && seconds <= strtod(library, NULL), "step %llu: waited '%s' of '%s'",
                  (unsigned long long)step, waited ? waited : "no row", library ? library : "no row");
            if (step <= 3) CHECK(seconds == 0, "step %llu: waited %g s", (unsigned long long)step, seconds);
            if (seconds > most) most = seconds;
        }
        CHECK(most > 0.005, "waited %g s at most", most);
    }
}
