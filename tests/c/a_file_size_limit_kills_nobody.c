/*
 * A host that meets its file-size limit lives on, is told by the status, and gets the rows written once the limit is
 * raised; a checkpoint in between is not called durable.
 */
#define _GNU_SOURCE
#include "check.h"

#include <sys/resource.h>

static void test(void)
{
    static struct universe all;
    struct rlimit before, low;
    limno_standing standing = LIMNO_STANDING_INIT;
    limno_clock clock;
    fill_universe(&all);
    getrlimit(RLIMIT_FSIZE, &before);
    limno_run *run = open_alone(check_config, "limit");
    for (uint64_t step = 1; step <= 5; step++) GOOD_STEP(run, step, &all);
    for (int i = 0; i < 300 && standing.rows_written < 5; i++, usleep(10000))
        EXPECT(run, limno_how_it_stands(run, &standing), LIMNO_OK);
    CHECK(standing.rows_written == 5, "found %llu", (unsigned long long)standing.rows_written);

    low = before, low.rlim_cur = 4096; /* less than there is */
    setrlimit(RLIMIT_FSIZE, &low);
    /* Told once, soon after it begins. */
    int told = 0;
    for (uint64_t step = 6; step <= 30; step++) {
        EXPECT(run, mark_step(run, step), LIMNO_OK);
        lend_universe(run, &all);
        limno_status status = limno_enter(run);
        CHECK(status == LIMNO_OK || status == LIMNO_DISK, "found %s: %s", limno_status_name(status), limno_last_error(run));
        if (status == LIMNO_DISK) {
            told++;
            CHECK(strstr(limno_last_error(run), "too large") && strstr(limno_last_error(run), "limit.limno"), "found: %s",
                  limno_last_error(run));
        }
        usleep(10000);
    }
    CHECK(told == 1, "told %d times", told);
    EXPECT(run, limno_how_it_stands(run, &standing), LIMNO_OK);
    CHECK(standing.rows == 30 && standing.rows_written < 30 && standing.rows_lost == 0 && !standing.asleep,
          "%llu rows, %llu written, %llu lost", (unsigned long long)standing.rows, (unsigned long long)standing.rows_written,
          (unsigned long long)standing.rows_lost);
    clock = clock_of(31, 31.0), clock.checkpoint = 1;
    EXPECT(run, limno_mark(run, &clock), LIMNO_OK);
    lend_universe(run, &all);
    REFUSED(run, limno_enter(run), LIMNO_NOT_DURABLE, "step 31", "stable storage");

    setrlimit(RLIMIT_FSIZE, &before);
    clock = clock_of(32, 32.0), clock.checkpoint = 1;
    EXPECT(run, limno_mark(run, &clock), LIMNO_OK);
    lend_universe(run, &all);
    EXPECT(run, limno_enter(run), LIMNO_OK);
    GOOD_STEP(run, 33, &all);
    EXPECT(run, limno_close(run), LIMNO_OK);

    struct sheet *sheet = read_back(series_path("limit"), "run");
    CHECK(sheet->rows == 33, "found %zu rows", sheet->rows);
    for (uint64_t step = 1; step <= 33; step++) CELL(sheet, step, "black_holes", HOLES);

    /* From the beginning: nothing can be opened, and nothing is left behind. */
    low.rlim_cur = 0;
    setrlimit(RLIMIT_FSIZE, &low);
    limno_options options = options_with(check_config);
    REFUSED(NULL, limno_open(LIMNO_VERSION, "c", series_path("none"), &options, &run), LIMNO_DISK, "none.limno", "too large");
    setrlimit(RLIMIT_FSIZE, &before);
    CHECK(run == NULL, "a handle after a failure");
    CHECK(access(series_path("none"), F_OK) != 0, "a failed opening left a series behind");

    /* Closing while the limit holds says what is lost, and does not wait for ever. */
    run = open_alone(check_config, "closing");
    GOOD_STEP(run, 1, &all);
    usleep(300000);
    low.rlim_cur = 4096;
    setrlimit(RLIMIT_FSIZE, &low);
    EXPECT(run, mark_step(run, 2), LIMNO_OK);
    lend_universe(run, &all);
    limno_enter(run);
    REFUSED(NULL, limno_close(run), LIMNO_NOT_DURABLE, "closing.limno", "not in it");
    setrlimit(RLIMIT_FSIZE, &before);
    CELL(read_back(series_path("closing"), "run"), 1, "black_holes", HOLES);
}
