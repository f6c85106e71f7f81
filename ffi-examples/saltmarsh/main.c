#include <fftw3-mpi.h>
#include <mpi.h>
#include <stdio.h>

#include "run.h"
#include "self_test.h"

static int carry_out(const struct parameters *parameters, int rank)
{
    if (parameters->test == NULL) {
        run(parameters, 0);
        return 0;
    }
    int holds = self_test(parameters->test, parameters);
    if (holds < 0 && rank == 0)
        fprintf(stderr, "saltmarsh: no test is called %s; see --help\n", parameters->test);
    return holds < 0 ? 2 : !holds;
}

int main(int argc, char **argv)
{
    if (MPI_Init(&argc, &argv) != MPI_SUCCESS)
        return 1;
    fftw_mpi_init();
    int rank;
    MPI_Comm_rank(MPI_COMM_WORLD, &rank);
    struct parameters parameters;
    parameters_default(&parameters);
    enum parse_result parsed = parameters_parse(&parameters, argc, argv, rank == 0);
    int exit_code = parsed == PARSE_WRONG ? 2 : 0;
    if (parsed == PARSE_RUN)
        exit_code = carry_out(&parameters, rank);
    fftw_mpi_cleanup();
    MPI_Finalize();
    return exit_code;
}
