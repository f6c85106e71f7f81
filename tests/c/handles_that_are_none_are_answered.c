/*
 * Null, closed and made-up handles are recognised by every call; nothing is followed, nothing printed.
 *
 * variants: valgrind sanitizer
 */
#define _GNU_SOURCE
#include "check.h"

static void try_handle(limno_run *run, const char *part)
{
    limno_clock clock = clock_of(1, 1.0);
    limno_array array = LIMNO_ARRAY_INIT;
    limno_tally_batch batch = LIMNO_TALLY_BATCH_INIT;
    limno_standing standing = LIMNO_STANDING_INIT;
    int32_t number = 5;
    double value = 1.0;
    const void *arrays[3] = {&value, &value, &value};
    batch.channel = "wind", batch.count = 1, batch.mass = &value;

    REFUSED(NULL, limno_due(run, &clock, &number), LIMNO_CLOSED, part);
    REFUSED(NULL, limno_mark(run, &clock), LIMNO_CLOSED, part);
    REFUSED(NULL, limno_lend(run, "gas", "mass", &value, 1, 8, LIMNO_F64), LIMNO_CLOSED, part);
    REFUSED(NULL, limno_lend_vector(run, "gas", "position", &value, 0, 24, LIMNO_F64), LIMNO_CLOSED, part);
    REFUSED(NULL, limno_lend_xyz(run, "gas", "position", &value, &value, &value, 1, 8, LIMNO_F64), LIMNO_CLOSED, part);
    REFUSED(NULL, limno_lend_array(run, "gas", "mass", &array, 0), LIMNO_CLOSED, part);
    REFUSED(NULL, limno_describe(run, "gas", "mass", &array, &number), LIMNO_CLOSED, part);
    REFUSED(NULL, limno_lend_again(run, 0, &value, 1), LIMNO_CLOSED, part);
    REFUSED(NULL, limno_lend_again_arrays(run, 0, arrays, 1), LIMNO_CLOSED, part);
    REFUSED(NULL, limno_tally(run, &batch), LIMNO_CLOSED, part);
    REFUSED(NULL, limno_sound(run, "gas"), LIMNO_CLOSED, part);
    REFUSED(NULL, limno_enter(run), LIMNO_CLOSED, part);
    REFUSED(NULL, limno_how_it_stands(run, &standing), LIMNO_CLOSED, part);
    REFUSED(NULL, limno_close(run), LIMNO_CLOSED, part);
    CHECK(number == 5, "an answer was written");
    CHECK(standing.rows == 0 && standing.size == sizeof standing, "an answer was written");
    /* With such a handle the thread's own last error is told. */
    CHECK(strstr(limno_last_error(run), part), "found: %s", limno_last_error(run));
}

static void test(void)
{
    limno_run *closed = open_alone(check_config, "one");
    limno_run *open = open_alone(check_config, "two");
    EXPECT(NULL, limno_close(closed), LIMNO_OK);
    try_handle(NULL, "null");
    try_handle(closed, "closed");
    uint64_t state = 12345;
    for (int i = 0; i < 200; i++) {
        state = state * 6364136223846793005u + 1442695040888963407u;
        try_handle((limno_run *)(uintptr_t)state, "handle");
    }
    try_handle((limno_run *)&state, "handle");
    try_handle((limno_run *)(uintptr_t)1, "handle");
    try_handle((limno_run *)UINTPTR_MAX, "handle");
    /* Near misses of a true one. */
    try_handle((limno_run *)((uintptr_t)open ^ 1), "closed");
    try_handle((limno_run *)((uintptr_t)open ^ 0x10000), "closed");
    try_handle((limno_run *)((uintptr_t)open ^ 0x8000), "closed");

    /* The place of a closed run goes to another, its handle does not. */
    limno_run *later = open_alone(check_config, "three");
    CHECK(later != closed, "a handle was used twice");
    try_handle(closed, "closed");
    EXPECT(later, mark_step(later, 1), LIMNO_OK);
    EXPECT(later, limno_enter(later), LIMNO_OK);
    EXPECT(NULL, limno_close(later), LIMNO_OK);
    EXPECT(NULL, limno_close(open), LIMNO_OK);

    CHECK(strcmp(limno_status_name(LIMNO_OK), "LIMNO_OK") == 0, "found %s", limno_status_name(LIMNO_OK));
    CHECK(limno_status_name(-1) && limno_status_name(12345), "no name at all");
    CHECK(limno_version() == LIMNO_VERSION, "found %u", (unsigned)limno_version());
}
