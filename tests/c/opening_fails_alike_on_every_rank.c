/*
 * Whatever is wrong at opening, on whichever rank, every rank gets the same status and text, nobody hangs, no series is
 * left behind, and the next opening works.
 *
 * ranks: 1 2 3 4
 * variants: valgrind
 * seconds: 90
 */
#define _GNU_SOURCE
#include <limnograph_mpi.h>

#include "check.h"

enum fault { VERSION, OPTIONS_SIZE, THREADS, NOT_UTF8, NO_PLACE, MANY_FAULTS };
static const char *const parts[] = {"rebuild", "`options`", "`threads`", "UTF-8", "`run` is null"};
static const limno_status statuses[] = {LIMNO_BAD_VERSION, LIMNO_BAD_ARGUMENT, LIMNO_BAD_ARGUMENT, LIMNO_BAD_ARGUMENT, LIMNO_BAD_ARGUMENT};

static void compare(int line, const char *what, limno_status status, limno_status expected, const char *part)
{
    char mine[2048], first[2048];
    int same;
    snprintf(mine, sizeof mine, "%d %s", (int)status, limno_last_error(NULL));
    strcpy(first, mine);
    MPI_Bcast(first, sizeof first, MPI_CHAR, 0, MPI_COMM_WORLD);
    same = strcmp(first, mine) == 0;
    if (!same) check_fail(line, "%s: rank 0 has \"%s\", this one \"%s\"", what, first, mine);
    if (status != expected || !strstr(mine, part))
        check_fail(line, "%s: expected %s with \"%s\", found \"%s\"", what, limno_status_name(expected), part, mine);
    if (access(series_path("never"), F_OK) == 0) check_fail(line, "%s: a series was made", what);
    MPI_Barrier(MPI_COMM_WORLD);
}

static void test(void)
{
    limno_run *run = NULL;
    for (int culprit = 0; culprit < check_ranks; culprit += check_ranks > 1 ? check_ranks - 1 : 1) {
        for (int fault = 0; fault < MANY_FAULTS; fault++) {
            const int mine = check_rank == culprit;
            limno_options options = options_with(check_config);
            if (mine && fault == OPTIONS_SIZE) options.size = 3;
            if (mine && fault == THREADS) options.threads = -5;
            if (mine && fault == NOT_UTF8) options.description = "\xff";
            run = (limno_run *)8;
            limno_status status = limno_open_mpi(mine && fault == VERSION ? 99999 : LIMNO_VERSION, "check.toml", series_path("never"),
                                                 &options, MPI_COMM_WORLD, mine && fault == NO_PLACE ? NULL : &run);
            compare(__LINE__, parts[fault], status, statuses[fault], parts[fault]);
            if (!(mine && fault == NO_PLACE)) CHECK(run == NULL, "a handle after a failure");
            /* The text says which rank, unless it is the first. */
            char who[32];
            snprintf(who, sizeof who, "rank %d: ", culprit);
            CHECK(culprit == 0 || strstr(limno_last_error(NULL), who), "found: %s", limno_last_error(NULL));
        }
    }
    /* What only rank 0 sees. */
#define OPENS(config, series, options) limno_open_mpi(LIMNO_VERSION, config, series, options, MPI_COMM_WORLD, &run)
    compare(__LINE__, "config", OPENS("/no/such.toml", series_path("never"), NULL), LIMNO_BAD_CONFIG, "/no/such.toml");
    compare(__LINE__, "null config", OPENS(NULL, series_path("never"), NULL), LIMNO_BAD_ARGUMENT, "null");
    limno_options options = options_with("[units]\nlenght = \"kpc\"\n");
    compare(__LINE__, "typo", OPENS("typo.toml", series_path("never"), &options), LIMNO_BAD_CONFIG, "typo.toml:2");
    options.config_text = check_config;
    compare(__LINE__, "null series", OPENS("c", NULL, &options), LIMNO_BAD_ARGUMENT, "null");
    compare(__LINE__, "series", OPENS("c", "/no/such/place/run.limno", &options), LIMNO_DISK, "/no/such/place/run.limno");
    compare(__LINE__, "name", OPENS("c", "/tmp/run", &options), LIMNO_DISK, ".limno");
    /* A long text arrives whole. */
    char *wrong = calloc(1, 40000);
    for (int i = 0; i < 1000; i++) sprintf(wrong + strlen(wrong), "key%d = %d\n", i, i);
    options.config_text = wrong;
    compare(__LINE__, "long", OPENS("long.toml", series_path("never"), &options), LIMNO_BAD_CONFIG, "long.toml:1");
    free(wrong);

    /* Of the others' arguments none is needed. */
    options.config_text = check_config;
    if (check_rank == 0)
        EXPECT(NULL, OPENS("c", series_path("right"), &options), LIMNO_OK);
    else
        EXPECT(NULL, OPENS(NULL, NULL, NULL), LIMNO_OK);
    static struct universe all;
    fill_universe(&all);
    GOOD_SHARED_STEP(run, 1, &all);
    EXPECT(run, limno_close(run), LIMNO_OK);
    if (check_rank == 0) CELL(read_back(series_path("right"), "run"), 1, "black_holes", HOLES);

    /* Communicators that are none, on every rank. */
    int null = 0;
    run = (limno_run *)8;
    REFUSED(NULL, limno_open_mpi(LIMNO_VERSION, "c", series_path("never"), &options, MPI_COMM_NULL, &run), LIMNO_BAD_MPI, "MPI_COMM_NULL");
    CHECK(run == NULL, "a handle after a failure");
    REFUSED(NULL, limno_open_communicator(LIMNO_VERSION, "c", series_path("never"), &options, NULL, sizeof(MPI_Comm), NULL, &run),
            LIMNO_BAD_MPI, "null");
    REFUSED(NULL, limno_open_communicator(LIMNO_VERSION, "c", series_path("never"), &options, &null, 3, NULL, &run), LIMNO_BAD_MPI,
            "MPI_Comm has");
    REFUSED(NULL, limno_open_fortran(LIMNO_VERSION, "c", series_path("never"), &options, -77, &run), LIMNO_BAD_MPI, "communicator");
    REFUSED(NULL, limno_open_fortran(LIMNO_VERSION, "c", series_path("never"), &options, 123456789, &run), LIMNO_BAD_MPI, "communicator");
    MPI_Comm here = MPI_COMM_WORLD;
    REFUSED(NULL, limno_open_communicator(LIMNO_VERSION, "c", series_path("never"), &options, &here, sizeof here, "MPICH 4.1", &run),
            LIMNO_BAD_MPI, "MPICH 4.1", "Open MPI");
    EXPECT(NULL, limno_open_fortran(LIMNO_VERSION, "c", series_path("fortran"), &options, (int32_t)MPI_Comm_c2f(MPI_COMM_WORLD), &run), LIMNO_OK);
    GOOD_SHARED_STEP(run, 1, &all);
    EXPECT(run, limno_close(run), LIMNO_OK);
}
