/* How large the structs of limnograph.h are and where their members stand, asked for by name. */
#include "limnograph.h"
#include <stdio.h>
#include <string.h>

struct place {
    const char *name;
    size_t offset, size;
};

#define STRUCT(type) { #type, 0, sizeof(type) }
#define MEMBER(type, member)                                                                     \
    { #type "." #member, offsetof(type, member), sizeof ((type *)0)->member }

static const struct place places[] = {
    STRUCT(limno_options),
    MEMBER(limno_options, size),
    MEMBER(limno_options, host_name),
    MEMBER(limno_options, host_version),
    MEMBER(limno_options, description),
    MEMBER(limno_options, config_text),
    MEMBER(limno_options, threads),
    STRUCT(limno_clock),
    MEMBER(limno_clock, size),
    MEMBER(limno_clock, step),
    MEMBER(limno_clock, time),
    MEMBER(limno_clock, step_length),
    MEMBER(limno_clock, synchronised),
    MEMBER(limno_clock, checkpoint),
    STRUCT(limno_array),
    MEMBER(limno_array, size),
    MEMBER(limno_array, scalar),
    MEMBER(limno_array, components),
    MEMBER(limno_array, data),
    MEMBER(limno_array, arrays),
    MEMBER(limno_array, stride),
    MEMBER(limno_array, component_stride),
    STRUCT(limno_tally_batch),
    MEMBER(limno_tally_batch, size),
    MEMBER(limno_tally_batch, channel),
    MEMBER(limno_tally_batch, count),
    MEMBER(limno_tally_batch, mass),
    MEMBER(limno_tally_batch, momentum),
    MEMBER(limno_tally_batch, energy),
    MEMBER(limno_tally_batch, metals),
    MEMBER(limno_tally_batch, elements),
    MEMBER(limno_tally_batch, position),
    MEMBER(limno_tally_batch, particle_id),
    MEMBER(limno_tally_batch, elements_each),
    STRUCT(limno_standing),
    MEMBER(limno_standing, size),
    MEMBER(limno_standing, asleep),
    MEMBER(limno_standing, rows),
    MEMBER(limno_standing, rows_written),
    MEMBER(limno_standing, rows_lost),
    MEMBER(limno_standing, seconds),
};

static const struct place *find(const char *name)
{
    for (size_t index = 0; index < sizeof places / sizeof places[0]; index++) {
        if (strcmp(places[index].name, name) == 0)
            return &places[index];
    }
    fprintf(stderr, "broken: %s is not in layouts.c\n", name);
    return NULL;
}

intptr_t offset_in_c(const char *name)
{
    const struct place *place = find(name);
    return place != NULL ? (intptr_t)place->offset : -1;
}

intptr_t size_in_c(const char *name)
{
    const struct place *place = find(name);
    return place != NULL ? (intptr_t)place->size : -1;
}

/* The functions' types too: with these a changed argument of a function is an error here. */
typedef limno_status open_alone(uint32_t, const char *, const char *, const limno_options *,
                                limno_run **);
typedef limno_status open_fortran(uint32_t, const char *, const char *, const limno_options *,
                                  int32_t, limno_run **);
typedef limno_status due(const limno_run *, const limno_clock *, int32_t *);
typedef limno_status mark(limno_run *, const limno_clock *);
typedef limno_status lend(limno_run *, const char *, const char *, const limno_array *, size_t);
typedef limno_status tally(limno_run *, const limno_tally_batch *);
typedef limno_status sound(limno_run *, const char *);
typedef limno_status plain(limno_run *);
typedef limno_status stands(const limno_run *, limno_standing *);
typedef const char *last_error(const limno_run *);
typedef const char *status_name(int32_t);
typedef uint32_t version(void);

extern open_alone limno_open;
extern open_fortran limno_open_fortran;
extern due limno_due;
extern mark limno_mark;
extern lend limno_lend_array;
extern tally limno_tally;
extern sound limno_sound;
extern plain limno_enter, limno_flush, limno_close;
extern stands limno_how_it_stands;
extern last_error limno_last_error;
extern status_name limno_status_name;
extern version limno_version;
