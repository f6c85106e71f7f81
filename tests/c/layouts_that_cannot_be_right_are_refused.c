/*
 * Misaligned pointers, strides that overlap, reach too far or backwards out of memory, counts beyond the address space,
 * scalar types and component numbers that do not fit: each is refused with the field's name and what was expected.
 *
 * variants: valgrind sanitizer clang
 */
#define _GNU_SOURCE
#include "check.h"

static struct universe all;

static void test(void)
{
    double numbers[64] = {0};
    char *bytes = (char *)numbers;
    const void *arrays[3] = {bytes, bytes + 8, bytes + 20};
    limno_array array;
    int32_t layout = -1;
    fill_universe(&all);
    limno_run *run = open_alone(CHECK_BASE "[elements]\nnames = [\"H\", \"He\"]\n" CHECK_GAUGES, "layouts");
    GOOD_STEP(run, 1, &all);
    EXPECT(run, mark_step(run, 2), LIMNO_OK);

#define MASS(pointer, count, stride, scalar) limno_lend(run, "gas", "mass", pointer, count, stride, scalar)
#define PLACE(pointer, count, stride, scalar) limno_lend_vector(run, "gas", "position", pointer, count, stride, scalar)
    /* Alignment. */
    for (int shift = 1; shift < 8; shift++) {
        REFUSED(run, MASS(bytes + shift, 4, 8, LIMNO_F64), LIMNO_BAD_ARGUMENT, "gas mass", "aligned", "8 bytes");
        REFUSED(run, PLACE(bytes + shift, 2, 24, LIMNO_F64), LIMNO_BAD_ARGUMENT, "gas position", "aligned");
        REFUSED(run, MASS(bytes + shift, 4, 8, LIMNO_U64), LIMNO_BAD_ARGUMENT, "gas mass", "aligned");
        if (shift % 4)
            REFUSED(run, MASS(bytes + shift, 4, 8, LIMNO_F32), LIMNO_BAD_ARGUMENT, "gas mass", "aligned", "4 bytes");
    }
    REFUSED(run, limno_lend_xyz(run, "gas", "position", arrays[0], arrays[1], arrays[2], 2, 8, LIMNO_F64),
            LIMNO_BAD_ARGUMENT, "gas position", "aligned");
    REFUSED(run, MASS((void *)1, 1, 8, LIMNO_F64), LIMNO_BAD_ARGUMENT, "gas mass", "aligned");

    /* Strides. */
    REFUSED(run, MASS(bytes, 4, 12, LIMNO_F64), LIMNO_BAD_ARGUMENT, "gas mass", "12", "multiple");
    REFUSED(run, MASS(bytes, 4, 2, LIMNO_F32), LIMNO_BAD_ARGUMENT, "gas mass", "multiple");
    REFUSED(run, MASS(bytes, 4, 1, LIMNO_F64), LIMNO_BAD_ARGUMENT, "gas mass");
    REFUSED(run, MASS(bytes, 4, PTRDIFF_MAX, LIMNO_F64), LIMNO_BAD_ARGUMENT, "gas mass");
    REFUSED(run, MASS(bytes, 4, PTRDIFF_MIN, LIMNO_F64), LIMNO_BAD_ARGUMENT, "gas mass", "more than");
    REFUSED(run, MASS(bytes, 4, (ptrdiff_t)1 << 40, LIMNO_F64), LIMNO_BAD_ARGUMENT, "gas mass", "more than");
    REFUSED(run, MASS(bytes, 4, -((ptrdiff_t)1 << 32), LIMNO_F64), LIMNO_BAD_ARGUMENT, "gas mass", "more than");
    REFUSED(run, PLACE(bytes, 4, 8, LIMNO_F64), LIMNO_BAD_ARGUMENT, "gas position", "shorter");
    REFUSED(run, PLACE(bytes, 4, 16, LIMNO_F64), LIMNO_BAD_ARGUMENT, "gas position", "shorter");
    REFUSED(run, PLACE(bytes, 4, -16, LIMNO_F64), LIMNO_BAD_ARGUMENT, "gas position", "shorter");
    /* Backwards out of memory. */
    REFUSED(run, MASS(bytes, (size_t)1 << 35, -(1 << 20), LIMNO_F64), LIMNO_BAD_ARGUMENT, "gas mass");
    REFUSED(run, MASS((void *)(uintptr_t)4096, 1000, -8, LIMNO_F64), LIMNO_BAD_ARGUMENT, "gas mass", "address space");

    /* Counts. */
    const size_t counts[] = {SIZE_MAX,         SIZE_MAX - 1,       SIZE_MAX / 2,         SIZE_MAX / 2 + 1,
                             SIZE_MAX / 8,     SIZE_MAX / 8 + 1,   SIZE_MAX / 24,        (size_t)(int64_t)INT32_MIN,
                             (size_t)-5,       (size_t)1 << 62,    (size_t)1 << 61,      (size_t)1 << 60,
                             (size_t)1 << 58,  (size_t)1 << 55};
    for (size_t i = 0; i < sizeof counts / sizeof *counts; i++) {
        REFUSED(run, MASS(bytes, counts[i], 8, LIMNO_F64), LIMNO_BAD_ARGUMENT, "gas mass", "elements");
        REFUSED(run, MASS(bytes, counts[i], -8, LIMNO_F64), LIMNO_BAD_ARGUMENT, "gas mass", "elements");
        REFUSED(run, PLACE(bytes, counts[i], 24, LIMNO_F64), LIMNO_BAD_ARGUMENT, "gas position", "elements");
        REFUSED(run, limno_lend_xyz(run, "gas", "position", bytes, bytes, bytes, counts[i], 8, LIMNO_F64),
                LIMNO_BAD_ARGUMENT, "gas position", "elements");
        /* A constant takes no room, but nobody has as many elements: measuring them would never end. */
        REFUSED(run, MASS(bytes, counts[i], 0, LIMNO_F64), LIMNO_BAD_ARGUMENT, "gas mass", "elements");
    }

    /* Scalar types. */
    const int32_t scalars[] = {0, 7, -1, 100, INT32_MAX, INT32_MIN};
    for (size_t i = 0; i < sizeof scalars / sizeof *scalars; i++)
        REFUSED(run, MASS(bytes, 4, 8, scalars[i]), LIMNO_BAD_ARGUMENT, "scalar", "LIMNO_F32");
    REFUSED(run, limno_lend(run, "black_hole", "id", bytes, 4, 8, LIMNO_F64), LIMNO_BAD_ARGUMENT, "black_hole id", "integer");
    REFUSED(run, limno_lend(run, "black_hole", "id", bytes, 4, 4, LIMNO_F32), LIMNO_BAD_ARGUMENT, "black_hole id", "integer");

    /* Components. */
    REFUSED(run, limno_lend(run, "gas", "position", bytes, 4, 24, LIMNO_F64), LIMNO_BAD_ARGUMENT, "gas position",
            "1 numbers", "expected 3");
    REFUSED(run, limno_lend_vector(run, "gas", "mass", bytes, 2, 24, LIMNO_F64), LIMNO_BAD_ARGUMENT, "gas mass",
            "3 numbers", "expected 1");
    REFUSED(run, limno_lend_vector(run, "gas", "element_fraction", bytes, 2, 24, LIMNO_F64), LIMNO_BAD_ARGUMENT,
            "gas element_fraction", "expected 2");
#define ARRAY(...)                                                                                       \
    array = (limno_array)LIMNO_ARRAY_INIT, array.scalar = LIMNO_F64, array.components = 3, array.data = bytes, \
    array.stride = 24, __VA_ARGS__
    ARRAY(array.components = 0);
    REFUSED(run, limno_lend_array(run, "gas", "position", &array, 2), LIMNO_BAD_ARGUMENT, "components");
    ARRAY(array.components = UINT32_MAX);
    REFUSED(run, limno_lend_array(run, "gas", "position", &array, 2), LIMNO_BAD_ARGUMENT, "components");
    /* A list of three pointers that claims to be longer is not read beyond its end (valgrind and the sanitizer see). */
    const void **three = malloc(3 * sizeof *three);
    three[0] = three[1] = three[2] = bytes;
    ARRAY(array.components = 4000, array.arrays = three, array.stride = 8);
    REFUSED(run, limno_lend_array(run, "gas", "position", &array, 2), LIMNO_BAD_ARGUMENT, "gas position", "4000", "expected 3");
    free(three);
    ARRAY(array.arrays = (const void *const *)(bytes + 4));
    REFUSED(run, limno_lend_array(run, "gas", "position", &array, 2), LIMNO_BAD_ARGUMENT, "`arrays`", "aligned");
    ARRAY(array.component_stride = 4);
    REFUSED(run, limno_lend_array(run, "gas", "position", &array, 2), LIMNO_BAD_ARGUMENT, "gas position", "component stride");
    ARRAY(array.component_stride = PTRDIFF_MIN);
    REFUSED(run, limno_lend_array(run, "gas", "position", &array, 2), LIMNO_BAD_ARGUMENT, "gas position", "component stride");
    ARRAY(array.component_stride = PTRDIFF_MAX & ~(ptrdiff_t)7);
    REFUSED(run, limno_lend_array(run, "gas", "position", &array, 2), LIMNO_BAD_ARGUMENT, "gas position", "component stride");
    /* Planes that run into each other: y of the first element would be x of the third. */
    ARRAY(array.stride = 8, array.component_stride = 16);
    REFUSED(run, limno_lend_array(run, "gas", "position", &array, 10), LIMNO_BAD_ARGUMENT, "gas position", "overlap");
    ARRAY(array.stride = -8, array.component_stride = 16);
    REFUSED(run, limno_lend_array(run, "gas", "position", &array, 10), LIMNO_BAD_ARGUMENT, "gas position", "overlap");

    /* The list of pointers is not read when a layout is described, and must be what it was described as. */
    ARRAY(array.arrays = (const void *const *)(uintptr_t)64, array.data = (void *)(uintptr_t)8, array.stride = 8);
    EXPECT(run, limno_describe(run, "gas", "position", &array, &layout), LIMNO_OK);
    REFUSED(run, limno_lend_again(run, layout, bytes, 2), LIMNO_BAD_ARGUMENT, "gas position", "limno_lend_again_arrays");
    REFUSED(run, limno_lend_again_arrays(run, layout, (const void *const *)(bytes + 4), 2), LIMNO_BAD_ARGUMENT, "aligned");
    ARRAY(array.arrays = NULL);
    EXPECT(run, limno_describe(run, "gas", "position", &array, &layout), LIMNO_OK);
    REFUSED(run, limno_lend_again_arrays(run, layout, arrays, 2), LIMNO_BAD_ARGUMENT, "gas position", "limno_lend_again");
    ARRAY(array.stride = 12);
    REFUSED(run, limno_describe(run, "gas", "position", &array, &layout), LIMNO_BAD_ARGUMENT, "gas position", "multiple");
    ARRAY(array.scalar = 9);
    REFUSED(run, limno_describe(run, "gas", "position", &array, &layout), LIMNO_BAD_ARGUMENT, "scalar");

    lend_stars(run, all.star, STARS);
    EXPECT(run, limno_enter(run), LIMNO_OK);
    GOOD_STEP(run, 3, &all);
    EXPECT(run, limno_close(run), LIMNO_OK);

    struct sheet *sheet = read_back(series_path("layouts"), "run");
    NULL_CELL(sheet, 2, "mass_gas");
    NULL_CELL(sheet, 2, "black_holes");
    CELL(sheet, 3, "black_holes", HOLES);
    CELL(sheet, 3, "baryon_mass_drift", 0);
    CELL(sheet, 3, "ranks_in_error", 0);
}
