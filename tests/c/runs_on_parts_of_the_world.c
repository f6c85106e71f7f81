/*
 * Runs on communicators of some of the ranks, several at once and one over all, do not disturb each other, nor the host's
 * own messages and error handler.
 *
 * ranks: 2 3 4
 */
#define _GNU_SOURCE
#include <limnograph_mpi.h>

#include "check.h"

static struct universe all, room[3];
static int handled;

static void on_error(MPI_Comm *communicator, int *code, ...)
{
    (void)communicator, (void)code;
    handled++;
}

static void test(void)
{
    MPI_Comm half, reversed;
    MPI_Errhandler own, found;
    int rank, size, message = 0, got = 0;
    MPI_Request requests[2];
    char name[32];
    fill_universe(&all);
    MPI_Comm_create_errhandler(on_error, &own);
    MPI_Comm_set_errhandler(MPI_COMM_WORLD, own);
    MPI_Comm_split(MPI_COMM_WORLD, check_rank % 2, check_rank, &half);
    MPI_Comm_split(MPI_COMM_WORLD, 0, -check_rank, &reversed);
    MPI_Comm_rank(half, &rank);
    MPI_Comm_size(half, &size);
    snprintf(name, sizeof name, "half%d", check_rank % 2);
    limno_run *part = open_over(half, check_config, name);
    limno_run *world = open_over(MPI_COMM_WORLD, check_config, "world");
    limno_run *turned = open_over(reversed, check_config, "turned");
    limno_run *self = open_over(MPI_COMM_SELF, check_config, check_rank == 0 ? "self0" : check_rank == 1 ? "self1" : check_rank == 2 ? "self2" : "self3");
    /* A message of the host's, under way all the time. */
    MPI_Irecv(&got, 1, MPI_INT, MPI_ANY_SOURCE, MPI_ANY_TAG, MPI_COMM_WORLD, &requests[0]);
    for (uint64_t step = 1; step <= 6; step++) {
        EXPECT(part, mark_step(part, step), LIMNO_OK);
        EXPECT(world, mark_step(world, step), LIMNO_OK);
        EXPECT(turned, mark_step(turned, step), LIMNO_OK);
        EXPECT(self, mark_step(self, step), LIMNO_OK);
        lend_share_from(&room[0], part, &all, rank, size);
        lend_share_from(&room[1], world, &all, check_rank, check_ranks);
        lend_share_from(&room[2], turned, &all, check_rank, check_ranks);
        lend_universe(self, &all);
        if (check_rank % 2) {
            EXPECT(world, limno_enter(world), LIMNO_OK);
            EXPECT(part, limno_enter(part), LIMNO_OK);
        } else { /* the order of runs may differ from rank to rank: no enter waits for others */
            EXPECT(part, limno_enter(part), LIMNO_OK);
            EXPECT(world, limno_enter(world), LIMNO_OK);
        }
        EXPECT(self, limno_enter(self), LIMNO_OK);
        EXPECT(turned, limno_enter(turned), LIMNO_OK);
    }
    message = 100 + check_rank;
    MPI_Isend(&message, 1, MPI_INT, (check_rank + 1) % check_ranks, 5, MPI_COMM_WORLD, &requests[1]);
    MPI_Waitall(2, requests, MPI_STATUSES_IGNORE);
    CHECK(got == 100 + (check_rank + check_ranks - 1) % check_ranks, "found %d", got);
    EXPECT(NULL, limno_close(turned), LIMNO_OK);
    EXPECT(NULL, limno_close(world), LIMNO_OK);
    EXPECT(NULL, limno_close(self), LIMNO_OK);
    EXPECT(NULL, limno_close(part), LIMNO_OK);

    MPI_Comm_get_errhandler(MPI_COMM_WORLD, &found);
    CHECK(found == own, "the host's error handler is another");
    CHECK(handled == 0, "the host's error handler was called");
    MPI_Send(&message, 1, MPI_INT, check_ranks + 7, 0, MPI_COMM_WORLD);
    CHECK(handled == 1, "the host's error handler was not called");
    MPI_Errhandler_free(&found);
    MPI_Errhandler_free(&own);
    MPI_Comm_set_errhandler(MPI_COMM_WORLD, MPI_ERRORS_ARE_FATAL);
    MPI_Barrier(MPI_COMM_WORLD);
    if (check_rank == 0) {
        struct sheet *reference = read_back(series_path("world"), "run");
        CHECK(reference->rows == 6, "found %zu rows", reference->rows);
        const char *const names[] = {"half0", "half1", "turned", "self0", "self1"};
        for (int i = 0; i < 5; i++) {
            struct sheet *other = read_back(series_path(names[i]), "run");
            for (uint64_t step = 1; step <= 6; step++) SAME_ROW(reference, step, other, step, NULL);
        }
    }
    MPI_Comm_free(&half);
    MPI_Comm_free(&reversed);
}
