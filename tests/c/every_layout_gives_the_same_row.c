/*
 * However the same numbers lie in memory, lent directly or with a layout described once, the row is the same to the bit.
 *
 * variants: valgrind sanitizer clang
 */
#define _GNU_SOURCE
#include "check.h"

#define N 2500 /* several blocks of the library's */
#define WAYS 12

/* Whole numbers below 2^24, so that every scalar type holds them exactly. */
static double at[N][3], speed[N][3], mass[N], rate[N];
/* One number type, three ways to lie. */
#define STORE(type, name)                                            \
    static struct {                                                  \
        type place[3], other, speed[3], mass, rate;                  \
    } name##_structs[N];                                             \
    static type name##_planes[3][N], name##_packed[N][3], name##_list[N]
STORE(float, f32);
STORE(double, f64);
STORE(int32_t, i32);
STORE(uint32_t, u32);
STORE(int64_t, i64);
STORE(uint64_t, u64);
#define FILL(type, name)                                                                                       \
    for (int i = 0; i < N; i++) {                                                                              \
        for (int k = 0; k < 3; k++) {                                                                          \
            name##_structs[i].place[k] = name##_planes[k][i] = name##_packed[i][k] = (type)at[i][k];           \
            name##_structs[i].speed[k] = (type)speed[i][k];                                                    \
        }                                                                                                      \
        name##_structs[i].mass = name##_list[i] = (type)mass[i];                                               \
        name##_structs[i].rate = (type)rate[i];                                                                \
    }

static double backwards[N][3], reversed[3][N];
static double strewn[N * 7 + 3];

static void lend_some_way(limno_run *run, int way)
{
    limno_array array = LIMNO_ARRAY_INIT;
    const void *pointers[3];
    static int32_t layouts[3] = {-1, -1, -1};
    static const double constant = 3.0;

    /* Positions. */
    switch (way) {
    case 0: EXPECT(run, limno_lend_vector(run, "gas", "position", f64_structs[0].place, N, sizeof *f64_structs, LIMNO_F64), LIMNO_OK); break;
    case 1: EXPECT(run, limno_lend_vector(run, "gas", "position", f32_packed, N, 12, LIMNO_F32), LIMNO_OK); break;
    case 2: EXPECT(run, limno_lend_xyz(run, "gas", "position", i32_planes[0], i32_planes[1], i32_planes[2], N, 4, LIMNO_I32), LIMNO_OK); break;
    case 3: /* planes of one array */
        array.scalar = LIMNO_U32, array.components = 3, array.data = u32_planes, array.stride = 4, array.component_stride = 4 * N;
        EXPECT(run, limno_lend_array(run, "gas", "position", &array, N), LIMNO_OK);
        break;
    case 4: EXPECT(run, limno_lend_vector(run, "gas", "position", i64_structs[0].place, N, sizeof *i64_structs, LIMNO_I64), LIMNO_OK); break;
    case 5: EXPECT(run, limno_lend_vector(run, "gas", "position", u64_structs[0].place, N, sizeof *u64_structs, LIMNO_U64), LIMNO_OK); break;
    case 6: /* from the last to the first */
        EXPECT(run, limno_lend_vector(run, "gas", "position", backwards[N - 1], N, -24, LIMNO_F64), LIMNO_OK);
        break;
    case 7: /* z before y before x */
        array.scalar = LIMNO_F64, array.components = 3, array.data = &strewn[6], array.stride = 56, array.component_stride = -24;
        EXPECT(run, limno_lend_array(run, "gas", "position", &array, N), LIMNO_OK);
        break;
    case 8: /* described once, data given each time */
        array.scalar = LIMNO_F32, array.components = 3, array.stride = sizeof *f32_structs;
        if (layouts[0] < 0) EXPECT(run, limno_describe(run, "gas", "position", &array, &layouts[0]), LIMNO_OK);
        EXPECT(run, limno_lend_again(run, layouts[0], f32_structs[0].place, N), LIMNO_OK);
        break;
    case 9: /* described with arrays */
        pointers[0] = f64_planes[0], pointers[1] = f64_planes[1], pointers[2] = f64_planes[2];
        array.scalar = LIMNO_F64, array.components = 3, array.stride = 8, array.arrays = pointers;
        if (layouts[1] < 0) EXPECT(run, limno_describe(run, "gas", "position", &array, &layouts[1]), LIMNO_OK);
        EXPECT(run, limno_lend_again_arrays(run, layouts[1], pointers, N), LIMNO_OK);
        break;
    case 10: /* arrays with a stride */
        for (int k = 0; k < 3; k++) pointers[k] = &f64_structs[0].place[k];
        array.scalar = LIMNO_F64, array.components = 3, array.stride = sizeof *f64_structs, array.arrays = pointers;
        EXPECT(run, limno_lend_array(run, "gas", "position", &array, N), LIMNO_OK);
        break;
    default: /* planes, each from the last to the first */
        array.scalar = LIMNO_F64, array.components = 3, array.data = &reversed[0][N - 1], array.stride = -8, array.component_stride = 8 * N;
        EXPECT(run, limno_lend_array(run, "gas", "position", &array, N), LIMNO_OK);
    }
    /* Velocities in structs, masses in lists or structs, one rate for all. */
    if (way % 2) {
        EXPECT(run, limno_lend_vector(run, "gas", "velocity", f32_structs[0].speed, N, sizeof *f32_structs, LIMNO_F32), LIMNO_OK);
        EXPECT(run, limno_lend(run, "gas", "mass", i64_list, N, 8, LIMNO_I64), LIMNO_OK);
    } else {
        EXPECT(run, limno_lend_vector(run, "gas", "velocity", i32_structs[0].speed, N, sizeof *i32_structs, LIMNO_I32), LIMNO_OK);
        EXPECT(run, limno_lend(run, "gas", "mass", &u32_structs[0].mass, N, sizeof *u32_structs, LIMNO_U32), LIMNO_OK);
    }
    if (way % 3)
        EXPECT(run, limno_lend(run, "gas", "star_formation_rate", &constant, N, 0, LIMNO_F64), LIMNO_OK);
    else
        EXPECT(run, limno_lend(run, "gas", "star_formation_rate", &f32_structs[0].rate, N, sizeof *f32_structs, LIMNO_F32), LIMNO_OK);
}

static void test(void)
{
    for (int i = 0; i < N; i++) {
        for (int k = 0; k < 3; k++) {
            at[i][k] = floor(500 + (3 + i % 60) * sin(1 + 0.7 * i + 2.1 * k));
            speed[i][k] = floor(200 * cos(0.3 * i + 1.3 * k));
            backwards[N - 1 - i][k] = reversed[k][N - 1 - i] = at[i][k];
            strewn[7 * i + 6 - 3 * k] = at[i][k];
        }
        mass[i] = 100000 + i % 977;
        rate[i] = 3;
    }
    FILL(float, f32) FILL(double, f64) FILL(int32_t, i32) FILL(uint32_t, u32) FILL(int64_t, i64) FILL(uint64_t, u64)
    limno_run *run = open_alone(check_config, "layouts");
    for (int way = 0; way < WAYS; way++) {
        EXPECT(run, mark_step(run, (uint64_t)way + 1), LIMNO_OK);
        lend_some_way(run, way);
        EXPECT(run, limno_enter(run), LIMNO_OK);
    }
    EXPECT(run, limno_close(run), LIMNO_OK);
    struct sheet *rows = read_back(series_path("layouts"), "run"), *shells = read_back(series_path("layouts"), "wind_shells");
    double total = 0;
    for (int i = 0; i < N; i++) total += mass[i];
    CELL(rows, 1, "mass_gas", total);
    CHECK(strtod(cell(shells, 1, "mass_outflow_rate"), NULL) > 0, "nothing flows");
    CHECK(strtod(cell(shells, 1, "elements"), NULL) > 10, "nothing is in the shell");
    for (uint64_t way = 2; way <= WAYS; way++) {
        SAME_ROW(rows, 1, rows, way, "step time");
        SAME_ROW(shells, 1, shells, way, "step time");
    }

    /* Large planes: the components of one array are as far apart as there are elements. */
    const size_t many = 400000;
    double *planes = malloc(3 * many * sizeof *planes);
    for (size_t i = 0; i < 3 * many; i++) planes[i] = 500.0;
    for (size_t i = 0; i < many; i++) planes[i] = 520.0; /* 20 kpc off the middle */
    limno_array array = LIMNO_ARRAY_INIT;
    static const float still[3] = {1, 0, 0};
    array.scalar = LIMNO_F64, array.components = 3, array.data = planes, array.stride = 8, array.component_stride = 8 * (ptrdiff_t)many;
    run = open_alone(check_config, "planes");
    EXPECT(run, mark_step(run, 1), LIMNO_OK);
    EXPECT(run, limno_lend_array(run, "gas", "position", &array, many), LIMNO_OK);
    EXPECT(run, limno_lend_vector(run, "gas", "velocity", still, many, 0, LIMNO_F32), LIMNO_OK);
    EXPECT(run, limno_lend(run, "gas", "mass", &still[0], many, 0, LIMNO_F32), LIMNO_OK);
    EXPECT(run, limno_enter(run), LIMNO_OK);
    EXPECT(run, limno_close(run), LIMNO_OK);
    CELL(read_back(series_path("planes"), "wind_shells"), 1, "elements", (double)many);
    free(planes);
}
