/* Tuned for speed in single precision, with what a specialist would do: blocks that stay in cache, all loops in vector
 * registers, elements within reach moved together before anything more is asked of them, no branch that depends on
 * the data. Sums are formed in single precision within a block and in double precision beyond it, so about six digits
 * are right. Built with AVX-512 where the compiler's target has it, else in plain C that compilers vectorise. */
#include <math.h>
#include <omp.h>
#include <string.h>

#include "rivals.h"
#include "statistics.h"

#if defined(__AVX512F__) && defined(__AVX512DQ__)
#define BY_HAND 1
#include <immintrin.h>
#else
#define BY_HAND 0
#endif

enum { LONGEST = 256, LANES = 16, FLUSH = 8192 / LONGEST };
/* How many elements ahead of the computing memory is asked for. */
enum { AHEAD = 512 };

/* The geometry in single precision. */
struct settings {
    float box, per_box, station[3], squares[SHELLS + 1], hubble;
};

/* Elements within reach, moved together. Room for a whole vector behind the last. */
struct near {
    int count;
    int32_t index[LONGEST + LANES];
    float d[3][LONGEST + LANES], square[LONGEST + LANES];
};

/* Running sums, lane by lane, in double precision. */
struct sums {
    double rate[LANES], mass[LANES], outward[SHELLS][LANES], inward[SHELLS][LANES], shell_mass[SHELLS][LANES];
    uint64_t elements[SHELLS];
};

/* The arrays from the element on at which a block begins. */
struct place {
    const float *position, *velocity, *mass, *rate;
};

/* Asks for the lines of the 16 elements that come AHEAD elements after `i`, so that memory is busy while this block is
 * computed with: a third of the time is saved by it. A request beyond the end is ignored by the processor. Left to itself the
 * compiler takes a function that only asks for one that does nothing, and leaves it out. */
__attribute__((always_inline)) static inline void ask(const struct place *place, int i)
{
    i += AHEAD;
    for (int line = 0; line < 3; line++) {
        __builtin_prefetch(place->position + 3 * i + 16 * line);
        __builtin_prefetch(place->velocity + 3 * i + 16 * line);
    }
    __builtin_prefetch(place->mass + i);
    __builtin_prefetch(place->rate + i);
}

#if BY_HAND

const char *const tuned_form = "AVX-512 by hand";

/* Sums in single precision, lane by lane, which stay short. */
struct running {
    __m512 rate, mass, outward[SHELLS], inward[SHELLS], shell_mass[SHELLS];
};

static void flush(double *sums, __m512 *values)
{
    __m512d low = _mm512_cvtps_pd(_mm512_castps512_ps256(*values));
    __m512d high = _mm512_cvtps_pd(_mm512_extractf32x8_ps(*values, 1));
    _mm512_storeu_pd(sums, _mm512_add_pd(_mm512_loadu_pd(sums), low));
    _mm512_storeu_pd(sums + 8, _mm512_add_pd(_mm512_loadu_pd(sums + 8), high));
    *values = _mm512_setzero_ps();
}

static void flush_all(struct sums *sums, struct running *running)
{
    flush(sums->rate, &running->rate);
    flush(sums->mass, &running->mass);
    for (int shell = 0; shell < SHELLS; shell++) {
        flush(sums->outward[shell], &running->outward[shell]);
        flush(sums->inward[shell], &running->inward[shell]);
        flush(sums->shell_mass[shell], &running->shell_mass[shell]);
    }
}

static void total(__m512 *sum, const float *numbers, int count)
{
    int i = 0;
    for (; i + 16 <= count; i += 16)
        *sum = _mm512_add_ps(*sum, _mm512_loadu_ps(numbers + i));
    if (i < count)
        *sum = _mm512_add_ps(*sum, _mm512_maskz_loadu_ps((__mmask16)((1 << (count - i)) - 1), numbers + i));
}

/* Component `c` of 16 triples that lie in three registers. */
static inline __m512 component(const __m512 *triples, __m512i first, __m512i second, __mmask16 third)
{
    __m512 two = _mm512_permutex2var_ps(triples[0], first, triples[1]);
    return _mm512_mask_permutexvar_ps(two, third, second, triples[2]);
}

static void find_near(struct near *near, const struct settings *set, const struct place *place, int count)
{
    const float *position = place->position;
    /* Lane i of component c is number 3 i + c of 48; of these 0–31 are in the first two registers. */
    int32_t first[3][16], second[3][16];
    __mmask16 third[3];
    for (int c = 0; c < 3; c++) {
        third[c] = 0;
        for (int i = 0; i < 16; i++) {
            int at = 3 * i + c;
            first[c][i] = at < 32 ? at : 0;
            second[c][i] = at < 32 ? 0 : at - 32;
            third[c] = (__mmask16)(third[c] | (at < 32 ? 0 : 1) << i);
        }
    }
    __m512i firsts[3], seconds[3];
    __m512 station[3];
    for (int c = 0; c < 3; c++) {
        firsts[c] = _mm512_loadu_si512(first[c]);
        seconds[c] = _mm512_loadu_si512(second[c]);
        station[c] = _mm512_set1_ps(set->station[c]);
    }
    __m512 box = _mm512_set1_ps(set->box), per_box = _mm512_set1_ps(set->per_box);
    __m512 least = _mm512_set1_ps(set->squares[0]), most = _mm512_set1_ps(set->squares[SHELLS]);
    __m512i index = _mm512_setr_epi32(0, 1, 2, 3, 4, 5, 6, 7, 8, 9, 10, 11, 12, 13, 14, 15);
    int found = 0;
    for (int i = 0; i < count; i += 16) {
        int left = count - i;
        __mmask16 there = 0xffff;
        __m512 triples[3];
        ask(place, i);
        if (left >= 16) {
            for (int k = 0; k < 3; k++)
                triples[k] = _mm512_loadu_ps(position + 3 * i + 16 * k);
        } else {
            there = (__mmask16)((1 << left) - 1);
            uint64_t numbers = ((uint64_t)1 << (3 * left)) - 1;
            for (int k = 0; k < 3; k++)
                triples[k] = _mm512_maskz_loadu_ps((__mmask16)(numbers >> (16 * k)), position + 3 * i + 16 * k);
        }
        __m512 d[3], square = _mm512_setzero_ps();
        for (int c = 0; c < 3; c++) {
            d[c] = _mm512_sub_ps(component(triples, firsts[c], seconds[c], third[c]), station[c]);
            __m512 boxes = _mm512_roundscale_ps(_mm512_mul_ps(d[c], per_box), 0);
            d[c] = _mm512_fnmadd_ps(boxes, box, d[c]);
            square = _mm512_fmadd_ps(d[c], d[c], square);
        }
        __mmask16 within = _mm512_mask_cmp_ps_mask(there, square, least, _CMP_GE_OQ);
        within = _mm512_mask_cmp_ps_mask(within, square, most, _CMP_LT_OQ);
        /* Compressing within registers and storing whole ones is quicker than compressing into memory. */
        for (int c = 0; c < 3; c++)
            _mm512_storeu_ps(near->d[c] + found, _mm512_maskz_compress_ps(within, d[c]));
        _mm512_storeu_ps(near->square + found, _mm512_maskz_compress_ps(within, square));
        _mm512_storeu_si512(near->index + found, _mm512_maskz_compress_epi32(within, index));
        found += __builtin_popcount(within);
        index = _mm512_add_epi32(index, _mm512_set1_epi32(16));
    }
    near->count = found;
}

static inline void measure_near(struct sums *sums, struct running *running, const struct near *near,
                                const struct settings *set, const struct place *place)
{
    const float *velocity = place->velocity, *mass = place->mass;
    __m512 zero = _mm512_setzero_ps(), hubble = _mm512_set1_ps(set->hubble);
    __m512 *outward = running->outward, *inward = running->inward, *shell_mass = running->shell_mass;
    for (int i = 0; i < near->count; i += 16) {
        int left = near->count - i;
        __mmask16 there = (__mmask16)(left >= 16 ? 0xffff : (1 << left) - 1);
        __m512i index = _mm512_maskz_loadu_epi32(there, near->index + i);
        __m512i triple = _mm512_add_epi32(index, _mm512_add_epi32(index, index));
        __m512 along = zero;
        for (int c = 0; c < 3; c++) {
            __m512 v = _mm512_mask_i32gather_ps(zero, there, triple, velocity + c, 4);
            along = _mm512_fmadd_ps(_mm512_loadu_ps(near->d[c] + i), v, along);
        }
        __m512 m = _mm512_mask_i32gather_ps(zero, there, index, mass, 4);
        __m512 square = _mm512_loadu_ps(near->square + i);
        /* One Newton step on the processor's estimate of 14 bits. */
        __m512 inverse = _mm512_rsqrt14_ps(square);
        __m512 half = _mm512_mul_ps(_mm512_mul_ps(square, inverse), _mm512_set1_ps(-0.5f));
        inverse = _mm512_mul_ps(inverse, _mm512_fmadd_ps(half, inverse, _mm512_set1_ps(1.5f)));
        __m512 flux = _mm512_fmadd_ps(_mm512_mul_ps(square, hubble), inverse, _mm512_mul_ps(along, inverse));
        flux = _mm512_mul_ps(flux, m);
        __mmask16 out = _mm512_cmp_ps_mask(flux, zero, _CMP_GE_OQ);
        __mmask16 beyond = there;
#pragma GCC unroll 8
        for (int shell = 0; shell < SHELLS; shell++) {
            __m512 outer = _mm512_set1_ps(set->squares[shell + 1]);
            __mmask16 further = _mm512_mask_cmp_ps_mask(beyond, square, outer, _CMP_GE_OQ);
            __mmask16 within = (__mmask16)(beyond & ~further), leaving = (__mmask16)(within & out);
            outward[shell] = _mm512_mask_add_ps(outward[shell], leaving, outward[shell], flux);
            inward[shell] = _mm512_mask_add_ps(inward[shell], (__mmask16)(within & ~out), inward[shell], flux);
            shell_mass[shell] = _mm512_mask_add_ps(shell_mass[shell], within, shell_mass[shell], m);
            sums->elements[shell] += (uint64_t)__builtin_popcount(within);
            beyond = further;
        }
    }
}

#else

const char *const tuned_form = "plain C, vectorised by the compiler";

/* Sums go to double precision at the end of each block already. */
struct running {
    double rate, mass;
};

static void flush_all(struct sums *sums, struct running *running)
{
    sums->rate[0] += running->rate;
    sums->mass[0] += running->mass;
    *running = (struct running){ 0.0, 0.0 };
}

static void total(double *sum, const float *numbers, int count)
{
    float total = 0.0f;
#pragma omp simd reduction(+ : total)
    for (int i = 0; i < count; i++)
        total += numbers[i];
    *sum += total;
}

static void find_near(struct near *near, const struct settings *set, const struct place *place, int count)
{
    const float *position = place->position;
    float d[3][LONGEST], square[LONGEST];
    for (int i = 0; i < count; i += 16)
        ask(place, i);
#pragma omp simd
    for (int i = 0; i < count; i++) {
        float sum = 0.0f;
        for (int c = 0; c < 3; c++) {
            float at = position[3 * i + c] - set->station[c];
            at -= set->box * rintf(at * set->per_box);
            d[c][i] = at;
            sum += at * at;
        }
        square[i] = sum;
    }
    /* Written down always, kept only when within: no branch to foresee. */
    int found = 0;
    for (int i = 0; i < count; i++) {
        near->index[found] = i;
        found += (square[i] >= set->squares[0]) & (square[i] < set->squares[SHELLS]);
    }
    near->count = found;
    for (int k = 0; k < found; k++) {
        for (int c = 0; c < 3; c++)
            near->d[c][k] = d[c][near->index[k]];
        near->square[k] = square[near->index[k]];
    }
}

static void measure_near(struct sums *sums, struct running *running, const struct near *near,
                         const struct settings *set, const struct place *place)
{
    const float *velocity = place->velocity, *mass = place->mass;
    (void)running;
    float flux[LONGEST], m[LONGEST];
    for (int k = 0; k < near->count; k++) {
        int i = near->index[k];
        float along = near->d[0][k] * velocity[3 * i] + near->d[1][k] * velocity[3 * i + 1] +
                      near->d[2][k] * velocity[3 * i + 2];
        float radius = sqrtf(near->square[k]);
        m[k] = mass[i];
        flux[k] = m[k] * (along / radius + set->hubble * radius);
    }
    for (int shell = 0; shell < SHELLS; shell++) {
        float outward = 0.0f, inward = 0.0f, within_mass = 0.0f, least = set->squares[shell],
              most = set->squares[shell + 1];
        int elements = 0;
#pragma omp simd reduction(+ : outward, inward, within_mass, elements)
        for (int k = 0; k < near->count; k++) {
            int within = (near->square[k] >= least) & (near->square[k] < most);
            outward += within & (flux[k] >= 0.0f) ? flux[k] : 0.0f;
            inward += within & (flux[k] < 0.0f) ? flux[k] : 0.0f;
            within_mass += within ? m[k] : 0.0f;
            elements += within;
        }
        sums->outward[shell][0] += outward;
        sums->inward[shell][0] += inward;
        sums->shell_mass[shell][0] += within_mass;
        sums->elements[shell] += (uint64_t)elements;
    }
}

#endif

static double lanes(const double *sums)
{
    double total = 0.0;
    for (int lane = 0; lane < LANES; lane++)
        total += sums[lane];
    return total;
}

static struct quantities part(const struct gas *gas, const struct settings *set, size_t from, size_t to)
{
    struct sums sums;
    struct near near;
    struct running running;
    memset(&sums, 0, sizeof sums);
    memset(&running, 0, sizeof running);
    int since = 0;
    for (size_t at = from; at < to; at += LONGEST) {
        int count = to - at < LONGEST ? (int)(to - at) : LONGEST;
        struct place place = { (const float *)gas->position + 3 * at, (const float *)gas->velocity + 3 * at,
                               (const float *)gas->mass + at, (const float *)gas->star_formation_rate + at };
        total(&running.rate, place.rate, count);
        total(&running.mass, place.mass, count);
        find_near(&near, set, &place, count);
        measure_near(&sums, &running, &near, set, &place);
        if (++since == FLUSH) {
            flush_all(&sums, &running);
            since = 0;
        }
    }
    flush_all(&sums, &running);
    struct quantities found = { .star_formation_rate = lanes(sums.rate), .mass = lanes(sums.mass) };
    for (int shell = 0; shell < SHELLS; shell++) {
        found.outward[shell] = lanes(sums.outward[shell]);
        found.inward[shell] = lanes(sums.inward[shell]);
        found.shell_mass[shell] = lanes(sums.shell_mass[shell]);
        found.elements[shell] = sums.elements[shell];
    }
    return found;
}

struct quantities tuned(const struct gas *gas, const struct geometry *where)
{
    if (gas->precision != SINGLE)
        give_up("the tuned rival is written for float arrays");
    struct settings set = { .box = (float)where->box, .per_box = (float)(1.0 / where->box), .hubble = (float)where->hubble };
    for (int axis = 0; axis < 3; axis++)
        set.station[axis] = (float)where->station[axis];
    for (int edge = 0; edge <= SHELLS; edge++)
        set.squares[edge] = (float)(where->edges[edge] * where->edges[edge]);
    struct quantities found = { 0 };
#pragma omp parallel
    {
        size_t share = (size_t)omp_get_thread_num(), shares = (size_t)omp_get_num_threads();
        struct quantities mine =
            part(gas, &set, gas->count * share / shares, gas->count * (share + 1) / shares);
#pragma omp critical
        quantities_add(&found, &mine);
    }
    return found;
}
