/* The least a host with MPI needs. */
#include <limnograph_mpi.h>
#include <stdio.h>

int main(int argc, char **argv)
{
    limno_run *run = NULL;
    float mass[2] = {1.0f, 2.0f};
    limno_clock clock = LIMNO_CLOCK_INIT;
    int right;
    MPI_Init(&argc, &argv);
    if (argc != 3)
        MPI_Abort(MPI_COMM_WORLD, 2);
    right = limno_open_mpi(LIMNO_VERSION, argv[1], argv[2], NULL, MPI_COMM_WORLD, &run) == LIMNO_OK;
    if (!right)
        fprintf(stderr, "cannot open: %s\n", limno_last_error(NULL));
    for (int step = 1; step <= 3; step++) {
        clock.step = (uint64_t)step, clock.time = 0.1 * step;
        right = right && limno_mark(run, &clock) == LIMNO_OK;
        right = right && limno_lend(run, "gas", "mass", mass, 2, sizeof mass[0], LIMNO_F32) == LIMNO_OK;
        limno_enter(run);
    }
    right = limno_close(run) == LIMNO_OK && right;
    MPI_Finalize();
    return right ? 0 : 1;
}
