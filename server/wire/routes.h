/*
 * The one table of routes: method, path, who may call it, how large a body may be, which entry types it takes. From it
 * come dispatch, the role check (default deny), the deny test of every route and the client's request building.
 */
#ifndef QB_WIRE_ROUTES_H
#define QB_WIRE_ROUTES_H

#include <stdbool.h>
#include <stddef.h>

#include "server/wire/roles.h"

enum wire_route_id {
	R_SERVICE,
	R_PARTIES_GET,
	R_PARTIES_POST,
	R_CAMPAIGNS_GET,
	R_CAMPAIGNS_POST,
	R_CAMPAIGN,
	R_KEYGEN,
	R_SEAL,
	R_SEALER,
	R_SEALER_COLLECT,
	R_SEALER_DELIVER,
	R_CONTRIBUTIONS,
	R_REHEARSALS,
	R_RECORDS,
	R_SLOTS,
	R_SLOT,
	R_HOLDS,
	R_HOLD_LIFT,
	R_STOPS,
	R_STOP_LIFT,
	R_SEGMENTS,
	R_WITNESSES,
	R_PREKEYS,
	R_RECIPE,
	R_RECIPE_KEY,
	R_NOTES,
	R_REPORT,
	R_CLAIMS_POST,
	R_CLAIMS_GET,
	R_CLAIM_WITHDRAW,
	R_CLAIM_MILESTONES,
	R_GUESSES,
	R_INCIDENTS,
	R_RECEIPTS,
	R_CLOSE,
	R_ABANDON,
	R_SIGNATURES,
	R_OPENINGS_POST,
	R_OPENINGS_GET,
	R_OPENING,
	R_OPENING_SHARES,
	R_BUNDLE,
	R_HEAD,
	R_ENTRIES,
	R_INCLUSION,
	R_CONSISTENCY,
	R_COSIGNATURES,
	R_CLOCK,
	R_EVENTS,
	R_METRICS,
	R_HEALTHZ,
	R_READYZ,
	R_BOARD,
	R_COUNT
};

struct wire_route {
	enum wire_route_id id;
	const char *method;  /* GET or POST */
	const char *path;    /* "/v1/campaigns/{c}/slots/{n}": a {word} takes one segment of [A-Za-z0-9._-]{1,80} */
	unsigned roles;      /* bit set; ROLE_NONE in it: no signature needed */
	bool in_campaign;    /* the role is the party's role in the campaign's plan (the administrator keeps his) */
	size_t body_limit;   /* bytes; 0: no body accepted */
	const char *entries; /* entry types accepted, separated by blanks; "" when the body carries none */
	const char *help;
};

#define WIRE_MAX_PARTS 4
struct wire_match {
	const struct wire_route *route;
	char parts[WIRE_MAX_PARTS][81]; /* the {word} segments in order */
};

const struct wire_route *wire_routes(void); /* R_COUNT of them, indexed by id */
/* The route of a method and path (without query). *path_known tells 405 from 404. */
bool wire_route_match(const char *method, const char *path, struct wire_match *out, bool *path_known);

#endif
