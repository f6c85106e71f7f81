/*
 * One rank of several does something wrong in every other step. Nobody waits for it, the others are not told of an error,
 * and every number in every row is either that of a run without mistakes or null; the step after is measured in full.
 *
 * ranks: 2 3 4
 * variants: clang valgrind
 * seconds: 120
 */
#define _GNU_SOURCE
#include <limnograph_mpi.h>

#include "check.h"

static struct universe all;
static double call_seconds; /* the longest that any call of the library has taken */

#define TIMED(call)                                      \
    do {                                                 \
        double begin_ = MPI_Wtime();                     \
        call;                                            \
        double spent_ = MPI_Wtime() - begin_;            \
        if (spent_ > call_seconds) call_seconds = spent_; \
    } while (0)

enum mistake {
    NULL_POINTER, UNKNOWN_FIELD, UNKNOWN_SPECIES, OTHER_COUNT, WRONG_SCALAR, MARK_TWICE, LEND_BEFORE_MARK, MARK_NULL_THEN_RIGHT,
    MARK_NAN_THEN_RIGHT, WRONG_TALLY, TIME_NAN, TIME_BACK, CLOCK_NULL, CLOCK_FLAG, STEP_AGAIN, STEP_MINUS_ONE, LENGTH_NAN, NO_MARK,
    NAN_AND_NOTHING_ELSE, ENTER_TWICE, ENTER_THRICE, ENTER_BEFORE_MARK, CHECKPOINT_NAN, MISTAKES
};
static const char *const names[MISTAKES] = {
    "a null pointer", "an unknown field", "an unknown species", "another count", "a wrong scalar type", "two marks",
    "a lend before the mark", "a null clock, corrected", "a time that is no number, corrected", "a wrong tally",
    "a time that is no number", "a time that goes back", "a null clock", "a flag of 7", "the step number before",
    "a step number of -1", "a step length that is no number", "no mark", "a time that is no number and then nothing",
    "two enters", "three enters", "an enter before the mark", "a checkpoint at no time"};

static void tally_one(limno_run *run)
{
    double mass = check_rank + 1.0;
    limno_tally_batch batch = LIMNO_TALLY_BATCH_INIT;
    batch.channel = "wind", batch.count = 1, batch.mass = &mass;
    EXPECT(run, limno_tally(run, &batch), LIMNO_OK);
}

static void lend_but_gas(limno_run *run)
{
    static struct star stars[STARS];
    static struct hole holes[HOLES];
    size_t star = 0, hole = 0;
    for (int i = check_rank; i < STARS; i += check_ranks) stars[star++] = all.star[i];
    for (int i = check_rank; i < HOLES; i += check_ranks) holes[hole++] = all.hole[i];
    lend_stars(run, stars, star);
    lend_holes(run, holes, hole);
}

static size_t own_gas(struct gas *gas)
{
    size_t count = 0;
    for (int i = check_rank; i < GASES; i += check_ranks) gas[count++] = all.gas[i];
    return count;
}

/* One step with a mistake in it. */
static void err(limno_run *run, uint64_t step, enum mistake mistake)
{
    static struct gas gas[GASES];
    size_t count = own_gas(gas), bytes = sizeof *gas;
    limno_clock clock = clock_of(step, (double)step);
    limno_status marked;
    int good = 0;
    switch (mistake) {
    case ENTER_BEFORE_MARK: REFUSED(run, limno_enter(run), LIMNO_BAD_ORDER, "limno_mark"); break;
    case LEND_BEFORE_MARK:
        REFUSED(run, limno_lend(run, "gas", "mass", &gas->mass, count, bytes, LIMNO_F32), LIMNO_BAD_ORDER, "limno_mark");
        break;
    case MARK_NULL_THEN_RIGHT: REFUSED(run, limno_mark(run, NULL), LIMNO_BAD_ARGUMENT, "`clock` is null"); break;
    case MARK_NAN_THEN_RIGHT:
    case TIME_NAN:
    case CHECKPOINT_NAN:
    case NAN_AND_NOTHING_ELSE: clock.time = NAN; break;
    case TIME_BACK: clock.time = 0.5; break;
    case CLOCK_FLAG: clock.synchronised = 7; break;
    case STEP_AGAIN: clock.step = step - 1; break;
    case STEP_MINUS_ONE: clock.step = UINT64_MAX; break;
    case LENGTH_NAN: clock.step_length = NAN; break;
    default: break;
    }
    clock.checkpoint = mistake == CHECKPOINT_NAN;
    if (mistake != NO_MARK) {
        TIMED(marked = limno_mark(run, mistake == CLOCK_NULL ? NULL : &clock));
        good = marked == LIMNO_OK;
        CHECK(good || marked == LIMNO_BAD_CLOCK || (marked == LIMNO_BAD_ARGUMENT && mistake == CLOCK_NULL), "%s: found %s: %s",
              names[mistake], limno_status_name(marked), limno_last_error(run));
        if (!good && mistake != CLOCK_NULL) CHECK(strstr(limno_last_error(run), "clock of step"), "found: %s", limno_last_error(run));
    }
    if (mistake == NAN_AND_NOTHING_ELSE) return;
    if (mistake == MARK_NAN_THEN_RIGHT) {
        clock.time = (double)step;
        EXPECT(run, limno_mark(run, &clock), LIMNO_OK);
        good = 1;
    }
    if (mistake == MARK_TWICE) REFUSED(run, limno_mark(run, &clock), LIMNO_BAD_ORDER, "limno_enter");
    if (mistake == WRONG_TALLY) {
        double mass[2] = {1, NAN};
        limno_tally_batch batch = LIMNO_TALLY_BATCH_INIT;
        batch.channel = "wind", batch.count = 2, batch.mass = mass;
        REFUSED(run, limno_tally(run, &batch), LIMNO_BAD_ARGUMENT, "event 1");
    }
    if (good) {
        lend_but_gas(run);
        if (mistake == UNKNOWN_SPECIES) {
            REFUSED(run, limno_lend(run, "unobtainium", "mass", &gas->mass, count, bytes, LIMNO_F32), LIMNO_UNKNOWN_NAME, "gas");
        } else {
            EXPECT(run, limno_lend_vector(run, "gas", "position", gas->position, count, bytes, LIMNO_F64), LIMNO_OK);
            EXPECT(run, limno_lend_vector(run, "gas", "velocity", gas->velocity, count, bytes, LIMNO_F32), LIMNO_OK);
            EXPECT(run, limno_lend(run, "gas", "star_formation_rate", &gas->rate, count, bytes, LIMNO_F32), LIMNO_OK);
            switch (mistake) {
            case NULL_POINTER: REFUSED(run, limno_lend(run, "gas", "mass", NULL, count, bytes, LIMNO_F32), LIMNO_BAD_ARGUMENT, "null"); break;
            case UNKNOWN_FIELD: REFUSED(run, limno_lend(run, "gas", "masses", gas, count, bytes, LIMNO_F32), LIMNO_UNKNOWN_NAME, "\"mass\""); break;
            case OTHER_COUNT: REFUSED(run, limno_lend(run, "gas", "mass", &gas->mass, count + 1, bytes, LIMNO_F32), LIMNO_BAD_ARGUMENT, "count"); break;
            case WRONG_SCALAR: REFUSED(run, limno_lend(run, "gas", "mass", &gas->mass, count, bytes, 17), LIMNO_BAD_ARGUMENT, "17"); break;
            default: EXPECT(run, limno_lend(run, "gas", "mass", &gas->mass, count, bytes, LIMNO_F32), LIMNO_OK);
            }
        }
    } else {
        REFUSED(run, limno_lend(run, "gas", "mass", &gas->mass, count, bytes, LIMNO_F32), LIMNO_BAD_ORDER, "step");
    }
    limno_status entered;
    TIMED(entered = limno_enter(run));
    /* An enter without a mark says so; so does one whose step was taken by such an enter before it. */
    limno_status expected = mistake == NO_MARK || mistake == ENTER_BEFORE_MARK ? LIMNO_BAD_ORDER : LIMNO_OK;
    CHECK(entered == expected, "%s: found %s: %s", names[mistake], limno_status_name(entered), limno_last_error(run));
    for (int extra = 0; extra < (mistake == ENTER_TWICE) + 2 * (mistake == ENTER_THRICE); extra++) {
        TIMED(entered = limno_enter(run));
        CHECK(entered == LIMNO_BAD_ORDER, "%s: found %s", names[mistake], limno_status_name(entered));
    }
}

static void go(const char *name, int culprit, int together)
{
    limno_run *run = open_over(MPI_COMM_WORLD, check_config, name);
    uint64_t step = 0;
    for (int mistake = 0; mistake < MISTAKES; mistake++) {
        /* A step with a mistake, then three without. */
        for (int k = 0; k < 4; k++) {
            tally_one(run);
            step++;
            if (k == 0 && check_rank == culprit) {
                err(run, step, (enum mistake)mistake);
            } else {
                limno_status entered;
                limno_clock clock = clock_of(step, (double)step);
                clock.checkpoint = k == 0 && mistake == CHECKPOINT_NAN;
                EXPECT(run, limno_mark(run, &clock), LIMNO_OK);
                lend_share(run, &all, check_rank, check_ranks);
                TIMED(entered = limno_enter(run));
                /* An enter too many takes the place of the step after it. */
                const int taken = check_rank == culprit && ((mistake == ENTER_TWICE && k == 1) || (mistake == ENTER_THRICE && (k == 1 || k == 2)) );
                if (taken)
                    CHECK(entered == LIMNO_BAD_ORDER && strstr(limno_last_error(run), "null"), "%s: found %s: %s", names[mistake],
                          limno_status_name(entered), limno_last_error(run));
                else
                    CHECK(entered == LIMNO_OK, "after %s: found %s: %s", names[mistake], limno_status_name(entered), limno_last_error(run));
            }
            if (together) MPI_Barrier(MPI_COMM_WORLD);
        }
    }
    tally_one(run);
    GOOD_SHARED_STEP(run, step + 1, &all);
    EXPECT(run, limno_close(run), LIMNO_OK);
}

static int is_increment_of_stars(const char *name)
{
    return strstr(name, "formed") || strstr(name, "from_stars");
}

static void check_series(const char *name, const char *reference)
{
    struct sheet *found = read_back(series_path(name), "run"), *expected = read_back(series_path(reference), "run");
    const double each = check_ranks * (check_ranks + 1) / 2.0;
    double tallied = 0;
    CHECK(found->rows == 4 * MISTAKES + 1, "%s: %zu rows, expected %d", name, found->rows, 4 * MISTAKES + 1);
    for (uint64_t step = 1; step <= 4 * MISTAKES + 1; step++) {
        const enum mistake mistake = (enum mistake)((step - 1) / 4);
        const int k = (int)((step - 1) % 4);
        const int errs = k == 0 && step <= 4 * MISTAKES;
        const int taken = step <= 4 * MISTAKES && ((mistake == ENTER_TWICE && k == 1) || (mistake == ENTER_THRICE && (k == 1 || k == 2)));
        if (!cell(found, step, "step")) {
            check_fail(__LINE__, "%s: step %llu (%s) has no row", name, (unsigned long long)step, names[mistake]);
            continue;
        }
        for (size_t c = 0; c < found->columns; c++) {
            const char *column = found->cell[c];
            if (is_about_the_machine(column) || strcmp(column, "ranks_in_error") == 0 || strcmp(column, "checkpoint") == 0 || strstr(column, "tally_")) continue;
            const char *is = cell(found, step, column), *should = cell(expected, step, column);
            /* What was born since a row that a rank knows nothing of cannot be said by that rank. */
            const int may_be_null = errs || taken || is_increment_of_stars(column);
            if (*is == 0 ? !may_be_null && *should : strcmp(is, should) != 0)
                check_fail(__LINE__, "%s: %s of step %llu, %d after %s: expected %s, found '%s'", name, column, (unsigned long long)step, k,
                           names[mistake], should, is);
        }
        tallied += strtod(cell(found, step, "tally_wind_mass"), NULL);
        /* Tallies have nothing to do with clocks. */
        if (errs && mistake < NAN_AND_NOTHING_ELSE) CELL(found, step, "tally_wind_mass", each);
        if (k == 3 || (errs && (mistake <= WRONG_SCALAR || (mistake >= TIME_NAN && mistake <= NO_MARK))))
            CELL(found, step, "ranks_in_error", errs);
        if (k == 2 && !taken) CHECK(*cell(found, step, "stars_formed") || step <= 2, "%s: nothing is known of stars in step %llu", name, (unsigned long long)step);
        if (k == 3 || !(errs || taken)) CHECK(*cell(found, step, "mass_gas"), "step %llu is not measured in full", (unsigned long long)step);
        if (errs && (mistake <= WRONG_SCALAR || (mistake >= TIME_NAN && mistake <= NAN_AND_NOTHING_ELSE)))
            CHECK(*cell(found, step, "mass_gas") == 0, "%s: step %llu has a mass of gas in spite of %s", name, (unsigned long long)step, names[mistake]);
        if (errs && mistake >= MARK_TWICE && mistake <= WRONG_TALLY)
            CHECK(*cell(found, step, "mass_gas") != 0, "%s: step %llu has no mass of gas because of %s", name, (unsigned long long)step, names[mistake]);
    }
    CHECK(tallied == each * (4 * MISTAKES + 1), "%s: tallied %g, expected %g", name, tallied, each * (4 * MISTAKES + 1));
    CELL(found, 4 * CHECKPOINT_NAN + 1, "checkpoint", 1);
}

static void test(void)
{
    fill_universe(&all);
    if (check_rank == 0) {
        limno_run *run = open_alone(check_config, "reference");
        for (uint64_t step = 1; step <= 4 * MISTAKES + 1; step++) GOOD_STEP(run, step, &all);
        EXPECT(run, limno_close(run), LIMNO_OK);
    }
    go("last", check_ranks - 1, 1);
    go("first", 0, 1);
    go("apart", check_ranks - 1, 0);
    CHECK(call_seconds < 10, "a call took %.1f s", call_seconds);
    if (check_rank == 0) {
        check_series("last", "reference");
        check_series("first", "reference");
        check_series("apart", "reference");
    }
}
