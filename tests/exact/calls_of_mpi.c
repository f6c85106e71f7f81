/*
 * Every MPI call of the library goes through here first (the profiling interface of MPI: MPI-3.1 standard, chapter 14):
 * each measured step starts exactly one reduction, all other steps none; nothing else is collective between opening
 * and closing, nothing is sent from one rank to another, at most two reductions are in flight, and the oldest is waited
 * for only when a third would start. Also with ranks that are late, one that is ahead, and over a restart.
 *
 * Built by tests/c/each_measured_step_costs_one_collective.sh, which writes calls_of_mpi.h: a wrapper, made from mpi.h,
 * for every function of MPI that the library refers to and that has none below.
 */
#define _GNU_SOURCE
#include <limnograph_mpi.h>

#include "check.h"

#define EVERY 3
#define AHEAD_PATIENCE 20 /* seconds */

/* ---- what the library calls --------------------------------------------------------------------------------- */

enum kind { LOCAL, START, PROGRESS, COLLECTIVE, KINDS };
static const char *const kind_name[KINDS] = {"local", "reduction started", "progress", "collective"};
/* What each function is to other ranks. One that is not here fails the test: say what it is. */
static const struct {
    const char *name;
    enum kind kind;
} known[] = {
    {"MPI_Iallreduce", START},
    {"MPI_Test", PROGRESS},
    {"MPI_Allreduce", COLLECTIVE},
    {"MPI_Bcast", COLLECTIVE},
    {"MPI_Comm_dup", COLLECTIVE},
    {"MPI_Comm_free", COLLECTIVE},
    {"MPI_Comm_create_keyval", LOCAL},
    {"MPI_Comm_f2c", LOCAL},
    {"MPI_Comm_free_keyval", LOCAL},
    {"MPI_Comm_get_errhandler", LOCAL},
    {"MPI_Comm_rank", LOCAL},
    {"MPI_Comm_set_attr", LOCAL},
    {"MPI_Comm_set_errhandler", LOCAL},
    {"MPI_Comm_size", LOCAL},
    {"MPI_Comm_test_inter", LOCAL},
    {"MPI_Errhandler_free", LOCAL},
    {"MPI_Error_string", LOCAL},
    {"MPI_Finalized", LOCAL},
    {"MPI_Get_library_version", LOCAL},
    {"MPI_Initialized", LOCAL},
    {"MPI_Is_thread_main", LOCAL},
    {"MPI_Op_create", LOCAL},
    {"MPI_Op_free", LOCAL},
    {"MPI_Query_thread", LOCAL},
    {"MPI_Type_commit", LOCAL},
    {"MPI_Type_contiguous", LOCAL},
    {"MPI_Type_free", LOCAL},
    {"MPI_Type_size", LOCAL},
};
#define KNOWN (sizeof known / sizeof *known)

static __thread int is_hosts_thread, is_inside; /* inside a call of the library */
static int count[KINDS], in_flight, most_in_flight, most_ever;
static unsigned long of_function[KNOWN];

static __attribute__((constructor)) void know_thread(void)
{
    is_hosts_thread = 1;
}

static void seen(const char *name)
{
    size_t at = 0;
    while (at < KNOWN && strcmp(known[at].name, name) != 0) at++;
    if (at == KNOWN) {
        check_fail(0, "the library calls %s: say in calls_of_mpi.c what that is", name);
        return;
    }
    /* The host's own calls have names with a P, or are made by check.h before and after. */
    CHECK(is_hosts_thread, "%s is called from another thread than the host's", name);
    if (!is_inside) return;
    count[known[at].kind]++;
    of_function[at]++;
}

int MPI_Iallreduce(const void *sent, void *received, int length, MPI_Datatype type, MPI_Op operation, MPI_Comm comm,
                   MPI_Request *request)
{
    seen("MPI_Iallreduce");
    int result = PMPI_Iallreduce(sent, received, length, type, operation, comm, request);
    if (++in_flight > most_in_flight) most_in_flight = in_flight;
    if (in_flight > most_ever) most_ever = in_flight;
    return result;
}

int MPI_Test(MPI_Request *request, int *flag, MPI_Status *status)
{
    seen("MPI_Test");
    const int is_live = *request != MPI_REQUEST_NULL;
    int result = PMPI_Test(request, flag, status);
    if (is_live && *flag) in_flight--;
    return result;
}

#include "calls_of_mpi.h"

/* ---- what may happen in which call -------------------------------------------------------------------------- */

static void begin_call(void)
{
    memset(count, 0, sizeof count);
    is_inside = 1;
}

/* A call between opening and closing: so many reductions are started, nothing else is collective. */
static void end_call(int line, const char *call, limno_run *run, limno_status found, int starts)
{
    is_inside = 0;
    check_status(line, run, call, found, LIMNO_OK, NULL);
    if (count[START] != starts || count[COLLECTIVE] != 0)
        check_fail(line, "%.60s: expected %d %s and 0 %s, found %d and %d", call, starts, kind_name[START],
                   kind_name[COLLECTIVE], count[START], count[COLLECTIVE]);
    if (in_flight < 0 || in_flight > 2) check_fail(line, "%.60s: %d reductions are in flight", call, in_flight);
}

#define INSIDE(run, call, starts)                           \
    do {                                                    \
        begin_call();                                       \
        limno_status status_ = call;                        \
        end_call(__LINE__, #call, run, status_, starts);    \
    } while (0)

static struct universe all, mine;
static int measured, unmeasured, waits;
static const char config[] = CHECK_BASE "[cadence]\nevery_steps = 3\n" CHECK_GAUGES;

static void be_late(uint64_t step)
{
    const struct timespec delay = {0, (long)((step * 7 + (uint64_t)check_rank * 11) % 5) * 2000000};
    nanosleep(&delay, NULL);
}

static void one_step(limno_run *run, uint64_t step, int is_first, int is_checkpoint, int skewed)
{
    const int expected = is_first || is_checkpoint || step % EVERY == 0;
    int due = -1;
    limno_clock clock = clock_of(step, (double)step);
    clock.checkpoint = is_checkpoint;
    if (skewed) be_late(step);
    INSIDE(run, limno_due(run, &clock, &due), 0);
    CHECK(due == expected, "step %d: due is %d", (int)step, due);
    INSIDE(run, limno_mark(run, &clock), 0);
    if (skewed) be_late(step + 1);
    size_t gases = 0, stars = 0, holes = 0;
    for (int i = check_rank; i < GASES; i += check_ranks) mine.gas[gases++] = all.gas[i];
    for (int i = check_rank; i < STARS; i += check_ranks) mine.star[stars++] = all.star[i];
    for (int i = check_rank; i < HOLES; i += check_ranks) mine.hole[holes++] = all.hole[i];
    begin_call();
    lend_gas(run, mine.gas, gases);
    lend_stars(run, mine.star, stars);
    lend_holes(run, mine.hole, holes);
    end_call(__LINE__, "lending", run, LIMNO_OK, 0);
    INSIDE(run, limno_sound(run, "gas"), 0);
    limno_tally_batch batch = LIMNO_TALLY_BATCH_INIT;
    static const double mass = 1.0;
    batch.channel = "wind", batch.count = 1, batch.mass = &mass;
    INSIDE(run, limno_tally(run, &batch), 0);
    if (skewed) be_late(step + 2);
    const int before = in_flight;
    INSIDE(run, limno_enter(run), expected);
    waits += expected && before == 2;
    if (is_checkpoint) CHECK(in_flight == 0, "after a checkpoint %d reductions are in flight", in_flight);
    measured += expected, unmeasured += !expected;
    limno_standing standing = LIMNO_STANDING_INIT;
    INSIDE(run, limno_how_it_stands(run, &standing), 0);
}

/* Opening is collective, but nothing in it is sent from rank to rank, and it is over when the call returns. */
static unsigned long at_opening;

static limno_run *open_counted(const char *name)
{
    limno_options options = options_with(config);
    limno_run *run = NULL;
    begin_call();
    limno_status status = limno_open_mpi(LIMNO_VERSION, "c", series_path(name), &options, MPI_COMM_WORLD, &run);
    is_inside = 0;
    check_status(__LINE__, NULL, "limno_open_mpi", status, LIMNO_OK, NULL);
    if (status != LIMNO_OK) MPI_Abort(MPI_COMM_WORLD, 1);
    at_opening += (unsigned long)count[START];
    CHECK(count[COLLECTIVE] > 0, "opening is not seen to be collective: are calls intercepted at all?");
    CHECK(in_flight == 0, "%d reductions are in flight before the first step", in_flight);
    return run;
}

/* Closing completes what is in flight before it meets the other ranks, at most once more. */
static void close_counted(limno_run *run)
{
    CHECK(most_in_flight <= 2, "%d reductions were in flight before closing", most_in_flight);
    begin_call();
    limno_status status = limno_close(run);
    is_inside = 0;
    check_status(__LINE__, run, "limno_close", status, LIMNO_OK, NULL);
    CHECK(count[START] <= 1, "closing starts %d reductions", count[START]);
    CHECK(in_flight == 0, "%d reductions are left in flight by closing", in_flight);
    CHECK(most_in_flight <= 2, "closing had %d reductions in flight", most_in_flight);
    most_in_flight = 0;
}

static void wait_for_file(const char *path)
{
    const struct timespec nap = {0, 2000000};
    for (int i = 0; i < AHEAD_PATIENCE * 500; i++) {
        if (access(path, F_OK) == 0) return;
        nanosleep(&nap, NULL);
    }
    check_fail(__LINE__, "the rank ahead did not return from entering two measured steps: it waits for the others");
}

/* One rank enters two measured steps while no other has come to the first of them, and waits only in the third. */
static void run_ahead(limno_run *run, uint64_t from, int ahead)
{
    char path[640];
    snprintf(path, sizeof path, "%s/ahead.%d", check_folder, ahead);
    CHECK(in_flight == 0, "%d reductions are in flight before", in_flight);
    if (check_rank != ahead) wait_for_file(path);
    for (uint64_t step = from; step < from + 2 * EVERY; step++) one_step(run, step, 0, 0, 0);
    if (check_rank == ahead) {
        if (check_ranks > 1) CHECK(in_flight == 2, "%d reductions are in flight of a rank ahead of all", in_flight);
        FILE *file = fopen(path, "w");
        CHECK(file && fclose(file) == 0, "%s cannot be written", path);
    }
    for (uint64_t step = from + 2 * EVERY; step < from + 4 * EVERY; step++) one_step(run, step, 0, 0, 0);
}

static void test(void)
{
    fill_universe(&all);
    uint64_t step = 1;
    limno_run *run = open_counted("counted");
    for (; step <= 12; step++) one_step(run, step, step == 1, 0, 0);
    for (; step <= 40; step++) one_step(run, step, 0, step % 10 == 0, 1);
    for (int ahead = 0; ahead < check_ranks; ahead++) {
        run_ahead(run, step, ahead);
        step += 4 * EVERY;
        one_step(run, step++, 0, 1, 0); /* all meet at a checkpoint */
    }
    close_counted(run);

    /* A restart from the last checkpoint; then one that finds reductions in flight as it closes. */
    run = open_counted("counted");
    const uint64_t second = step;
    for (; step < second + 20; step++) one_step(run, step, 0, 0, 1);
    one_step(run, step++, 0, 1, 0);
    char path[640];
    snprintf(path, sizeof path, "%s/closing", check_folder);
    if (check_rank > 0) {
        const struct timespec delay = {0, 100000000};
        wait_for_file(path);
        nanosleep(&delay, NULL);
    }
    for (int i = 0; i < 2 * EVERY; i++) one_step(run, step++, 0, 0, 0);
    if (check_rank == 0) {
        if (check_ranks > 1) CHECK(in_flight == 2, "%d reductions are in flight as rank 0 begins to close", in_flight);
        FILE *file = fopen(path, "w");
        CHECK(file && fclose(file) == 0, "%s cannot be written", path);
    }
    close_counted(run);
    CHECK(waits > 0 || check_ranks == 1, "no third reduction was about to start with two in flight");
    CHECK(measured >= 30 && unmeasured >= 40, "only %d measured and %d other steps", measured, unmeasured);

    unsigned long starts = 0, locals = 0;
    for (size_t i = 0; i < KNOWN; i++) {
        if (known[i].kind == START) starts += of_function[i];
        if (known[i].kind == LOCAL) locals += of_function[i];
    }
    starts -= at_opening;
    /* Closed twice. */
    CHECK(starts >= (unsigned long)measured && starts <= (unsigned long)measured + 2, "%lu reductions for %d rows", starts,
          measured);
    PMPI_Barrier(MPI_COMM_WORLD);
    if (check_rank == 0) {
        struct sheet *rows = read_back(series_path("counted"), "run");
        CHECK((int)rows->rows == measured, "%d steps were measured and %zu rows stand", measured, rows->rows);
        dprintf(check_out, "%d ranks: %d measured steps, %d others, %lu reductions, at most %d in flight, %d waits for the "
                "oldest, %lu local calls\n", check_ranks, measured, unmeasured, starts, most_ever, waits, locals);
    }
    MPI_Barrier(MPI_COMM_WORLD);
}
