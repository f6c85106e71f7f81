/* What happens between particles and shows in no array: kept for one step, to be recorded. */
#ifndef SALTMARSH_EVENTS_H
#define SALTMARSH_EVENTS_H

#include <stdint.h>

enum channel { WIND_LAUNCH, STELLAR_RETURN, HOLE_HEATING, CHANNEL_COUNT };

struct event {
    enum channel channel;
    uint64_t id;        /* the particle it happened to */
    double mass;
    double momentum;    /* given by the event: mass times the change of the stored velocity */
    double energy;      /* physical, mass times (km/s)^2 */
    double metals;      /* mass */
    double position[3];
};

#endif
