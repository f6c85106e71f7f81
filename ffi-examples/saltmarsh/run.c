#include "run.h"

#include "cost.h"
#include "dump.h"
#include "initial_conditions.h"
#include "lending.h"
#include "report.h"
#include "self_test.h"
#include "step.h"

static int finished(const struct simulation *simulation)
{
    const struct parameters *parameters = &simulation->parameters;
    return simulation->clock.scale_factor >= 1.0 / (1.0 + parameters->end_redshift) ||
           (parameters->max_steps > 0 &&
            simulation->clock.step >= (uint64_t)parameters->max_steps);
}

/* What is done with the state at the end of each step, and before the first. */
static void record(const struct simulation *simulation, struct lending *lending,
                   struct history *history, struct cost *cost)
{
    const struct parameters *parameters = &simulation->parameters;
    cost_call(cost);
    lending_step(lending, simulation);
    cost_return(cost);
    history_add(history, simulation);
    if (parameters->dump_step == (int64_t)simulation->clock.step)
        dump_particles(simulation, parameters->dump_path);
}

int run(const struct parameters *parameters, int check_history)
{
    struct simulation simulation;
    struct gas_space space;
    struct history history;
    simulation_init(&simulation, MPI_COMM_WORLD, parameters);
    gas_space_init(&space, &simulation);
    history_init(&history, &simulation);
    initial_conditions(&simulation);
    first_forces(&simulation, &space);
    struct lending *lending = lending_open(&simulation);
    struct cost cost;
    cost_begin(&cost);
    record(&simulation, lending, &history, &cost);
    /* What is done once is not the cost of steps. */
    cost_begin(&cost);
    while (!finished(&simulation)) {
        advance(&simulation, &space);
        record(&simulation, lending, &history, &cost);
    }
    if (parameters->cost_path != NULL)
        cost_write(&cost, simulation.clock.step, simulation.comm, parameters->cost_path);
    lending_close(lending);
    int holds = 1;
    if (simulation.rank == 0) {
        history_close(&history, &simulation);
        if (check_history)
            holds = history_holds(&history);
    }
    MPI_Bcast(&holds, 1, MPI_INT, 0, simulation.comm);
    history_free(&history);
    gas_space_free(&space);
    simulation_free(&simulation);
    return holds;
}
