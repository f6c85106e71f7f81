/* Ways to do next to nothing with the bytes: read each once and add all as integers. Which is fastest differs from
 * machine to machine, so that is found out before anything is held against it. */
#include <omp.h>

#include "rivals.h"

const char *const read_ways[READ_WAYS] = { "one array after another", "four places of each array at a time",
                                           "all arrays side by side, in pieces of 4 KiB",
                                           "side by side with prefetching" };

/* Parts a thread's share is cut into when it reads in several places at a time. */
enum { PLACES = 4 };

struct span {
    const uint64_t *words;
    size_t count;
};

static uint64_t added(const uint64_t *restrict words, size_t count)
{
    uint64_t sum = 0;
#pragma omp simd reduction(+ : sum)
    for (size_t i = 0; i < count; i++)
        sum += words[i];
    return sum;
}

static uint64_t added_in_places(const uint64_t *restrict words, size_t count)
{
    size_t part = count / PLACES;
    const uint64_t *a = words, *b = a + part, *c = b + part, *d = c + part;
    uint64_t one = 0, two = 0, three = 0, four = 0;
#pragma omp simd reduction(+ : one, two, three, four)
    for (size_t i = 0; i < part; i++) {
        one += a[i];
        two += b[i];
        three += c[i];
        four += d[i];
    }
    return one + two + three + four + added(words + PLACES * part, count - PLACES * part);
}

/* Pieces of all spans in turn, in proportion to their lengths. */
static uint64_t added_side_by_side(const struct span *spans, int count, int prefetch)
{
    enum { PIECE = 512 };
    size_t shortest = spans[0].count;
    for (int s = 1; s < count; s++)
        shortest = spans[s].count < shortest ? spans[s].count : shortest;
    size_t pieces = (shortest + PIECE - 1) / PIECE;
    uint64_t sum = 0;
    for (size_t piece = 0; piece < pieces; piece++) {
        for (int s = 0; s < count; s++) {
            size_t from = spans[s].count * piece / pieces, to = spans[s].count * (piece + 1) / pieces;
            /* A prefetch beyond the end is ignored by the processor. */
            for (size_t line = from; prefetch && line < to; line += 8)
                __builtin_prefetch(spans[s].words + line + 2 * PIECE, 0, 3);
            sum += added(spans[s].words + from, to - from);
        }
    }
    return sum;
}

uint64_t read_plainly(int way, const struct gas *gas, enum read_what what)
{
    const struct {
        const void *start;
        size_t numbers;
    } arrays[] = { { gas->position, 3 * gas->count },        { gas->velocity, 3 * gas->count },
                   { gas->mass, gas->count },                { gas->star_formation_rate, gas->count },
                   { gas->internal_energy, gas->count },     { gas->metallicity, gas->count } };
    int count = what == ALL_THAT_IS_LENT ? 6 : 4;
    uint64_t sum = 0;
#pragma omp parallel reduction(+ : sum)
    {
        struct span spans[6] = { { NULL, 0 } };
        size_t share = (size_t)omp_get_thread_num(), shares = (size_t)omp_get_num_threads();
        for (int a = 0; a < count; a++) {
            size_t words = arrays[a].numbers * (size_t)gas->precision / sizeof(uint64_t);
            size_t from = words * share / shares, to = words * (share + 1) / shares;
            spans[a] = (struct span){ (const uint64_t *)arrays[a].start + from, to - from };
        }
        if (way < 2) {
            for (int a = 0; a < count; a++)
                sum += way == 0 ? added(spans[a].words, spans[a].count)
                                : added_in_places(spans[a].words, spans[a].count);
        } else {
            sum += added_side_by_side(spans, count, way == 3);
        }
    }
    return sum;
}
