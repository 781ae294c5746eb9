/* The table of routes, and matching a path against it. */
#include "server/wire/routes.h"

#include <string.h>

#define KIB  ((size_t)1024)
#define MIB  ((size_t)1 << 20)
#define B(r) ROLE_BIT(ROLE_##r)
/* Everybody with a part in a campaign may see its public side. */
#define MEMBERS                                                                                                        \
	(B(ADMINISTRATOR) | B(CUSTODIAN) | B(OPERATOR) | B(DRIVER) | B(ANALYST) | B(REVIEWER) | B(LIAISON) | B(AUDITOR))

static const struct wire_route routes[R_COUNT] = {
    {R_SERVICE, "GET", "/v1/service", ROLES_ANYONE, false, 0, "", "Version, service key, clock, newest head"},
    {R_PARTIES_GET, "GET", "/v1/parties", ROLES_ENROLLED, false, 0, "", "Lists the enrolled parties"},
    {R_PARTIES_POST, "POST", "/v1/parties", ROLES_ANYONE, false, 64 * KIB,
     "invitation enrolment same-person key-rotation vouch retirement",
     "Invites a party (administrator), enrols with a code, replaces keys, vouches, retires"},
    {R_CAMPAIGNS_GET, "GET", "/v1/campaigns", ROLES_ENROLLED, false, 0, "", "Lists the campaigns ever drafted"},
    {R_CAMPAIGNS_POST, "POST", "/v1/campaigns", B(ADMINISTRATOR) | B(CUSTODIAN), false, 24 * MIB, "plan",
     "Drafts a campaign from a plan"},
    {R_CAMPAIGN, "GET", "/v1/campaigns/{c}", MEMBERS, true, 0, "", "State, keys and counts that reveal nothing"},
    {R_KEYGEN, "POST", "/v1/campaigns/{c}/keygen/{round}", B(CUSTODIAN) | B(ADMINISTRATOR), true, 256 * KIB,
     "deal certify keygen-failed complaint exclusion contribution-commitment rehearsal-request reshare-request "
     "reshare-deal reshare-complaint reshare-failed reshare-certify share-erased repair-request repair-split "
     "repair-sum "
     "repair-failed repaired",
     "One message about the shares of the group key"},
    {R_SEAL, "POST", "/v1/campaigns/{c}/seal", B(ADMINISTRATOR), true, 16 * KIB, "seal-request", "Starts the sealer"},
    {R_SEALER, "GET", "/v1/campaigns/{c}/sealer", MEMBERS, true, 0, "", "Progress of the sealing"},
    {R_SEALER_COLLECT, "GET", "/v1/campaigns/{c}/sealer/messages", B(ADMINISTRATOR), true, 0, "",
     "Messages to a sealer on another machine"},
    {R_SEALER_DELIVER, "POST", "/v1/campaigns/{c}/sealer/messages", B(ADMINISTRATOR), true, 48 * MIB, "",
     "Messages from it"},
    {R_CONTRIBUTIONS, "POST", "/v1/campaigns/{c}/sealer/contributions", B(CUSTODIAN), true, 16 * KIB, "contribution",
     "A custodian's contribution to the draw, encrypted to the sealer"},
    {R_REHEARSALS, "POST", "/v1/campaigns/{c}/sealer/rehearsals", B(CUSTODIAN), true, 16 * KIB,
     "rehearsal reshare-rehearsal", "A custodian's opening of the canary"},
    {R_RECORDS, "GET", "/v1/campaigns/{c}/records", MEMBERS, true, 0, "",
     "Sealed records: custodians always, others after closing"},
    {R_SLOTS, "GET", "/v1/campaigns/{c}/slots", MEMBERS, true, 0, "", "The schedule, paged"},
    {R_SLOT, "GET", "/v1/campaigns/{c}/slots/{n}", MEMBERS, true, 0, "", "One slot"},
    {R_HOLDS, "POST", "/v1/campaigns/{c}/holds", B(OPERATOR), true, 16 * KIB, "hold", "Holds a station"},
    {R_HOLD_LIFT, "POST", "/v1/campaigns/{c}/holds/{h}/lift", B(OPERATOR), true, 16 * KIB, "hold-lift", "Lifts a hold"},
    {R_STOPS, "POST", "/v1/campaigns/{c}/stops", B(OPERATOR), true, 16 * KIB, "stop", "Stops the drive at once"},
    {R_STOP_LIFT, "POST", "/v1/campaigns/{c}/stops/{s}/lift", B(OPERATOR), true, 16 * KIB, "stop-lift", "Lifts a stop"},
    {R_SEGMENTS, "POST", "/v1/campaigns/{c}/segments", B(OPERATOR) | B(DRIVER), true, 8 * MIB, "segments",
     "States observing, veto or noise segments"},
    {R_WITNESSES, "POST", "/v1/campaigns/{c}/witnesses", B(OPERATOR) | B(DRIVER), true, 16 * KIB, "witness-statement",
     "States what could tell live from null at a station"},
    {R_PREKEYS, "POST", "/v1/campaigns/{c}/prekeys", B(DRIVER), true, 64 * MIB, "prekeys",
     "One-time keys of a driver, in advance"},
    {R_RECIPE, "GET", "/v1/campaigns/{c}/recipes/{n}", B(DRIVER), true, 0, "", "This driver's wrapped recipe"},
    {R_RECIPE_KEY, "GET", "/v1/campaigns/{c}/recipes/{n}/key", B(DRIVER), true, 0, "",
     "The slot key, from start - lead on"},
    {R_NOTES, "POST", "/v1/campaigns/{c}/recipes/{n}/notes", B(DRIVER), true, 64 * KIB, "play-note",
     "The driver's sealed minute note"},
    {R_REPORT, "POST", "/v1/campaigns/{c}/recipes/{n}/report", B(DRIVER), true, 64 * KIB, "play-report",
     "The driver's sealed report"},
    {R_CLAIMS_POST, "POST", "/v1/campaigns/{c}/claims", B(ANALYST), true, 256 * KIB, "claim", "Submits a sealed claim"},
    {R_CLAIMS_GET, "GET", "/v1/campaigns/{c}/claims", B(ANALYST), true, 0, "", "The analyst's own receipts"},
    {R_CLAIM_WITHDRAW, "POST", "/v1/campaigns/{c}/claims/{id}/withdraw", B(ANALYST), true, 16 * KIB, "claim-withdrawal",
     "Withdraws a claim"},
    {R_CLAIM_MILESTONES, "POST", "/v1/campaigns/{c}/claims/{id}/milestones", B(ANALYST), true, 64 * KIB, "milestone",
     "Files a step of the response"},
    {R_GUESSES, "POST", "/v1/campaigns/{c}/guesses", B(OPERATOR) | B(ANALYST), true, 64 * KIB, "guess",
     "Submits a sealed guess about a slot to come"},
    {R_INCIDENTS, "POST", "/v1/campaigns/{c}/incidents", MEMBERS, true, 64 * KIB, "incident",
     "Reports a break of the blind, sealed until the opening"},
    {R_RECEIPTS, "GET", "/v1/campaigns/{c}/receipts", MEMBERS, true, 0, "",
     "One's own receipts of sealed entries, and the next sequence number"},
    {R_CLOSE, "POST", "/v1/campaigns/{c}/close", B(REVIEWER), true, 16 * KIB, "closing early-closing",
     "Closes the analysis"},
    {R_ABANDON, "POST", "/v1/campaigns/{c}/abandon", B(ADMINISTRATOR) | B(REVIEWER), true, 16 * KIB, "abandonment",
     "Abandons the campaign; after the sealing a reviewer alone may"},
    {R_SIGNATURES, "POST", "/v1/campaigns/{c}/signatures", B(REVIEWER), true, 16 * KIB, "audit-signature",
     "Signs the audit"},
    {R_OPENINGS_POST, "POST", "/v1/campaigns/{c}/openings", B(REVIEWER) | B(OPERATOR) | B(LIAISON), true, 32 * KIB,
     "opening-request spot-request", "Asks for an opening"},
    {R_OPENINGS_GET, "GET", "/v1/campaigns/{c}/openings", MEMBERS, true, 0, "", "Lists openings"},
    {R_OPENING, "GET", "/v1/campaigns/{c}/openings/{o}", MEMBERS, true, 0, "", "One opening"},
    {R_OPENING_SHARES, "POST", "/v1/campaigns/{c}/openings/{o}/shares", B(CUSTODIAN), true, 32 * MIB,
     "opening-shares spot-shares spot-answer spot-refusal spot-retraction opening-refusal",
     "A custodian's part of an opening"},
    {R_BUNDLE, "GET", "/v1/campaigns/{c}/bundle", MEMBERS, true, 0, "", "The bundle, after the full opening"},
    {R_HEAD, "GET", "/v1/ledger/head", ROLES_ANYONE, false, 0, "", "The newest signed head"},
    {R_ENTRIES, "GET", "/v1/ledger/entries", ROLES_ANYONE, false, 0, "", "Leaves of the ledger, paged"},
    {R_INCLUSION, "GET", "/v1/ledger/inclusion", ROLES_ANYONE, false, 0, "", "Inclusion proof"},
    {R_CONSISTENCY, "GET", "/v1/ledger/consistency", ROLES_ANYONE, false, 0, "", "Consistency proof"},
    {R_COSIGNATURES, "POST", "/v1/ledger/cosignatures", B(CUSTODIAN) | B(ANALYST), false, 16 * KIB, "",
     "A client's signature under a head"},
    {R_CLOCK, "POST", "/v1/clock", B(ADMINISTRATOR), false, 4 * KIB, "", "Moves a rehearsal clock"},
    {R_EVENTS, "GET", "/v1/events", ROLES_ANYONE, false, 0, "", "Stream of ledger size and clock"},
    {R_METRICS, "GET", "/metrics", ROLES_ANYONE, false, 0, "", "OpenMetrics"},
    {R_HEALTHZ, "GET", "/healthz", ROLES_ANYONE, false, 0, "", "The process lives"},
    {R_READYZ, "GET", "/readyz", ROLES_ANYONE, false, 0, "", "The service answers"},
    {R_BOARD, "GET", "/", ROLES_ANYONE, false, 0, "", "The control-room board"},
};

const struct wire_route *wire_routes(void)
{
	return routes;
}

static const char part_bytes[] = "abcdefghijklmnopqrstuvwxyzABCDEFGHIJKLMNOPQRSTUVWXYZ0123456789._-";

static bool path_matches(const char *pattern, const char *path, struct wire_match *out)
{
	int parts = 0;
	while (*pattern != '\0') {
		if (*pattern != '{') {
			if (*pattern++ != *path++)
				return false;
			continue;
		}
		size_t n = strspn(path, part_bytes);
		if (n == 0 || n > 80 || parts == WIRE_MAX_PARTS)
			return false;
		memcpy(out->parts[parts], path, n);
		out->parts[parts++][n] = '\0';
		path += n;
		pattern = strchr(pattern, '}') + 1;
	}
	return *path == '\0';
}

bool wire_route_match(const char *method, const char *path, struct wire_match *out, bool *path_known)
{
	*path_known = false;
	for (int i = 0; i < R_COUNT; i++) {
		*out = (struct wire_match){0};
		if (!path_matches(routes[i].path, path, out))
			continue;
		*path_known = true;
		if (strcmp(routes[i].method, method) == 0) {
			out->route = &routes[i];
			return true;
		}
	}
	return false;
}
