/* A host that carries another library written in Rust, and records a run. */
#include <limnograph.h>
#include <stdio.h>
#include <string.h>

uint64_t other_calls(void);

int main(int argc, char **argv)
{
    limno_run *run = NULL;
    float mass[2] = {1.0f, 2.0f};
    limno_clock clock = LIMNO_CLOCK_INIT;
    int right;
    if (argc != 3)
        return 2;
    /* The text of this error is kept for the thread that made it. */
    right = limno_open(LIMNO_VERSION, "no/such/config.toml", argv[2], NULL, &run) != LIMNO_OK;
    right = right && strstr(limno_last_error(NULL), "no/such/config.toml") != NULL;
    right = right && other_calls() == 1;
    right = right && limno_open(LIMNO_VERSION, argv[1], argv[2], NULL, &run) == LIMNO_OK;
    clock.step = 1, clock.time = 1.0;
    right = right && limno_mark(run, &clock) == LIMNO_OK;
    right = right && limno_lend(run, "gas", "mass", mass, 2, sizeof mass[0], LIMNO_F32) == LIMNO_OK;
    limno_enter(run); /* gauges that lack fields say so; that is not looked at here */
    right = right && other_calls() == 2;
    right = right && limno_close(run) == LIMNO_OK;
    if (!right)
        fprintf(stderr, "went wrong: %s\n", limno_last_error(NULL));
    return right ? 0 : 1;
}
