/*
 * A rank that never marks a step but enters each of them, and one that enters a few times too often just before the run
 * is closed, hold nobody up: the others get their rows with nulls for what is incomplete.
 *
 * ranks: 2 3
 */
#define _GNU_SOURCE
#include <limnograph_mpi.h>

#include "check.h"

static struct universe all;

static void go(const char *name, const char *cadence, int culprit, uint64_t steps, size_t rows, double each)
{
    char config[2000];
    snprintf(config, sizeof config, "%s%s%s", CHECK_BASE, cadence, CHECK_GAUGES);
    limno_run *run = open_over(MPI_COMM_WORLD, config, name);
    double begin;
    for (uint64_t step = 1; step <= steps; step++) {
        if (check_rank == culprit)
            REFUSED(run, limno_enter(run), LIMNO_BAD_ORDER, "limno_mark");
        else
            GOOD_SHARED_STEP(run, step, &all);
        MPI_Barrier(MPI_COMM_WORLD);
    }
    for (int i = 0; i < 5; i++)
        if (check_rank == culprit) REFUSED(run, limno_enter(run), LIMNO_BAD_ORDER, "limno_mark");
    begin = MPI_Wtime();
    EXPECT(run, limno_close(run), LIMNO_OK);
    /* Far more than closing takes, and less than waiting in vain would. */
    CHECK(MPI_Wtime() - begin < 20, "closing took %g s", MPI_Wtime() - begin);
    if (check_rank == 0) {
        struct sheet *sheet = read_back(series_path(name), "run");
        CHECK(sheet->rows == rows, "found %zu rows", sheet->rows);
        NULL_CELL(sheet, steps, "mass_gas");
        CELL(sheet, steps, "ranks_in_error", 1);
        CELL(sheet, steps, "time", (double)steps);
        CELL(sheet, steps, "step_length", 1);
        CELL(sheet, steps, "steps", each);
        CHECK(has_event(series_path(name), "limno_mark"), "the series does not say what is wrong");
    }
}

static void test(void)
{
    fill_universe(&all);
    go("last", "", check_ranks - 1, 40, 40, 1);
    go("first", "", 0, 40, 40, 1);
    go("cadence", "[cadence]\nevery_steps = 8\n", check_ranks - 1, 40, 6, 8);
    go("cadence_first", "[cadence]\nevery_steps = 8\n", 0, 40, 6, 8);
    go("far", "[cadence]\nevery_steps = 100\n", check_ranks - 1, 300, 4, 100);
}
