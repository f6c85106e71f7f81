/*
 * Ranks make mistakes at random, several at once, in steps that are measured or not and at checkpoints. No rank waits for
 * long, none is put to sleep, no number is ever wrong, every tally is counted once, and what follows is right. One rank,
 * a different one in every run, also gives clocks that cannot be read at all, or enters when it should not. The seed is
 * fixed.
 *
 * ranks: 2 3 4
 * seconds: 200
 */
#define _GNU_SOURCE
#include <limnograph_mpi.h>

#include "check.h"

#define STEPS 400
#define LAST_ERROR 110 /* a rank in doubt may miss one row for each of its errors, and then none */

static struct universe all;
static uint64_t state;

static size_t below(size_t limit)
{
    state ^= state << 13, state ^= state >> 7, state ^= state << 17;
    return (size_t)((state * 2685821657736338717u >> 20) % limit);
}

static double tallied;

/* Mistakes that leave the step number readable, and those after which this rank cannot tell where the others are. */
enum mistake {
    NULL_LENT, OTHER_COUNT, NULL_THEN_RIGHT, MARK_TWICE, TIME_NAN, TIME_BACK, FLAG, READABLE,
    CLOCK_NULL = READABLE, STEP_BACK, SIZE, ENTER_FIRST, NO_MARK, ENTER_AND_NAN, MISTAKES
};

static void go(const char *name, const char *cadence, size_t seldom, int culprit)
{
    char config[2000];
    double longest = 0;
    snprintf(config, sizeof config, "%s%s%s", CHECK_BASE, cadence, CHECK_GAUGES);
    limno_run *run = open_over(MPI_COMM_WORLD, config, name);
    tallied = 0;
    for (uint64_t step = 1; step <= STEPS; step++) {
        const int errs = seldom && below(seldom) == 0 && step <= LAST_ERROR;
        const int is_timed = strstr(cadence, "every_time") || strstr(cadence, "synchronised");
        /* Whether a step is measured follows from its time there: a wrong time leaves a rank in doubt too. */
        const size_t kinds = check_rank == culprit ? MISTAKES : is_timed ? TIME_NAN : READABLE;
        const enum mistake kind = errs ? (enum mistake)below(kinds) : MISTAKES;
        limno_clock clock = clock_of(step, 0.5 * (double)step);
        limno_status status = LIMNO_BAD_ARGUMENT;
        double mass = (double)(1 + below(100)), begin;
        limno_tally_batch batch = LIMNO_TALLY_BATCH_INIT;
        batch.channel = "wind", batch.count = 1, batch.mass = &mass;
        if (limno_tally(run, &batch) == LIMNO_OK) tallied += mass;
        clock.checkpoint = step % 50 == 0 || step == STEPS;
        begin = MPI_Wtime();
        switch (kind) {
        case NULL_THEN_RIGHT: limno_mark(run, NULL); break;
        case TIME_NAN: clock.time = NAN; break;
        case TIME_BACK: clock.time = step > 20 ? -1 : NAN; break; /* at first there is nothing to go back from */
        case FLAG: clock.synchronised = -3; break;
        case STEP_BACK: clock.step = step > 20 ? step / 2 : UINT64_MAX; break;
        case SIZE: clock.size = 5; break;
        case ENTER_FIRST: limno_enter(run); break;
        case ENTER_AND_NAN: limno_enter(run), limno_enter(run), clock.time = NAN; break;
        default: break;
        }
        if (kind != NO_MARK) status = limno_mark(run, kind == CLOCK_NULL ? NULL : &clock);
        if (kind == MARK_TWICE) limno_mark(run, &clock);
        if (status == LIMNO_OK) {
            lend_share(run, &all, check_rank, check_ranks);
            if (kind == NULL_LENT) {
                limno_lend(run, "wind", "mass", NULL, 7, 8, LIMNO_F64);
            } else if (kind == OTHER_COUNT) {
                limno_lend(run, "gas", "mass", &all.gas[0].mass, 1, 8, LIMNO_F32);
            }
        }
        status = limno_enter(run);
        CHECK(status != LIMNO_ASLEEP && status != LIMNO_INTERNAL, "%s, step %llu: %s", name, (unsigned long long)step, limno_last_error(run));
        if (MPI_Wtime() - begin > longest) longest = MPI_Wtime() - begin;
        MPI_Barrier(MPI_COMM_WORLD);
    }
    /* Waiting for a rank that does not come would take longer. */
    CHECK(longest < 15, "%s: a step took %g s", name, longest);
    EXPECT(run, limno_close(run), LIMNO_OK);
    double sum = 0;
    MPI_Allreduce(&tallied, &sum, 1, MPI_DOUBLE, MPI_SUM, MPI_COMM_WORLD);
    tallied = sum;
}

static void test(void)
{
    static const char *const cadences[] = {"", "[cadence]\nevery_steps = 4\n", "[cadence]\nevery_time = 1.75\n",
                                           "[cadence]\nsynchronised_only = true\n"};
    state = 88172645463325252u + 1000003u * (unsigned)check_rank;
    fill_universe(&all);
    for (int c = 0; c < 4; c++) {
        for (int seldom = 3; seldom <= 20; seldom += 17) {
            char name[32], reference[32];
            snprintf(name, sizeof name, "c%d_%d", c, seldom);
            snprintf(reference, sizeof reference, "r%d", c);
            if (seldom == 3) go(reference, cadences[c], 0, 0);
            go(name, cadences[c], (size_t)seldom, (c + (seldom == 3)) % check_ranks);
            if (check_rank != 0) continue;
            struct sheet *found = read_back(series_path(name), "run"), *expected = read_back(series_path(reference), "run");
            double sum = 0;
            size_t whole = 0;
            for (size_t r = 1; r <= found->rows; r++) {
                uint64_t step = strtoull(found->cell[r * found->columns + (size_t)column_of(found, "step")], NULL, 10);
                /* A step whose row all ranks missed may be made up for by the next; on its own grid it is there. */
                const char *in_error = cell(found, step, "ranks_in_error");
                sum += strtod(cell(found, step, "tally_wind_mass"), NULL);
                whole += *cell(found, step, "mass_gas") != 0;
                if (strcmp(in_error, "0") == 0) CHECK(*cell(found, step, "mass_gas"), "%s: step %llu is not whole", name, (unsigned long long)step);
                if (!cell(expected, step, "step")) continue;
                for (size_t i = 0; i < found->columns; i++) {
                    const char *column = found->cell[i];
                    if (is_about_the_machine(column) || strcmp(column, "ranks_in_error") == 0 || strstr(column, "tally_")) continue;
                    if (strcmp(column, "steps") == 0 || strcmp(column, "checkpoint") == 0 || strcmp(column, "step_length") == 0) continue;
                    /* Increments reach back to the last row, which may be another here. */
                    if (strstr(column, "formed") || strstr(column, "from_stars")) continue;
                    const char *is = cell(found, step, column), *should = cell(expected, step, column);
                    CHECK(!*is || strcmp(is, should) == 0, "%s: %s of step %llu: expected %s, found %s", name, column,
                          (unsigned long long)step, should, is);
                }
            }
            CHECK(sum == tallied, "%s: tallied %g, in the rows %g", name, tallied, sum);
            CHECK(whole * 2 > found->rows, "%s: only %zu of %zu rows are whole", name, whole, found->rows);
            CHECK(cell(found, STEPS, "step") && *cell(found, STEPS, "mass_gas"), "%s: the last step is not whole", name);
        }
    }
}
