/*
 * Ranks that are at different steps or times, or of which one closes while the others enter, all go to sleep and say why;
 * every call then returns at once, the host goes on, rows made before stand, and closing does not wait for long.
 *
 * ranks: 2 3
 */
#define _GNU_SOURCE
#include <limnograph_mpi.h>

#include "check.h"

static struct universe all;

static void check_asleep(limno_run *run, const char *part)
{
    limno_clock clock = clock_of(1000, 1000.0);
    limno_array array = LIMNO_ARRAY_INIT;
    limno_tally_batch batch = LIMNO_TALLY_BATCH_INIT;
    limno_standing standing = LIMNO_STANDING_INIT;
    int32_t number;
    double one = 1, begin = MPI_Wtime();
    batch.channel = "wind", batch.count = 1, batch.mass = &one, array.scalar = LIMNO_F64;
    REFUSED(run, limno_due(run, &clock, &number), LIMNO_ASLEEP, part);
    REFUSED(run, limno_mark(run, &clock), LIMNO_ASLEEP, part);
    REFUSED(run, limno_lend(run, "gas", "mass", &one, 1, 8, LIMNO_F64), LIMNO_ASLEEP, part);
    REFUSED(run, limno_describe(run, "gas", "mass", &array, &number), LIMNO_ASLEEP, part);
    REFUSED(run, limno_tally(run, &batch), LIMNO_ASLEEP, part);
    REFUSED(run, limno_sound(run, "gas"), LIMNO_ASLEEP, part);
    REFUSED(run, limno_enter(run), LIMNO_ASLEEP, part);
    EXPECT(run, limno_how_it_stands(run, &standing), LIMNO_OK);
    CHECK(standing.asleep == 1 && standing.rows == 3, "asleep %d, %llu rows", (int)standing.asleep, (unsigned long long)standing.rows);
    CHECK(MPI_Wtime() - begin < 1, "a run that sleeps took %g s to say so", MPI_Wtime() - begin);
}

/* Steps until every rank has noticed, as a host makes them that does not look at any status. */
static void go_on(limno_run *run, uint64_t step)
{
    for (uint64_t more = 0; more < 5; more++) {
        limno_clock clock = clock_of(step + more, (double)(step + more));
        limno_mark(run, &clock);
        limno_lend(run, "gas", "mass", &all.gas[0].mass, GASES, sizeof all.gas[0], LIMNO_F32);
        limno_enter(run);
        MPI_Barrier(MPI_COMM_WORLD);
    }
}

static void contradict(const char *name, const char *part, int what)
{
    const int odd = check_rank == check_ranks - 1;
    limno_run *run = open_over(MPI_COMM_WORLD, check_config, name);
    for (uint64_t step = 1; step <= 3; step++) GOOD_SHARED_STEP(run, step, &all);
    limno_clock clock = clock_of(odd && what == 0 ? 5 : 4, odd && what == 1 ? 4.5 : 4.0);
    EXPECT(run, limno_mark(run, &clock), LIMNO_OK);
    lend_share(run, &all, check_rank, check_ranks);
    limno_enter(run); /* the contradiction may be noticed here or later */
    MPI_Barrier(MPI_COMM_WORLD);
    go_on(run, 6);
    check_asleep(run, part);
    double begin = MPI_Wtime();
    REFUSED(NULL, limno_close(run), LIMNO_ASLEEP, part);
    CHECK(MPI_Wtime() - begin < 10, "closing took %g s", MPI_Wtime() - begin);
    REFUSED(NULL, limno_close(run), LIMNO_CLOSED, "closed");
    MPI_Barrier(MPI_COMM_WORLD);
    if (check_rank == 0) {
        struct sheet *sheet = read_back(series_path(name), "run");
        CHECK(sheet->rows == 3, "found %zu rows", sheet->rows);
        CELL(sheet, 3, "black_holes", HOLES);
        CHECK(has_event(series_path(name), part), "the series does not say why it ends");
    }
}

static void close_early(void)
{
    const int odd = check_rank == check_ranks - 1;
    limno_run *run = open_over(MPI_COMM_WORLD, check_config, "early");
    for (uint64_t step = 1; step <= 3; step++) GOOD_SHARED_STEP(run, step, &all);
    double begin = MPI_Wtime();
    if (odd) {
        REFUSED(NULL, limno_close(run), LIMNO_ASLEEP, "closed the run");
        for (int i = 0; i < 5; i++) MPI_Barrier(MPI_COMM_WORLD);
    } else {
        go_on(run, 4);
        check_asleep(run, "closed the run");
        REFUSED(NULL, limno_close(run), LIMNO_ASLEEP, "closed the run");
    }
    CHECK(MPI_Wtime() - begin < 20, "it took %g s", MPI_Wtime() - begin);
    MPI_Barrier(MPI_COMM_WORLD);
    if (check_rank == 0) {
        struct sheet *sheet = read_back(series_path("early"), "run");
        CHECK(sheet->rows == 3, "found %zu rows", sheet->rows);
    }
}

static void test(void)
{
    int sum = 0, one = 1;
    fill_universe(&all);
    contradict("steps", "disagree on the step", 0);
    contradict("times", "disagree on the time", 1);
    close_early();
    /* The host is unharmed, and so is the next run. */
    MPI_Allreduce(&one, &sum, 1, MPI_INT, MPI_SUM, MPI_COMM_WORLD);
    CHECK(sum == check_ranks, "found %d", sum);
    limno_run *run = open_over(MPI_COMM_WORLD, check_config, "next");
    for (uint64_t step = 1; step <= 3; step++) GOOD_SHARED_STEP(run, step, &all);
    EXPECT(run, limno_close(run), LIMNO_OK);
}
