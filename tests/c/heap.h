/*
 * heap.h: counts what this process asks of the heap, all threads and libraries included, by standing in front of the
 * C library's own functions. Include it in one test, after check.h.
 */
#ifndef HEAP_H
#define HEAP_H

#include <malloc.h>
#include <sys/mman.h>

extern void *__libc_malloc(size_t), *__libc_calloc(size_t, size_t), *__libc_realloc(void *, size_t);
extern void *__libc_memalign(size_t, size_t);
extern void __libc_free(void *);

static long heap_calls, heap_bytes, heap_peak;

static void heap_takes(void *place)
{
    long now, peak;
    __atomic_add_fetch(&heap_calls, 1, __ATOMIC_RELAXED);
    if (!place) return;
    now = __atomic_add_fetch(&heap_bytes, (long)malloc_usable_size(place), __ATOMIC_RELAXED);
    peak = __atomic_load_n(&heap_peak, __ATOMIC_RELAXED);
    while (now > peak && !__atomic_compare_exchange_n(&heap_peak, &peak, now, 0, __ATOMIC_RELAXED, __ATOMIC_RELAXED)) continue;
}

static void heap_gives(void *place)
{
    if (place) __atomic_sub_fetch(&heap_bytes, (long)malloc_usable_size(place), __ATOMIC_RELAXED);
}

void *malloc(size_t bytes)
{
    void *place = __libc_malloc(bytes);
    heap_takes(place);
    return place;
}

void *calloc(size_t count, size_t bytes)
{
    void *place = __libc_calloc(count, bytes);
    heap_takes(place);
    return place;
}

void *realloc(void *before, size_t bytes)
{
    long held = before ? (long)malloc_usable_size(before) : 0;
    void *place = __libc_realloc(before, bytes);
    if (place || bytes == 0) __atomic_sub_fetch(&heap_bytes, held, __ATOMIC_RELAXED);
    heap_takes(place);
    return place;
}

void *memalign(size_t alignment, size_t bytes)
{
    void *place = __libc_memalign(alignment, bytes);
    heap_takes(place);
    return place;
}

void *aligned_alloc(size_t alignment, size_t bytes)
{
    return memalign(alignment, bytes);
}

int posix_memalign(void **to, size_t alignment, size_t bytes)
{
    void *place = memalign(alignment, bytes);
    if (!place) return ENOMEM;
    *to = place;
    return 0;
}

void free(void *place)
{
    heap_gives(place);
    __libc_free(place);
}

/* Memory of the host's own, which is not of the heap. */
static UNUSED void *room_for(size_t bytes)
{
    void *place = mmap(NULL, bytes, PROT_READ | PROT_WRITE, MAP_PRIVATE | MAP_ANONYMOUS, -1, 0);
    if (place == MAP_FAILED) {
        check_fail(0, "no memory for the test");
        exit(1);
    }
    return place;
}

#endif
