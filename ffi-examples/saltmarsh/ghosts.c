#include "ghosts.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "numbers.h"

void ghosts_init(struct ghosts *ghosts, MPI_Comm comm)
{
    ghosts->comm = comm;
    MPI_Comm_rank(comm, &ghosts->rank);
    MPI_Comm_size(comm, &ghosts->ranks);
    size_t ranks = (size_t)ghosts->ranks;
    ghosts->own = 0;
    ghosts->send_count = allocate(4 * ranks, sizeof(int));
    ghosts->send_start = ghosts->send_count + ranks;
    ghosts->receive_count = ghosts->send_count + 2 * ranks;
    ghosts->receive_start = ghosts->send_count + 3 * ranks;
    store_init(&ghosts->sent, sizeof(size_t));
    store_init(&ghosts->scratch, 1);
}

void ghosts_free(struct ghosts *ghosts)
{
    free(ghosts->send_count);
    store_free(&ghosts->sent);
    store_free(&ghosts->scratch);
}

static struct element *element_at(const struct store *elements, size_t index)
{
    return (struct element *)store_at(elements, index);
}

static int within(double x, const double interval[2], double box)
{
    for (int image = -1; image <= 1; image++) {
        double place = x + image * box;
        if (place >= interval[0] && place <= interval[1])
            return 1;
    }
    return 0;
}

static void begin_exchange(struct ghosts *ghosts, size_t item_size, MPI_Datatype *item)
{
    MPI_Type_contiguous((int)item_size, MPI_BYTE, item);
    MPI_Type_commit(item);
    /* The scratch store holds items of whatever is being exchanged, counted in bytes. */
    store_resize(&ghosts->scratch, ghosts->sent.count * item_size);
}

void ghosts_refresh(struct ghosts *ghosts, struct store *elements)
{
    if (ghosts->ranks == 1)
        return;
    MPI_Datatype item;
    begin_exchange(ghosts, elements->item_size, &item);
    struct element *packed = (struct element *)(void *)ghosts->scratch.items;
    for (size_t i = 0; i < ghosts->sent.count; i++) {
        const size_t *index = store_at(&ghosts->sent, i);
        packed[i] = *element_at(elements, *index);
    }
    MPI_Alltoallv(packed, ghosts->send_count, ghosts->send_start, item,
                  store_at(elements, ghosts->own), ghosts->receive_count, ghosts->receive_start,
                  item, ghosts->comm);
    MPI_Type_free(&item);
}

void ghosts_fetch(struct ghosts *ghosts, struct store *elements, double box, double reach)
{
    ghosts->own = elements->count;
    ghosts->sent.count = 0;
    if (ghosts->ranks == 1)
        return;
    double need[2] = { INFINITY, -INFINITY };
    for (size_t i = 0; i < elements->count; i++) {
        const struct element *element = element_at(elements, i);
        need[0] = smaller(need[0], element->position[0] - reach * element->radius);
        need[1] = larger(need[1], element->position[0] + reach * element->radius);
    }
    double(*needs)[2] = allocate((size_t)ghosts->ranks, sizeof *needs);
    MPI_Allgather(need, 2, MPI_DOUBLE, needs, 2, MPI_DOUBLE, ghosts->comm);
    for (int r = 0; r < ghosts->ranks; r++) {
        ghosts->send_start[r] = (int)ghosts->sent.count;
        for (size_t i = 0; r != ghosts->rank && i < elements->count; i++) {
            if (within(element_at(elements, i)->position[0], needs[r], box)) {
                size_t *index = store_append(&ghosts->sent);
                *index = i;
            }
        }
        ghosts->send_count[r] = (int)ghosts->sent.count - ghosts->send_start[r];
    }
    free(needs);
    MPI_Alltoall(ghosts->send_count, 1, MPI_INT, ghosts->receive_count, 1, MPI_INT, ghosts->comm);
    int arriving = 0;
    for (int r = 0; r < ghosts->ranks; r++) {
        ghosts->receive_start[r] = arriving;
        arriving += ghosts->receive_count[r];
    }
    store_resize(elements, ghosts->own + (size_t)arriving);
    ghosts_refresh(ghosts, elements);
}

void ghosts_return(struct ghosts *ghosts, struct store *items, combine *take)
{
    if (ghosts->ranks == 1)
        return;
    MPI_Datatype item;
    begin_exchange(ghosts, items->item_size, &item);
    MPI_Alltoallv(store_at(items, ghosts->own), ghosts->receive_count, ghosts->receive_start, item,
                  ghosts->scratch.items, ghosts->send_count, ghosts->send_start, item,
                  ghosts->comm);
    MPI_Type_free(&item);
    for (size_t i = 0; i < ghosts->sent.count; i++) {
        const size_t *index = store_at(&ghosts->sent, i);
        take(store_at(items, *index), ghosts->scratch.items + i * items->item_size);
    }
}
