#include "mesh.h"

#include <stdlib.h>
#include <string.h>

void mesh_init(struct mesh *mesh, MPI_Comm comm, int cells, double box)
{
    mesh->comm = comm;
    MPI_Comm_rank(comm, &mesh->rank);
    MPI_Comm_size(comm, &mesh->ranks);
    mesh->cells = cells;
    mesh->row = 2 * (cells / 2 + 1);
    mesh->box = box;
    ptrdiff_t complex_count =
        fftw_mpi_local_size_3d_transposed(cells, cells, cells / 2 + 1, comm, &mesh->planes,
                                          &mesh->first_plane, &mesh->columns, &mesh->first_column);
    mesh->field = fftw_alloc_real(2 * (size_t)(complex_count > 0 ? complex_count : 1));
    if (mesh->field == NULL)
        fatal("out of memory for the mesh; try a smaller one (--mesh)");
    /* Plans by estimate: measured ones differ from run to run, and so would the last digits. */
    fftw_complex *modes = (fftw_complex *)mesh->field;
    mesh->forward = fftw_mpi_plan_dft_r2c_3d(cells, cells, cells, mesh->field, modes, comm,
                                             FFTW_ESTIMATE | FFTW_MPI_TRANSPOSED_OUT);
    mesh->backward = fftw_mpi_plan_dft_c2r_3d(cells, cells, cells, modes, mesh->field, comm,
                                              FFTW_ESTIMATE | FFTW_MPI_TRANSPOSED_IN);
    if (mesh->forward == NULL || mesh->backward == NULL)
        fatal("FFTW cannot plan a transform of this mesh");

    int mine[2] = { (int)mesh->first_plane, (int)mesh->planes };
    int *all = allocate(2 * (size_t)mesh->ranks, sizeof *all);
    MPI_Allgather(mine, 2, MPI_INT, all, 2, MPI_INT, comm);
    mesh->owner = allocate((size_t)cells, sizeof *mesh->owner);
    for (int r = 0; r < mesh->ranks; r++) {
        for (int p = 0; p < all[2 * r + 1]; p++)
            mesh->owner[all[2 * r] + p] = r;
    }
    free(all);
    store_init(&mesh->sent, sizeof(double));
    store_init(&mesh->received, sizeof(double));
    store_init(&mesh->lent, sizeof(double));
}

void mesh_free(struct mesh *mesh)
{
    store_free(&mesh->sent);
    store_free(&mesh->received);
    store_free(&mesh->lent);
    fftw_destroy_plan(mesh->forward);
    fftw_destroy_plan(mesh->backward);
    fftw_free(mesh->field);
    free(mesh->owner);
}

void mesh_clear(struct mesh *mesh)
{
    size_t count = (size_t)(mesh->planes * mesh->cells * mesh->row);
    memset(mesh->field, 0, count * sizeof *mesh->field);
}

void mesh_for_each_mode(struct mesh *mesh, visit_mode *visit, void *context)
{
    int cells = (int)mesh->cells, half = cells / 2;
    double complex *mode = (double complex *)mesh->field;
    for (ptrdiff_t column = 0; column < mesh->columns; column++) {
        int y = (int)(mesh->first_column + column);
        for (int x = 0; x < cells; x++) {
            for (int z = 0; z <= half; z++) {
                int wave[3] = { x > half ? x - cells : x, y > half ? y - cells : y, z };
                visit(context, wave, mode++);
            }
        }
    }
}

/* One exchange of planes: counts are of planes, ordered by the plane's unwrapped number. */
struct traffic {
    int *mine_count, *mine_start;   /* my planes, by the rank that owns them */
    int *owned_count, *owned_start; /* planes I own, by the rank that works on them */
    int owned_total;
    int *bounds;                    /* first and count of every rank */
    int *memory;
    MPI_Datatype plane;
};

static int wrapped(const struct mesh *mesh, ptrdiff_t plane)
{
    return (int)(((plane % mesh->cells) + mesh->cells) % mesh->cells);
}

static void traffic_plan(struct traffic *traffic, const struct mesh *mesh,
                         const struct planes *planes)
{
    size_t ranks = (size_t)mesh->ranks;
    traffic->memory = allocate(6 * ranks, sizeof *traffic->memory);
    traffic->mine_count = traffic->memory;
    traffic->mine_start = traffic->memory + ranks;
    traffic->owned_count = traffic->memory + 2 * ranks;
    traffic->owned_start = traffic->memory + 3 * ranks;
    traffic->bounds = traffic->memory + 4 * ranks;
    int mine[2] = { (int)planes->first, (int)planes->count };
    MPI_Allgather(mine, 2, MPI_INT, traffic->bounds, 2, MPI_INT, mesh->comm);
    for (int r = 0; r < mesh->ranks; r++) {
        for (int p = 0; p < traffic->bounds[2 * r + 1]; p++) {
            int owner = mesh->owner[wrapped(mesh, traffic->bounds[2 * r] + p)];
            if (owner == mesh->rank)
                traffic->owned_count[r]++;
            if (r == mesh->rank)
                traffic->mine_count[owner]++;
        }
    }
    int mine_total = 0;
    traffic->owned_total = 0;
    for (int r = 0; r < mesh->ranks; r++) {
        traffic->mine_start[r] = mine_total;
        traffic->owned_start[r] = traffic->owned_total;
        mine_total += traffic->mine_count[r];
        traffic->owned_total += traffic->owned_count[r];
    }
    MPI_Type_contiguous((int)(mesh->cells * mesh->cells), MPI_DOUBLE, &traffic->plane);
    MPI_Type_commit(&traffic->plane);
}

static void traffic_free(struct traffic *traffic)
{
    MPI_Type_free(&traffic->plane);
    free(traffic->memory);
}

static double *field_row(const struct mesh *mesh, int plane, ptrdiff_t y)
{
    return mesh->field + ((plane - mesh->first_plane) * mesh->cells + y) * mesh->row;
}

void mesh_collect(struct mesh *mesh, const struct planes *planes)
{
    struct traffic traffic;
    traffic_plan(&traffic, mesh, planes);
    size_t plane_size = (size_t)(mesh->cells * mesh->cells);
    store_resize(&mesh->sent, (size_t)planes->count * plane_size);
    store_resize(&mesh->received, (size_t)traffic.owned_total * plane_size);
    double *sent = store_at(&mesh->sent, 0), *received = store_at(&mesh->received, 0);
    int *next = allocate((size_t)mesh->ranks, sizeof *next);
    for (ptrdiff_t p = 0; p < planes->count; p++) {
        int owner = mesh->owner[wrapped(mesh, planes->first + p)];
        size_t slot = (size_t)(traffic.mine_start[owner] + next[owner]++);
        memcpy(sent + slot * plane_size, planes->values + (size_t)p * plane_size,
               plane_size * sizeof *sent);
    }
    MPI_Alltoallv(sent, traffic.mine_count, traffic.mine_start, traffic.plane, received,
                  traffic.owned_count, traffic.owned_start, traffic.plane, mesh->comm);
    const double *value = received;
    for (int r = 0; r < mesh->ranks; r++) {
        for (int p = 0; p < traffic.bounds[2 * r + 1]; p++) {
            int plane = wrapped(mesh, traffic.bounds[2 * r] + p);
            if (mesh->owner[plane] != mesh->rank)
                continue;
            for (ptrdiff_t y = 0; y < mesh->cells; y++) {
                double *row = field_row(mesh, plane, y);
                for (ptrdiff_t z = 0; z < mesh->cells; z++)
                    row[z] += *value++;
            }
        }
    }
    free(next);
    traffic_free(&traffic);
}

void mesh_share(struct mesh *mesh, struct planes *planes)
{
    struct traffic traffic;
    traffic_plan(&traffic, mesh, planes);
    size_t plane_size = (size_t)(mesh->cells * mesh->cells);
    size_t row_size = (size_t)mesh->cells;
    store_resize(&mesh->sent, (size_t)traffic.owned_total * plane_size);
    store_resize(&mesh->received, (size_t)planes->count * plane_size);
    double *sent = store_at(&mesh->sent, 0), *received = store_at(&mesh->received, 0);
    int *next = allocate((size_t)mesh->ranks, sizeof *next);
    double *value = sent;
    for (int r = 0; r < mesh->ranks; r++) {
        for (int p = 0; p < traffic.bounds[2 * r + 1]; p++) {
            int plane = wrapped(mesh, traffic.bounds[2 * r] + p);
            if (mesh->owner[plane] != mesh->rank)
                continue;
            for (ptrdiff_t y = 0; y < mesh->cells; y++) {
                memcpy(value, field_row(mesh, plane, y), row_size * sizeof *value);
                value += row_size;
            }
        }
    }
    MPI_Alltoallv(sent, traffic.owned_count, traffic.owned_start, traffic.plane, received,
                  traffic.mine_count, traffic.mine_start, traffic.plane, mesh->comm);
    for (ptrdiff_t p = 0; p < planes->count; p++) {
        int owner = mesh->owner[wrapped(mesh, planes->first + p)];
        size_t slot = (size_t)(traffic.mine_start[owner] + next[owner]++);
        memcpy(planes->values + (size_t)p * plane_size, received + slot * plane_size,
               plane_size * sizeof *received);
    }
    free(next);
    traffic_free(&traffic);
}
