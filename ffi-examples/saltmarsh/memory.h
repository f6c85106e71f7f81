/* Memory that is there or the program ends, and growable arrays of particles. */
#ifndef SALTMARSH_MEMORY_H
#define SALTMARSH_MEMORY_H

#include <stddef.h>

/* Ends every rank with a message; for conditions that leave nothing sensible to do. */
void fatal(const char *what);

/* Zeroed memory for count items; never returns NULL. */
void *allocate(size_t count, size_t item_size);

/* Changes the size of memory; what was there stays, the rest is undefined. Never returns NULL. */
void *reallocate(void *memory, size_t size);

struct store {
    unsigned char *items;
    size_t count;
    size_t capacity;
    size_t item_size;
};

void store_init(struct store *store, size_t item_size);
void store_free(struct store *store);

/* Sets the number of items; new ones have undefined content. */
void store_resize(struct store *store, size_t count);

/* Appends a zeroed item and returns it; earlier pointers into the store may become stale. */
void *store_append(struct store *store);

static inline void *store_at(const struct store *store, size_t index)
{
    return store->items + index * store->item_size;
}

#endif
