/* Saltmarsh: a small universe of its own, in C99 and MPI.
 *
 * What it shows. A real, if small, galaxy-formation code that lends its arrays to limnograph at
 * every step: arrays of structs in units with h, particles that move between ranks, gas that turns
 * into stars and black holes, winds and heating that no array shows. All contact with the library
 * is in lending.c; the rest is the host, and knows nothing of it.
 *
 * What it does. A periodic box in a flat universe whose parameters are invented, close to the
 * usual ones. A Gaussian field from a published transfer function is set moving by the Zel'dovich
 * approximation. Gravity is by particle mesh; gas is smoothed particles with pressure, shocks and
 * cooling; dense gas forms stars; stars drive winds and give back metals; black holes are seeded,
 * accrete, heat and merge. The whole box takes one step at a time, as long as gas and gravity
 * allow.
 *
 * Build (the library's folder first; or add -DSALTMARSH_PLAIN and leave limnograph out):
 *
 *   mpicc -std=c99 -O3 -I include ffi-examples/saltmarsh/[a-z]*.c -o saltmarsh \
 *         -L target/lib -llimnograph_mpi -lfftw3_mpi -lfftw3 -lm
 *
 * Three commands to try:
 *
 *   mpirun -n 2 saltmarsh --config ffi-examples/saltmarsh/limnograph.toml --series marsh.limno
 *   mpirun -n 2 saltmarsh --variant cordgrass --history strong_winds.txt
 *   mpirun -n 2 saltmarsh --test growth
 *
 * Others: --help; --test history and --test conservation; --steps-at-least 10000 --side 16
 * --mesh 40 for a long series in a few minutes; --dump STEP FILE (layout: dump.h).
 *
 * What is simplified. Read the numbers as those of an example, not of a prediction:
 *   - Forces are soft below two mesh cells, so galaxies are clumps without inner structure, and gas
 *     is kept from contracting further by a least kernel radius and a Jeans pressure. Thresholds
 *     for stars and holes are set low to match the densities such clumps reach.
 *   - The smallest haloes hold a few dozen particles; star formation begins late, at z = 5 or so.
 *   - The box is small: its own longest waves become nonlinear by the end.
 *   - Gas has one molecular weight; cooling is three power laws, without background radiation but
 *     for a floor of 1e4 K from reionisation on, which is a given redshift.
 *   - Stars are whole gas particles; a quarter of the mass and all new metals return at once.
 *   - Winds pick a direction at random and pass through dense gas without pressure for a time, so
 *     each kick gives momentum to the box; on average none. Everything else keeps momentum.
 *   - Accretion is boosted for unresolved density. Black holes are led to the bottom of their
 *     potential. The rest mass they radiate away stays in them, so that baryon mass is conserved
 *     exactly: it is moved in whole particles and in fixed fractions of one, without rounding.
 *   - Mass, stars and holes are the same on any number of ranks up to rounding, which a chaotic
 *     system makes grow: histories agree in their course, not in their digits.
 */
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
