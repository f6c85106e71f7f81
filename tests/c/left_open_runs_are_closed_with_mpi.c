/*
 * Runs that a host leaves open are closed as MPI is finalised, in the order in which they were opened, also where some
 * ranks have more of them than others; every row is in the series; afterwards every call answers.
 *
 * ranks: 1 2 3
 */
#define _GNU_SOURCE
#include <limnograph_mpi.h>
#define CHECK_OWN_MAIN
#include "check.h"

static void test(void) {}

int main(int argc, char **argv)
{
    static struct universe all;
    limno_run *first, *second, *alone;
    int all_failures;
    check_begins(argc, argv);
    MPI_Init(&argc, &argv);
    MPI_Comm_rank(MPI_COMM_WORLD, &check_rank);
    MPI_Comm_size(MPI_COMM_WORLD, &check_ranks);
    check_silence_begins();
    test();
    fill_universe(&all);
    /* On rank 0 the place of this run is free again when the second is opened. */
    limno_run *brief = check_rank == 0 ? open_alone(check_config, "brief") : NULL;
    limno_options options = options_with(check_config);
    EXPECT(NULL, limno_open_mpi(LIMNO_VERSION, "c", series_path("first"), &options, MPI_COMM_WORLD, &first), LIMNO_OK);
    if (check_rank == 0) EXPECT(NULL, limno_close(brief), LIMNO_OK);
    EXPECT(NULL, limno_open_mpi(LIMNO_VERSION, "c", series_path("second"), &options, MPI_COMM_WORLD, &second), LIMNO_OK);
    char name[32];
    snprintf(name, sizeof name, "alone%d", check_rank);
    alone = open_alone(check_config, name);
    for (uint64_t step = 1; step <= 7; step++) {
        limno_run *runs[2] = {first, second};
        for (int i = 0; i < 2; i++) {
            EXPECT(runs[i], mark_step(runs[i], step), LIMNO_OK);
            lend_share(runs[i], &all, check_rank, check_ranks);
            EXPECT(runs[i], limno_enter(runs[i]), LIMNO_OK);
        }
        GOOD_STEP(alone, step, &all);
    }
    struct timespec begin, end;
    MPI_Allreduce(&check_failures, &all_failures, 1, MPI_INT, MPI_SUM, MPI_COMM_WORLD);
    clock_gettime(CLOCK_MONOTONIC, &begin);
    MPI_Finalize();
    clock_gettime(CLOCK_MONOTONIC, &end);
    /* Waiting for each other in vain would take longer. */
    CHECK(end.tv_sec - begin.tv_sec < 20, "MPI_Finalize took %ld s", (long)(end.tv_sec - begin.tv_sec));
    limno_standing standing = LIMNO_STANDING_INIT;
    limno_run *runs[3] = {first, second, alone};
    for (int i = 0; i < 3; i++) {
        REFUSED(NULL, mark_step(runs[i], 8), LIMNO_CLOSED, "closed");
        REFUSED(NULL, limno_enter(runs[i]), LIMNO_CLOSED, "closed");
        REFUSED(NULL, limno_how_it_stands(runs[i], &standing), LIMNO_CLOSED, "closed");
        REFUSED(NULL, limno_close(runs[i]), LIMNO_CLOSED, "closed");
    }
    limno_run *late = (limno_run *)8;
    REFUSED(NULL, limno_open_mpi(LIMNO_VERSION, "c", series_path("late"), &options, MPI_COMM_WORLD, &late), LIMNO_BAD_MPI, "finalised");
    CHECK(late == NULL, "a handle after a failure");
    /* Alone a run needs no MPI. */
    snprintf(name, sizeof name, "after%d", check_rank);
    late = open_alone(check_config, name);
    GOOD_STEP(late, 1, &all);
    EXPECT(late, limno_close(late), LIMNO_OK);
    if (check_rank == 0) {
        const char *const names[] = {"first", "second", "alone0"};
        for (int i = 0; i < 3; i++) {
            struct sheet *sheet = read_back(series_path(names[i]), "run");
            CHECK(sheet->rows == 7, "%s: found %zu rows", names[i], sheet->rows);
            CELL(sheet, 7, "black_holes", HOLES);
            SAME_ROW(sheet, 7, read_back(series_path("first"), "run"), 7, NULL);
        }
    }
    check_silence_ends();
    return all_failures + check_failures ? 1 : 0;
}
