/* A cubic mesh whose planes are dealt out as FFTW likes them, and the exchange of planes with
 * ranks whose particles lie elsewhere. */
#ifndef SALTMARSH_MESH_H
#define SALTMARSH_MESH_H

#include <complex.h>
#include <fftw3-mpi.h>
#include <mpi.h>

#include "memory.h"

struct mesh {
    MPI_Comm comm;
    int rank;
    int ranks;
    ptrdiff_t cells;        /* per side */
    ptrdiff_t row;          /* reals per row in memory: FFTW pads the last axis */
    double box;
    ptrdiff_t first_plane;  /* planes of x that this rank transforms */
    ptrdiff_t planes;
    ptrdiff_t first_column; /* after a forward transform: lines of k_y that this rank holds */
    ptrdiff_t columns;
    int *owner;             /* rank that transforms each plane */
    double *field;          /* [planes][cells][row]; the modes after a forward transform */
    struct store sent;      /* scratch for planes in transit, of doubles */
    struct store received;
    struct store lent;      /* memory for the planes that particles of this rank touch */
    fftw_plan forward;
    fftw_plan backward;
};

void mesh_init(struct mesh *mesh, MPI_Comm comm, int cells, double box);
void mesh_free(struct mesh *mesh);

/* Sets what this rank transforms to zero. */
void mesh_clear(struct mesh *mesh);

/* Calls visit for every mode held here, with its integer wavenumbers in (-cells/2, cells/2]. */
typedef void visit_mode(void *context, const int wave[3], double complex *mode);
void mesh_for_each_mode(struct mesh *mesh, visit_mode *visit, void *context);

/* A stretch of planes that a rank works on: unwrapped, so first may be negative and the stretch
 * may pass the end of the box. values is [count][cells][cells]. */
struct planes {
    ptrdiff_t first;
    ptrdiff_t count;
    double *values;
};

/* Adds every rank's planes to those of their owners. Collective. */
void mesh_collect(struct mesh *mesh, const struct planes *planes);

/* Fills every rank's planes from their owners. Collective. */
void mesh_share(struct mesh *mesh, struct planes *planes);

#endif
