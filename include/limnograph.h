/*
 * limnograph: measures a galaxy-formation run step by step and keeps a durable time series of it.
 *
 * In short (one process; with MPI include limnograph_mpi.h and open with limno_open_mpi):
 *
 *     limno_run *run;
 *     limno_open(LIMNO_VERSION, "limnograph.toml", "box.limno", NULL, &run);      once
 *
 *     limno_mark(run, &clock);                                                     each step
 *     limno_lend(run, "gas", "mass", &gas[0].mass, n_gas, sizeof gas[0], LIMNO_F32);
 *     limno_enter(run);
 *
 *     limno_close(run);                                                            once
 *
 * Conventions
 *   - Every call returns a status; LIMNO_OK is 0. limno_last_error(run) has the text. After any status the
 *     host can go on: the library never prints, exits, or stops the host.
 *   - A call in error does nothing else than its error says; the rest of the step is still measured. What could
 *     not be measured is null in the row, never a wrong number. After a fault inside the library, or when the
 *     ranks contradict each other, the run sleeps: every call returns LIMNO_ASLEEP at once.
 *   - Structs begin with their size. Start from LIMNO_..._INIT, or zero the struct and set `size`.
 *   - The library reads lent arrays and nothing else of the host; it never writes there, and keeps nothing
 *     after limno_sound or limno_enter.
 *   - The host's floating-point control and flags are untouched when a call returns; the library's own numbers
 *     do not depend on them.
 *   - All calls of a run come from one thread at a time, with MPI from the thread that may call MPI; limno_tally
 *     may come from any thread. Several runs may be open at once.
 *   - limno_open_..., limno_enter and limno_close are collective over the communicator; limno_enter only on steps
 *     that are due, but calling it on every step on every rank is right and costs nothing.
 *
 * What the library cannot catch, and the host must see to
 *   - pointers that lead nowhere, arrays shorter than their count, arrays freed or moved while lent;
 *   - a rank that never makes a collective call that the others make: they wait for it, though not for ever;
 *   - strings without an end.
 *
 * Species: gas, star, black_hole, dark_matter, wind.
 *
 * Fields, numbers of an element, and the key under [units] in the config that states their unit:
 *   position              3 numbers                         length
 *   velocity              3 numbers                         velocity, in the form velocity_form says
 *   mass                  1 number                          mass
 *   id                    1 integer                         none
 *   star_formation_rate   1 number                          star_formation_rate
 *   internal_energy       1 number                          internal_energy (per mass)
 *   temperature           1 number                          temperature
 *   density               1 number                          density
 *   smoothing_length      1 number                          length
 *   metallicity           1 number                          none
 *   element_fraction      1 for each element of the config  none
 *   birth_mass            1 number                          mass
 *   birth_time            1 number                          as [time] birth says
 *   subgrid_mass          1 number                          mass
 *   accretion_rate        1 number                          accretion_rate
 * Floating-point fields may be lent as any scalar type, id only as an integer type. A rank with no elements of a
 * species lends them with a count of 0, or not at all.
 */


#ifndef LIMNOGRAPH_H
#define LIMNOGRAPH_H

#include <stddef.h>
#include <stdint.h>

/**
 * The version of this header, major × 10000 + minor × 100 + patch. limno_open takes it so that a host built
 * with another header is told so.
 */
#define LIMNO_VERSION 100

/**
 * What every call answers. The numbers never change; new ones may be added.
 */
enum limno_status
#if defined(__cplusplus) || __STDC_VERSION__ >= 202311L
  : int32_t
#endif // defined(__cplusplus) || __STDC_VERSION__ >= 202311L
 {
    /**
     * Done.
     */
    LIMNO_OK = 0,
    /**
     * An argument cannot be right: a null pointer, a count that disagrees, a misaligned or absurd stride,
     * a number that is not finite. The run goes on; what the argument was for did not happen.
     */
    LIMNO_BAD_ARGUMENT = 1,
    /**
     * The call does not fit here: `lend` before `mark`, `enter` without `mark`. The run goes on.
     */
    LIMNO_BAD_ORDER = 2,
    /**
     * The clock cannot be right: time not finite, outside its range, or going backwards. The run goes on.
     */
    LIMNO_BAD_CLOCK = 3,
    /**
     * A species, field or channel of that name does not exist. The run goes on.
     */
    LIMNO_UNKNOWN_NAME = 4,
    /**
     * The config cannot be read or says something impossible. Nothing was opened.
     */
    LIMNO_BAD_CONFIG = 5,
    /**
     * Header and library are of different versions. Nothing was opened.
     */
    LIMNO_BAD_VERSION = 6,
    /**
     * The MPI library is not the one this library was built with, or MPI is not initialised, or this
     * library was built without MPI. Nothing was opened.
     */
    LIMNO_BAD_MPI = 7,
    /**
     * The series cannot be opened or written. Of `limno_open…`: nothing was opened. Later: rows wait in
     * memory and writing is tried again.
     */
    LIMNO_DISK = 8,
    /**
     * A checkpoint's row was taken but is not known to be safe on disk. Told by rank 0.
     */
    LIMNO_NOT_DURABLE = 9,
    /**
     * Some numbers were not finite and were left out; everything else was measured.
     */
    LIMNO_LEFT_OUT = 10,
    /**
     * The run sleeps after a fault; the text says why. Every call returns at once and does nothing.
     */
    LIMNO_ASLEEP = 11,
    /**
     * The run was closed, or the handle was never one. Nothing happened.
     */
    LIMNO_CLOSED = 12,
    /**
     * The system refused memory or a thread.
     */
    LIMNO_NO_MEMORY = 13,
    /**
     * A fault inside the library. The run sleeps.
     */
    LIMNO_INTERNAL = 14,
};
#ifndef __cplusplus
#if __STDC_VERSION__ >= 202311L
typedef enum limno_status limno_status;
#else
typedef int32_t limno_status;
#endif // __STDC_VERSION__ >= 202311L
#endif // __cplusplus

/**
 * The type of the numbers of a lent array.
 */
enum limno_scalar
#if defined(__cplusplus) || __STDC_VERSION__ >= 202311L
  : int32_t
#endif // defined(__cplusplus) || __STDC_VERSION__ >= 202311L
 {
    /**
     * float
     */
    LIMNO_F32 = 1,
    /**
     * double
     */
    LIMNO_F64 = 2,
    /**
     * int32_t
     */
    LIMNO_I32 = 3,
    /**
     * uint32_t
     */
    LIMNO_U32 = 4,
    /**
     * int64_t
     */
    LIMNO_I64 = 5,
    /**
     * uint64_t
     */
    LIMNO_U64 = 6,
};
#ifndef __cplusplus
#if __STDC_VERSION__ >= 202311L
typedef enum limno_scalar limno_scalar;
#else
typedef int32_t limno_scalar;
#endif // __STDC_VERSION__ >= 202311L
#endif // __cplusplus

/**
 * One opened instance. A handle is only a ticket: it is never followed as a pointer, so a null, closed or
 * made-up one is answered with LIMNO_CLOSED.
 */
typedef struct limno_run limno_run;

/**
 * What a host may say when it opens a run. NULL in its place, or a zero in a member, means the default.
 */
typedef struct limno_options {
    /**
     * sizeof(limno_options).
     */
    size_t size;
    /**
     * Name of the code, kept with the series, e.g. "saltmarsh".
     */
    const char *host_name;
    /**
     * Its version, kept with the series.
     */
    const char *host_version;
    /**
     * Anything that tells this run from others, kept with the series.
     */
    const char *description;
    /**
     * Text of the config itself; `config` then only serves as a name in messages.
     */
    const char *config_text;
    /**
     * Threads that measure; 0: as the config says (1 by default: the calling thread, and no other).
     */
    int32_t threads;
    /**
     * Reserved, 0.
     */
    int32_t reserved;
} limno_options;

/**
 * What the host says about a step. Start from LIMNO_CLOCK_INIT, or zero it and set `size`.
 */
typedef struct limno_clock {
    /**
     * sizeof(limno_clock).
     */
    size_t size;
    /**
     * The host's step number. Must grow from one mark to the next; numbers may be left out.
     */
    uint64_t step;
    /**
     * The moment that the lent arrays describe, in the coordinate that the config states under [time]:
     * t in the host's time unit, the scale factor a, or ln a. Must not go back within a run, and must be the
     * same to the bit on every rank: broadcast it where ranks compute it each for itself.
     */
    double time;
    /**
     * Length of the step that ends at `time`, in the same coordinate and unit; 0 if not known.
     */
    double step_length;
    /**
     * 1 when all particles are at `time` (a host with individual time steps: only at synchronisation
     * points), else 0.
     */
    int32_t synchronised;
    /**
     * 1 when the host is about to write a checkpoint: the step is measured whatever the cadence says, and
     * its row is on disk when limno_enter returns on rank 0, or the status says that it is not.
     */
    int32_t checkpoint;
} limno_clock;

/**
 * How a field lies in the host's memory, for whatever limno_lend and its two sisters do not cover.
 *
 * The number of component c of element i stands at
 *     (char *) data + i * stride + c * component_stride,       or, when `arrays` is not NULL, at
 *     (char *) arrays[c] + i * stride.
 */
typedef struct limno_array {
    /**
     * sizeof(limno_array).
     */
    size_t size;
    /**
     * Type of the numbers: a limno_scalar.
     */
    int32_t scalar;
    /**
     * Numbers an element has: 1; 3 for position and velocity; the number of elements named in the config
     * for element_fraction.
     */
    uint32_t components;
    /**
     * First number. Ignored when `arrays` is given; may be NULL in limno_describe and when count is 0.
     */
    const void *data;
    /**
     * One pointer per component, or NULL.
     */
    const void *const *arrays;
    /**
     * Bytes from an element to the next: sizeof the struct, or of a packed element. May be negative. 0 means
     * one value (one for each component) shared by all elements.
     */
    ptrdiff_t stride;
    /**
     * Bytes from a component to the next; 0: packed. Not used with `arrays`.
     */
    ptrdiff_t component_stride;
} limno_array;

/**
 * A batch of events that no array shows: winds launched, mass returned by stars, energy injected.
 * Every pointer that is not NULL leads to `count` entries (`elements`: count × number of elements named in
 * the config, event after event; `position`: count × 3). NULL means zero, or not known.
 */
typedef struct limno_tally_batch {
    /**
     * sizeof(limno_tally_batch).
     */
    size_t size;
    /**
     * "wind", "stellar_return", "black_hole", or a name listed in the config under [channels].
     */
    const char *channel;
    /**
     * Number of events in the batch.
     */
    size_t count;
    /**
     * Mass of each event, in the host's mass unit. Amounts may be negative.
     */
    const double *mass;
    /**
     * Magnitude of its momentum, in the host's momentum unit (unless the config says otherwise: mass unit
     * times velocity unit, in the form in which velocities are kept).
     */
    const double *momentum;
    /**
     * Its energy, in the host's energy unit (unless the config says otherwise: mass unit times velocity
     * unit squared, physical).
     */
    const double *energy;
    /**
     * Mass in metals, in the host's mass unit.
     */
    const double *metals;
    /**
     * Mass in each element, in the host's mass unit.
     */
    const double *elements;
    /**
     * Where it happened, as positions are lent. Checked and reserved: no gauge uses places yet.
     */
    const double *position;
    /**
     * The particle it happened to. Reserved: no gauge uses it yet.
     */
    const uint64_t *particle_id;
    /**
     * How many numbers an event has in `elements`; 0: as many as the config names elements. Any other number
     * than that is an error, so that a host that counts otherwise is told before its arrays are read.
     */
    size_t elements_each;
} limno_tally_batch;

/**
 * How a run stands; fill `size` before the call.
 */
typedef struct limno_standing {
    /**
     * sizeof(limno_standing).
     */
    size_t size;
    /**
     * 1 when the run sleeps after a fault.
     */
    int32_t asleep;
    /**
     * Reserved.
     */
    int32_t reserved;
    /**
     * Rows that have been entered; each rank counts the rows whose reduction it has seen complete.
     */
    uint64_t rows;
    /**
     * Of these, rows known to be written (rank 0 only; elsewhere 0).
     */
    uint64_t rows_written;
    /**
     * Rows that were lost because the disk would not take them in time (rank 0 only).
     */
    uint64_t rows_lost;
    /**
     * Seconds this rank has spent in the library since the run was opened.
     */
    double seconds;
} limno_standing;

#ifdef __cplusplus
extern "C" {
#endif // __cplusplus

/**
 * The library's version, in the same form as LIMNO_VERSION.
 */
uint32_t limno_version(void);

/**
 * Opens a run of one process alone. No MPI is needed to build or run.
 *
 * `header_version`  LIMNO_VERSION
 * `config`          path of the config file, e.g. "limnograph.toml"
 * `series`          path of the series to write, a directory whose name ends in ".limno"; made if it is not
 *                   there; otherwise a new leg of it begins
 * `options`         what else the host wants to say, or NULL
 * `run`             receives the handle; NULL on failure, which no call will trip over
 *
 * On failure the text is at hand with limno_last_error(NULL).
 *
 * The host's duty:
 * Pointers must be valid or NULL.
 */
limno_status limno_open(uint32_t header_version,
                        const char *config,
                        const char *series,
                        const struct limno_options *options,
                        struct limno_run **run);

/**
 * Opens a run over the processes of a communicator, which is duplicated. Collective: every process of the
 * communicator calls it, and all get the same answer. Use limno_open_mpi of limnograph_mpi.h, which fills in
 * the last three arguments.
 *
 * `config`, `series` and `options` of rank 0 count; the others' may be NULL (their threads count each for
 * itself).
 * `communicator`        address of an MPI_Comm
 * `communicator_bytes`  sizeof(MPI_Comm)
 * `mpi`                 what mpi.h says of itself, or NULL
 *
 * The host's duty:
 * Pointers must be valid or NULL, and the communicator valid.
 */
limno_status limno_open_communicator(uint32_t header_version,
                                     const char *config,
                                     const char *series,
                                     const struct limno_options *options,
                                     const void *communicator,
                                     size_t communicator_bytes,
                                     const char *mpi,
                                     struct limno_run **run);

/**
 * As limno_open_communicator, with a Fortran communicator handle (the integer of `use mpi`, or comm%MPI_VAL of
 * `use mpi_f08`).
 *
 * The host's duty:
 * Pointers must be valid or NULL, and the communicator valid.
 */
limno_status limno_open_fortran(uint32_t header_version,
                                const char *config,
                                const char *series,
                                const struct limno_options *options,
                                int32_t communicator,
                                struct limno_run **run);

/**
 * Asks whether a step with this clock would be measured: then `*due` becomes 1, else 0. A host can save itself
 * the trouble of preparing arrays for a step that is not. Not collective; changes nothing; call it before
 * limno_mark.
 *
 * The host's duty:
 * Pointers must be valid or NULL.
 */
limno_status limno_due(const struct limno_run *run,
                       const struct limno_clock *clock,
                       int32_t *due);

/**
 * A step begins: here is its clock. Costs next to nothing when the step is not due to be measured, and so do
 * the calls up to limno_enter.
 *
 * The host's duty:
 * Pointers must be valid or NULL.
 */
limno_status limno_mark(struct limno_run *run, const struct limno_clock *clock);

/**
 * Lends an array of one number an element: `count` numbers of type `scalar` (a limno_scalar), `stride` bytes
 * from one to the next (0: one value for all).
 *
 * The array must stay as it is until its species is sounded or the step is entered. It is only read. Every
 * field of a species must be lent with the same count, also a count of 0 (data may then be NULL). What no
 * gauge reads costs nothing. Names of species and fields are listed at the top of this header.
 *
 * The host's duty:
 * `count` numbers must be readable as described, until the species is sounded or the step entered.
 */
limno_status limno_lend(struct limno_run *run,
                        const char *species,
                        const char *field,
                        const void *data,
                        size_t count,
                        ptrdiff_t stride,
                        int32_t scalar);

/**
 * Lends a vector field whose three components stand next to each other: x, y, z, then the next element
 * `stride` bytes further. Otherwise as limno_lend.
 *
 * The host's duty:
 * As limno_lend, for three numbers an element.
 */
limno_status limno_lend_vector(struct limno_run *run,
                               const char *species,
                               const char *field,
                               const void *data,
                               size_t count,
                               ptrdiff_t stride,
                               int32_t scalar);

/**
 * Lends a vector field whose components are three arrays. Otherwise as limno_lend.
 *
 * The host's duty:
 * As limno_lend, for each of the arrays.
 */
limno_status limno_lend_xyz(struct limno_run *run,
                            const char *species,
                            const char *field,
                            const void *x,
                            const void *y,
                            const void *z,
                            size_t count,
                            ptrdiff_t stride,
                            int32_t scalar);

/**
 * Lends a field laid out in any way that limno_array describes. Otherwise as limno_lend.
 *
 * The host's duty:
 * As limno_lend.
 */
limno_status limno_lend_array(struct limno_run *run,
                              const char *species,
                              const char *field,
                              const struct limno_array *array,
                              size_t count);

/**
 * Describes a layout once, so that later steps need only pointers: `*layout` receives its number, which is
 * valid as long as the run. Pointers in `array` are not followed.
 *
 * The host's duty:
 * Pointers must be valid or NULL.
 */
limno_status limno_describe(struct limno_run *run,
                            const char *species,
                            const char *field,
                            const struct limno_array *array,
                            int32_t *layout);

/**
 * Lends with a layout described before: `data` is the new address of the first number. Otherwise as limno_lend.
 *
 * The host's duty:
 * As limno_lend.
 */
limno_status limno_lend_again(struct limno_run *run,
                              int32_t layout,
                              const void *data,
                              size_t count);

/**
 * Lends with a layout described with `arrays`: one new pointer per component. Otherwise as limno_lend.
 *
 * The host's duty:
 * As limno_lend; `arrays` must hold as many pointers as the layout has components.
 */
limno_status limno_lend_again_arrays(struct limno_run *run,
                                     int32_t layout,
                                     const void *const *arrays,
                                     size_t count);

/**
 * Posts a batch of events. May be called at any time after limno_open and from any thread; amounts add up until
 * the next row, over steps that are not measured too. Give each event on one rank only.
 *
 * The host's duty:
 * Pointers must be valid or NULL.
 */
limno_status limno_tally(struct limno_run *run,
                         const struct limno_tally_batch *batch);

/**
 * Measures now what has been lent of a species and lets go of its arrays: for hosts whose arrays are scratch
 * memory or change within the step. May be called several times a step with different arrays: the step's row
 * holds the sum. The reduction still happens once, in limno_enter. Not collective.
 *
 * The host's duty:
 * What was lent must still be readable.
 */
limno_status limno_sound(struct limno_run *run, const char *species);

/**
 * The step is over: sounds what is still lent, lets go of every array, reduces, and enters the row in the log.
 * Collective on steps that are due: every rank calls it, with the same step.
 *
 * Rows are completed up to two measured steps later, so that no rank waits for another; limno_close, limno_flush,
 * and steps marked as checkpoint, complete all. What concerns all ranks alike, such as LIMNO_ASLEEP, is answered
 * from the same step on by every rank: the second measured step after the one that it follows from, or at a flush.
 *
 * The host's duty:
 * What was lent must still be readable.
 */
limno_status limno_enter(struct limno_run *run);

/**
 * Completes the rows of all steps entered so far, where limno_enter would leave up to two of them for later.
 * Collective: every rank calls it after the same limno_enter; waits until all have entered that step.
 *
 * When it returns on rank 0 these rows are with the thread that writes them: if the disk takes them they are in
 * the series within milliseconds, and then survive the end of the process. They are not yet safe from a power cut:
 * for that, mark the step as checkpoint. Needed only by hosts that look at the series while they run, or that are
 * about to do something from which they may not come back.
 *
 * The host's duty:
 * None beyond what the type says; any handle is answered.
 */
limno_status limno_flush(struct limno_run *run);

/**
 * Completes all rows, writes them, and ends the run. Collective. The handle is then closed: using it again is
 * answered with LIMNO_CLOSED. A run left open is closed when MPI is finalised.
 *
 * The host's duty:
 * None beyond what the type says; any handle is answered.
 */
limno_status limno_close(struct limno_run *run);

/**
 * The text of the last error of a run, of any thread; with NULL or a closed handle, the last error on this
 * thread, such as why limno_open failed. Never NULL; empty when there was none. Valid until this thread's next
 * call of limno_last_error.
 *
 * The host's duty:
 * None beyond what the type says; any handle is answered.
 */
const char *limno_last_error(const struct limno_run *run);

/**
 * The name of a status, e.g. "LIMNO_BAD_CLOCK". Never NULL.
 */
const char *limno_status_name(int32_t status);

/**
 * How the run stands: rows, whether they are written, whether it sleeps. Not collective.
 *
 * The host's duty:
 * Pointers must be valid or NULL.
 */
limno_status limno_how_it_stands(const struct limno_run *run, struct limno_standing *standing);

#ifdef __cplusplus
}  // extern "C"
#endif  // __cplusplus

#endif  /* LIMNOGRAPH_H */

/* Starting values for the structs that a host fills. */
#define LIMNO_CLOCK_INIT { sizeof(limno_clock), 0, 0.0, 0.0, 1, 0 }
#define LIMNO_ARRAY_INIT { sizeof(limno_array), 0, 1, NULL, NULL, 0, 0 }
#define LIMNO_TALLY_BATCH_INIT { sizeof(limno_tally_batch), NULL, 0, NULL, NULL, NULL, NULL, NULL, NULL, NULL, 0 }
#define LIMNO_OPTIONS_INIT { sizeof(limno_options), NULL, NULL, NULL, NULL, 0, 0 }
#define LIMNO_STANDING_INIT { sizeof(limno_standing), 0, 0, 0, 0, 0, 0.0 }
