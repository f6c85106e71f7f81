/*
 * With a cadence, a rank whose clock is refused on some step, measured or not, or that enters once too often, stays in
 * step with the others: nobody waits, and the rows that follow are right.
 *
 * ranks: 2 3
 * seconds: 120
 */
#define _GNU_SOURCE
#include <limnograph_mpi.h>

#include "check.h"

#define STEPS 120

static struct universe all;

/* What the culprit does wrong; every 7th step it is another. */
static limno_status err(limno_run *run, uint64_t step, int kind)
{
    limno_clock clock = clock_of(step, 0.5 * (double)step);
    switch (kind) {
    case 0: clock.time = NAN; break;
    case 1: return limno_mark(run, NULL);
    case 2: clock.checkpoint = 9; break;
    case 3: clock.step = 1; break;
    case 4: clock.time = -5; break;
    default: limno_enter(run); /* without a mark, before the true one */
    }
    return limno_mark(run, &clock);
}

static void go(const char *name, const char *cadence, int culprit)
{
    char config[2000];
    snprintf(config, sizeof config, "%s%s%s", CHECK_BASE, cadence, CHECK_GAUGES);
    limno_run *run = open_over(MPI_COMM_WORLD, config, name);
    for (uint64_t step = 1; step <= STEPS; step++) {
        limno_clock clock = clock_of(step, 0.5 * (double)step);
        int wrong = check_rank == culprit && step % 7 == 0;
        clock.checkpoint = step % 50 == 0;
        limno_status status = wrong ? err(run, step, (int)(step / 7 % 6)) : limno_mark(run, &clock);
        CHECK(wrong || status == LIMNO_OK, "step %llu: %s: %s", (unsigned long long)step, limno_status_name(status), limno_last_error(run));
        if (status == LIMNO_OK) lend_share(run, &all, check_rank, check_ranks);
        status = limno_enter(run);
        CHECK(check_rank == culprit || status == LIMNO_OK, "step %llu: %s: %s", (unsigned long long)step, limno_status_name(status),
              limno_last_error(run));
        CHECK(status != LIMNO_ASLEEP, "step %llu: %s", (unsigned long long)step, limno_last_error(run));
        MPI_Barrier(MPI_COMM_WORLD);
    }
    EXPECT(run, limno_close(run), LIMNO_OK);
}

static void test(void)
{
    static const char *const cadences[] = {"[cadence]\nevery_steps = 5\n", "[cadence]\nevery_time = 3.25\n",
                                           "[cadence]\nevery_steps = 11\nevery_time = 4\n", "[cadence]\nevery_steps = 1\n", ""};
    fill_universe(&all);
    for (int c = 0; c < 5; c++) {
        for (int culprit = 0; culprit < 2; culprit++) {
            char name[32], reference[32];
            snprintf(name, sizeof name, "c%d_%d", c, culprit);
            snprintf(reference, sizeof reference, "r%d", c);
            go(name, cadences[c], culprit);
            if (culprit == 0) go(reference, cadences[c], -1);
            if (check_rank != 0) continue;
            struct sheet *found = read_back(series_path(name), "run"), *expected = read_back(series_path(reference), "run");
            CHECK(found->rows == expected->rows, "%s: %zu rows, expected %zu", name, found->rows, expected->rows);
            for (uint64_t step = 1; step <= STEPS; step++) {
                const char *there = cell(expected, step, "step"), *here = cell(found, step, "step");
                CHECK(!there == !here, "%s: step %llu is measured or not", name, (unsigned long long)step);
                if (!there || !here) continue;
                for (size_t i = 0; i < found->columns; i++) {
                    const char *column = found->cell[i];
                    if (is_about_the_machine(column) || strcmp(column, "ranks_in_error") == 0) continue;
                    const char *is = cell(found, step, column), *should = cell(expected, step, column);
                    CHECK(!*is || strcmp(is, should) == 0, "%s: %s of step %llu: expected %s, found %s", name, column,
                          (unsigned long long)step, should, is);
                }
                /* Away from an error nothing may be missing. */
                if (step % 7 >= 3 && c >= 3) CHECK(*cell(found, step, "mass_gas"), "%s: step %llu is not measured in full", name, (unsigned long long)step);
                if (strcmp(cell(found, step, "ranks_in_error"), "0") == 0)
                    CHECK(*cell(found, step, "mass_gas"), "%s: step %llu is not measured in full", name, (unsigned long long)step);
            }
        }
    }
}
