/*
 * What the driver's files share: its options, the campaign and its station, and everything that is open while it runs.
 */
#ifndef QB_AGENT_DRIVER_H
#define QB_AGENT_DRIVER_H

#include <signal.h>

#include "client/agent/prekeys.h"
#include "client/agent/sink.h"
#include "client/link/follow.h"
#include "server/base/log.h"

#define DRIVER_READY_AHEAD 8 /* slots for which the recipe is fetched in advance */

struct driver_options {
	const char *campaign, *station, *sink; /* required */
	const char *state_file;                /* NULL: always observing */
	const char *home, *service, *passphrase_file;
	double contact_s; /* without contact for so long: ramp down (system clock) */
};

struct driver {
	struct driver_options opt;
	struct log log;
	struct home home;
	struct link link;
	struct follow follow;
	const struct campaign *campaign; /* owned by follow.view */
	struct custody_group group;      /* verified from the deals */
	int station;                     /* position in the plan's network */
	enum recipe_place place;         /* the station's main host or its spare */
	struct prekeys *prekeys;
	struct sink *sink;
	struct clock_source system; /* the system's clock */
	int64_t contact_ns;         /* system clock's time of the last good answer */
	int64_t ready_to;           /* recipes of slots below this one were fetched */
	struct buf *recipe;         /* owned; DRIVER_READY_AHEAD wrapped recipes, slot n at n % DRIVER_READY_AHEAD */
	volatile sig_atomic_t *stopping; /* set by a signal; NULL: never */
};

/* The station as the plan's network has it. */
static inline const struct wave_station *driver_station(const struct driver *d)
{
	return &d->campaign->plan->network->stations[d->station];
}

#endif
