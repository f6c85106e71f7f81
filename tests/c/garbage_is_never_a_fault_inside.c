/*
 * Calls with arguments picked at random, many of them impossible: every one is answered, none with a fault inside the
 * library, none puts the run to sleep, and whatever is measured is measured rightly afterwards. The seed is fixed.
 *
 * variants: sanitizer clang
 */
#define _GNU_SOURCE
#include "check.h"

#define ROUNDS 60000
#define ROOM 4096

static struct universe all;
static uint64_t state = 20260801;
/* Arguments never lead beyond this, however they are combined, unless the library must see that they cannot be right. */
static union {
    double align;
    unsigned char byte[ROOM];
} room;

static uint64_t random_bits(void)
{
    state ^= state << 13, state ^= state >> 7, state ^= state << 17;
    return state * 2685821657736338717u;
}
static size_t below(size_t limit) { return (size_t)(random_bits() % limit); }
static int one_in(size_t number) { return below(number) == 0; }

static const char *a_name(const char *const *names, size_t count)
{
    static char changed[64];
    if (one_in(40)) return NULL;
    const char *name = names[below(count)];
    if (!one_in(6)) return name;
    snprintf(changed, sizeof changed, "%s", name);
    size_t at = below(strlen(changed) + 1);
    changed[at] = (char)random_bits();
    changed[sizeof changed - 1] = 0;
    return changed;
}

static const char *a_species(void)
{
    static const char *const names[] = {"gas", "star", "black_hole", "dark_matter", "wind"};
    return a_name(names, 5);
}

static const char *a_field(void)
{
    static const char *const names[] = {"position", "velocity", "mass", "id", "star_formation_rate", "internal_energy",
                                        "temperature", "density", "smoothing_length", "metallicity", "element_fraction",
                                        "birth_mass", "birth_time", "subgrid_mass", "accretion_rate"};
    return a_name(names, 15);
}

static size_t a_count(void)
{
    static const size_t odd[] = {SIZE_MAX, SIZE_MAX / 2, SIZE_MAX / 8, (size_t)1 << 60, (size_t)1 << 57, (size_t)-7};
    return one_in(8) ? odd[below(6)] : one_in(5) ? 0 : 1 + below(6);
}

static ptrdiff_t a_stride(void)
{
    static const ptrdiff_t odd[] = {PTRDIFF_MAX, PTRDIFF_MIN, -1, 1, 2, 3, 7, (ptrdiff_t)1 << 40, -((ptrdiff_t)1 << 40), 12};
    static const ptrdiff_t even[] = {0, 4, 8, 16, 24, 32, 48, 64, -8, -24, -32, -4};
    return one_in(6) ? odd[below(10)] : even[below(12)];
}

static int32_t a_scalar(void) { return one_in(10) ? (int32_t)random_bits() : (int32_t)(1 + below(6)); }

/* In the middle of the room, far from both of its ends. */
static void *a_place(void)
{
    if (one_in(10)) return NULL;
    size_t shift = one_in(6) ? below(8) : 0;
    return room.byte + ROOM / 2 + 8 * below(8) + shift;
}

static limno_array an_array(const void **list)
{
    limno_array array = LIMNO_ARRAY_INIT;
    static const ptrdiff_t steps[] = {0, 4, 8, 16, 24, 64, 128, -8, -64, 3, PTRDIFF_MIN, PTRDIFF_MAX};
    array.scalar = a_scalar();
    array.components = one_in(15) ? (uint32_t)random_bits() : one_in(8) ? 2 : one_in(2) ? 3 : 1;
    array.data = a_place();
    array.stride = a_stride();
    array.component_stride = one_in(2) ? 0 : steps[below(12)];
    if (one_in(3)) array.arrays = list;
    for (int k = 0; k < 3; k++) list[k] = a_place();
    if (one_in(30)) array.size = below(5000);
    return array;
}

static double a_number(void)
{
    uint64_t bits = random_bits();
    double number;
    memcpy(&number, &bits, sizeof number);
    return number;
}

static void test(void)
{
    limno_run *run = open_alone(CHECK_BASE "[elements]\nnames = [\"H\", \"He\"]\n[channels]\nnames = [\"kicks\"]\n" CHECK_GAUGES, "garbage");
    uint64_t step = 0, statuses[16] = {0};
    double time = 0;
    int32_t layouts = 0;
    fill_universe(&all);
    GOOD_STEP(run, ++step, &all);
    time = 1;
    /* Clocks are random too; they may run far ahead, so the last steps are marked relative to what was accepted. */
    limno_clock accepted = clock_of(step, time);
    for (size_t i = 0; i < ROOM; i++) room.byte[i] = i / 8 % 5 ? (unsigned char)random_bits() : 0xff; /* some are no numbers */

    for (int round = 0; round < ROUNDS; round++) {
        const void *list[3];
        const char *species = a_species(), *field = a_field();
        size_t count = a_count();
        limno_array array = an_array(list);
        limno_tally_batch batch = LIMNO_TALLY_BATCH_INIT;
        limno_clock clock = clock_of(accepted.step + 1, accepted.time + 1e-3);
        limno_standing standing = LIMNO_STANDING_INIT;
        limno_status status = LIMNO_OK;
        int32_t number = -1;
        switch (below(14)) {
        case 0: status = limno_lend(run, species, field, a_place(), count, a_stride(), a_scalar()); break;
        case 1: status = limno_lend_vector(run, species, field, a_place(), count, a_stride(), a_scalar()); break;
        case 2: status = limno_lend_xyz(run, species, field, a_place(), a_place(), a_place(), count, a_stride(), a_scalar()); break;
        case 3: status = limno_lend_array(run, species, field, one_in(50) ? NULL : &array, count); break;
        case 4:
            if (layouts > 300) break;
            status = limno_describe(run, species, field, &array, one_in(30) ? NULL : &number);
            if (status == LIMNO_OK) layouts = number + 1;
            break;
        case 5: status = limno_lend_again(run, (int32_t)below((size_t)layouts + 3) - 1, a_place(), count); break;
        case 6: /* a list that may be shorter than the layout's is the host's fault; three is what is used here */
            status = limno_lend_again_arrays(run, (int32_t)below((size_t)layouts + 3) - 1, one_in(20) ? NULL : list, count);
            break;
        case 7: status = limno_sound(run, species); break;
        case 8:
        case 9: status = limno_enter(run); break;
        case 10:
        case 11:
            if (one_in(4)) clock.time = a_number();
            if (one_in(8)) clock.step_length = a_number();
            if (one_in(8)) clock.step = random_bits();
            if (one_in(10)) clock.checkpoint = (int32_t)random_bits();
            if (one_in(10)) clock.synchronised = (int32_t)random_bits();
            if (one_in(30)) clock.size = below(5000);
            /* Not so far ahead that nothing could follow. */
            if (clock.step > accepted.step + 1000 && !one_in(3)) clock.step = accepted.step + below(1000);
            if (clock.step > UINT64_MAX / 2) clock.step = accepted.step;
            if (clock.time > accepted.time + 1) clock.time = NAN;
            if (one_in(2)) limno_due(run, &clock, &number);
            status = limno_mark(run, one_in(50) ? NULL : &clock);
            if (status == LIMNO_OK) accepted = clock;
            break;
        case 12: {
            static const char *const channels[] = {"wind", "stellar_return", "black_hole", "kicks"};
            double amounts[6];
            for (int k = 0; k < 6; k++) amounts[k] = one_in(3) ? a_number() : 1.0;
            batch.channel = a_name(channels, 4);
            batch.count = one_in(10) ? SIZE_MAX / (1 + below(64)) : below(3);
            if (one_in(2)) batch.mass = amounts;
            if (one_in(2)) batch.momentum = (double *)((char *)amounts + (one_in(4) ? below(8) : 0));
            if (one_in(2)) batch.elements = amounts;
            if (one_in(2)) batch.position = amounts;
            if (one_in(30)) batch.size = below(5000);
            status = limno_tally(run, &batch);
            break;
        }
        default: status = limno_how_it_stands(run, &standing);
        }
        if (status >= 0 && status < 16) statuses[status]++;
        if (status < 0 || status > LIMNO_LEFT_OUT || status == LIMNO_BAD_CONFIG || status == LIMNO_BAD_VERSION || status == LIMNO_BAD_MPI) {
            check_fail(__LINE__, "round %d is answered with %s: %s", round, limno_status_name(status), limno_last_error(run));
            break;
        }
        if (status != LIMNO_OK && strlen(limno_last_error(run)) < 10)
            check_fail(__LINE__, "round %d: %s without a text", round, limno_status_name(status));
    }
    for (int s = LIMNO_OK; s <= LIMNO_UNKNOWN_NAME; s++)
        CHECK(statuses[s] > 100, "only %llu rounds were answered with %s", (unsigned long long)statuses[s], limno_status_name(s));
    CHECK(statuses[LIMNO_LEFT_OUT] > 20, "nothing was ever left out");

    limno_enter(run);
    for (int i = 1; i <= 2; i++) {
        limno_clock clock = clock_of(accepted.step + (uint64_t)i, accepted.time + i);
        EXPECT(run, limno_mark(run, &clock), LIMNO_OK);
        lend_universe(run, &all);
        EXPECT(run, limno_enter(run), LIMNO_OK);
    }
    EXPECT(run, limno_close(run), LIMNO_OK);
    struct sheet *sheet = read_back(series_path("garbage"), "run");
    SAME_ROW(sheet, 1, sheet, accepted.step + 2, "step time steps tally_kicks_events tally_wind_events stars_formed "
             "stellar_mass_formed star_formation_rate_from_stars star_formation_formed_over_expected baryon_mass_drift");
}
