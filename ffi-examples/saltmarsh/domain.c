#include "domain.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

/* Resolution at which work is counted along x; edges fall on these bins. */
#define WORK_BINS 2048
/* Bits per axis of the order in memory (Morton 1966). */
#define SORT_BITS 8

void domain_init(struct domain *domain, MPI_Comm comm, double box)
{
    domain->comm = comm;
    MPI_Comm_rank(comm, &domain->rank);
    MPI_Comm_size(comm, &domain->ranks);
    domain->box = box;
    domain->edges = allocate((size_t)domain->ranks + 1, sizeof *domain->edges);
    for (int r = 0; r <= domain->ranks; r++)
        domain->edges[r] = box * r / domain->ranks;
}

void domain_free(struct domain *domain)
{
    free(domain->edges);
    domain->edges = NULL;
}

int domain_owner(const struct domain *domain, double x)
{
    int low = 0, high = domain->ranks - 1;
    while (low < high) {
        int middle = (low + high + 1) / 2;
        if (x >= domain->edges[middle])
            low = middle;
        else
            high = middle - 1;
    }
    return low;
}

/* Work is counted, not timed: a timed one would make two runs differ. A gas particle costs its
 * neighbours twice over (density and force) besides what any particle costs. */
static long long work_of(const struct store *store, enum species species, size_t index)
{
    if (species != GAS)
        return 12;
    return 40 + gas_at(store, index)->neighbours;
}

void domain_balance(struct domain *domain, const struct store species[SPECIES_COUNT])
{
    if (domain->ranks == 1)
        return;
    long long mine[WORK_BINS] = { 0 }, all[WORK_BINS];
    for (int s = 0; s < SPECIES_COUNT; s++) {
        for (size_t i = 0; i < species[s].count; i++) {
            /* Called after a drift, when some have left the box. */
            double x = wrap(body_at(&species[s], i)->position[0], domain->box);
            int bin = (int)(x / domain->box * WORK_BINS);
            mine[bin < WORK_BINS ? bin : WORK_BINS - 1] += work_of(&species[s], s, i);
        }
    }
    MPI_Allreduce(mine, all, WORK_BINS, MPI_LONG_LONG, MPI_SUM, domain->comm);
    long long total = 0;
    for (int b = 0; b < WORK_BINS; b++)
        total += all[b];
    long long passed = 0;
    int next = 1;
    for (int b = 0; b < WORK_BINS; b++) {
        passed += all[b];
        while (next < domain->ranks && passed * domain->ranks >= total * next) {
            domain->edges[next] = domain->box * (b + 1) / WORK_BINS;
            next++;
        }
    }
}

static void migrate_species(const struct domain *domain, struct store *store)
{
    size_t ranks = (size_t)domain->ranks;
    int *work = allocate(4 * ranks, sizeof *work);
    int *send_count = work, *send_start = work + ranks;
    int *receive_count = work + 2 * ranks, *receive_start = work + 3 * ranks;
    struct store leaving;
    store_init(&leaving, store->item_size);

    int *owner = allocate(store->count, sizeof *owner);
    for (size_t i = 0; i < store->count; i++) {
        owner[i] = domain_owner(domain, body_at(store, i)->position[0]);
        send_count[owner[i]]++;
    }
    send_count[domain->rank] = 0;
    int total = 0;
    for (size_t r = 0; r < ranks; r++) {
        send_start[r] = total;
        total += send_count[r];
    }
    store_resize(&leaving, (size_t)total);
    size_t kept = 0;
    for (size_t i = 0; i < store->count; i++) {
        void *target = owner[i] == domain->rank ? store_at(store, kept++)
                                                : store_at(&leaving, (size_t)send_start[owner[i]]++);
        if (target != store_at(store, i))
            memcpy(target, store_at(store, i), store->item_size);
    }
    for (size_t r = 0; r < ranks; r++)
        send_start[r] -= send_count[r];

    MPI_Alltoall(send_count, 1, MPI_INT, receive_count, 1, MPI_INT, domain->comm);
    int arriving = 0;
    for (size_t r = 0; r < ranks; r++) {
        receive_start[r] = arriving;
        arriving += receive_count[r];
    }
    store_resize(store, kept + (size_t)arriving);
    MPI_Datatype item;
    MPI_Type_contiguous((int)store->item_size, MPI_BYTE, &item);
    MPI_Type_commit(&item);
    MPI_Alltoallv(leaving.items, send_count, send_start, item, store_at(store, kept), receive_count,
                  receive_start, item, domain->comm);
    MPI_Type_free(&item);
    store_free(&leaving);
    free(owner);
    free(work);
}

void domain_migrate(const struct domain *domain, struct store species[SPECIES_COUNT])
{
    for (int s = 0; s < SPECIES_COUNT; s++) {
        for (size_t i = 0; i < species[s].count; i++) {
            double *position = body_at(&species[s], i)->position;
            for (int axis = 0; axis < 3; axis++)
                position[axis] = wrap(position[axis], domain->box);
        }
        if (domain->ranks > 1)
            migrate_species(domain, &species[s]);
    }
}

struct place {
    uint64_t key;
    size_t index;
};

/* Bits of a coordinate, spread to every third bit. */
static uint64_t spread(uint64_t bits)
{
    uint64_t key = 0;
    for (int bit = 0; bit < SORT_BITS; bit++)
        key |= (bits >> bit & 1) << (3 * bit);
    return key;
}

static int by_key(const void *left, const void *right)
{
    const struct place *a = left, *b = right;
    if (a->key != b->key)
        return a->key < b->key ? -1 : 1;
    return a->index < b->index ? -1 : 1;
}

void domain_sort(const struct domain *domain, struct store species[SPECIES_COUNT])
{
    for (int s = 0; s < SPECIES_COUNT; s++) {
        struct store *store = &species[s], sorted;
        struct place *places = allocate(store->count, sizeof *places);
        for (size_t i = 0; i < store->count; i++) {
            places[i].index = i;
            for (int axis = 0; axis < 3; axis++) {
                double share = body_at(store, i)->position[axis] / domain->box;
                places[i].key |= spread((uint64_t)(share * (1 << SORT_BITS))) << axis;
            }
        }
        qsort(places, store->count, sizeof *places, by_key);
        store_init(&sorted, store->item_size);
        store_resize(&sorted, store->count);
        for (size_t i = 0; i < store->count; i++)
            memcpy(store_at(&sorted, i), store_at(store, places[i].index), store->item_size);
        store_free(store);
        *store = sorted;
        free(places);
    }
}
