/*
 * A process whose MPI library is not the one that was built against is told so, by both names and with what to do, before
 * any handle of that library is looked at.
 *
 * ranks: 1 2
 */
#define _GNU_SOURCE
#include <limnograph_mpi.h>

#include "check.h"

static const char *says;

/* Stands before that of the true library. */
int MPI_Get_library_version(char *version, int *length)
{
    strcpy(version, says);
    *length = (int)strlen(says);
    return MPI_SUCCESS;
}

static void test(void)
{
    limno_options options = options_with(check_config);
    limno_run *run = (limno_run *)8;
    MPI_Comm nonsense = (MPI_Comm)(uintptr_t)0x44000000; /* what MPICH calls the world */
    says = "MPICH Version:      4.0.2\nMPICH Release date: Thu Apr  7 12:34:45 CDT 2022\n";
    REFUSED(NULL, limno_open_mpi(LIMNO_VERSION, "c", series_path("other"), &options, nonsense, &run), LIMNO_BAD_MPI,
            "MPICH 4.0", "Open MPI", "MPICC");
    CHECK(run == NULL, "a handle after a failure");
    run = (limno_run *)8;
    REFUSED(NULL, limno_open_fortran(LIMNO_VERSION, "c", series_path("other"), &options, 0x44000000, &run), LIMNO_BAD_MPI, "MPICH 4.0");
    CHECK(run == NULL, "a handle after a failure");
    says = "Intel(R) MPI Library 2021.9 for Linux* OS\n";
    REFUSED(NULL, limno_open_mpi(LIMNO_VERSION, "c", series_path("other"), &options, nonsense, &run), LIMNO_BAD_MPI, "Intel MPI 2021.9");
    says = "Open MPI v5.0.3, package: Open MPI builder@host, ident: 5.0.3";
    REFUSED(NULL, limno_open_mpi(LIMNO_VERSION, "c", series_path("other"), &options, nonsense, &run), LIMNO_BAD_MPI, "Open MPI 5.0");
    says = "";
    REFUSED(NULL, limno_open_mpi(LIMNO_VERSION, "c", series_path("other"), &options, nonsense, &run), LIMNO_BAD_MPI, "unknown make");
    /* Alone nothing of it matters. */
    char name[32];
    snprintf(name, sizeof name, "alone%d", check_rank);
    run = open_alone(check_config, name);
    EXPECT(run, limno_close(run), LIMNO_OK);
}
