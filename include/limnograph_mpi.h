/*
 * limnograph_mpi.h: the entry points that need mpi.h. Link with liblimnograph_mpi instead of liblimnograph.
 */
#ifndef LIMNOGRAPH_MPI_H
#define LIMNOGRAPH_MPI_H

#include <mpi.h>

#include "limnograph.h"

/* What this mpi.h says of itself, so that a mixture of two MPI libraries is refused and not tried. */
#define LIMNO_MPI_STRING_(x) #x
#define LIMNO_MPI_STRING(x) LIMNO_MPI_STRING_(x)
#if defined(CRAY_MPICH_VERSION) /* descendants first: they also define what they descend from */
#define LIMNO_MPI_IDENTITY "Cray MPICH " LIMNO_MPI_STRING(CRAY_MPICH_VERSION)
#elif defined(I_MPI_VERSION)
#define LIMNO_MPI_IDENTITY "Intel MPI " LIMNO_MPI_STRING(I_MPI_VERSION)
#elif defined(MVAPICH2_VERSION)
#define LIMNO_MPI_IDENTITY "MVAPICH2 " LIMNO_MPI_STRING(MVAPICH2_VERSION)
#elif defined(MVAPICH_VERSION)
#define LIMNO_MPI_IDENTITY "MVAPICH " LIMNO_MPI_STRING(MVAPICH_VERSION)
#elif defined(OMPI_MAJOR_VERSION)
#define LIMNO_MPI_IDENTITY "Open MPI " LIMNO_MPI_STRING(OMPI_MAJOR_VERSION) "." LIMNO_MPI_STRING(OMPI_MINOR_VERSION)
#elif defined(MPICH_VERSION)
#define LIMNO_MPI_IDENTITY "MPICH " LIMNO_MPI_STRING(MPICH_VERSION)
#else
#define LIMNO_MPI_IDENTITY ""
#endif

#ifdef __cplusplus
extern "C" {
#endif

/*
 * Opens a run over the processes of a communicator. Collective; every process gets the same answer, also when it
 * is an error. The communicator is duplicated and errors are returned on the duplicate; the host's own is left as
 * it is. MPI must be initialised, at any level of thread support, and is only called from the calling thread.
 * Arguments as for limno_open; those of rank 0 count, except `options->threads`.
 */
static inline limno_status limno_open_mpi(uint32_t header_version, const char *config, const char *series,
                                          const limno_options *options, MPI_Comm communicator, limno_run **run)
{
    return limno_open_communicator(header_version, config, series, options, &communicator, sizeof communicator,
                                   LIMNO_MPI_IDENTITY, run);
}

#ifdef __cplusplus
}
#endif

#endif /* LIMNOGRAPH_MPI_H */
