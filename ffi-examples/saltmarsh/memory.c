#include "memory.h"

#include <mpi.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

void fatal(const char *what)
{
    fprintf(stderr, "saltmarsh: %s\n", what);
    MPI_Abort(MPI_COMM_WORLD, 1);
    exit(1);
}

void *allocate(size_t count, size_t item_size)
{
    void *memory = calloc(count > 0 ? count : 1, item_size > 0 ? item_size : 1);
    if (memory == NULL)
        fatal("out of memory; try fewer particles (--side) or a smaller mesh (--mesh)");
    return memory;
}

void *reallocate(void *memory, size_t size)
{
    void *moved = realloc(memory, size > 0 ? size : 1);
    if (moved == NULL)
        fatal("out of memory; try fewer particles (--side) or a smaller mesh (--mesh)");
    return moved;
}

void store_init(struct store *store, size_t item_size)
{
    store->items = NULL;
    store->count = 0;
    store->capacity = 0;
    store->item_size = item_size;
}

void store_free(struct store *store)
{
    free(store->items);
    store_init(store, store->item_size);
}

static void reserve(struct store *store, size_t capacity)
{
    if (capacity <= store->capacity)
        return;
    /* Half as much again, so that a slowly growing rank does not reallocate at every step. */
    capacity += capacity / 2 + 16;
    if (capacity > SIZE_MAX / store->item_size)
        fatal("an array has grown beyond what memory can address");
    store->items = reallocate(store->items, capacity * store->item_size);
    store->capacity = capacity;
}

void store_resize(struct store *store, size_t count)
{
    reserve(store, count);
    store->count = count;
}

void *store_append(struct store *store)
{
    reserve(store, store->count + 1);
    void *item = store->items + store->count * store->item_size;
    memset(item, 0, store->item_size);
    store->count++;
    return item;
}
