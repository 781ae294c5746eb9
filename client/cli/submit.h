/*
 * What analysts, operators and others hand in sealed: claims, milestones, guesses, incidents. One way for all of them.
 */
#ifndef QB_CLIENT_CLI_SUBMIT_H
#define QB_CLIENT_CLI_SUBMIT_H

#include "client/cli/internal.h"
#include "server/custody/record.h"

struct submission {
	enum record_type record;
	const char *type;    /* of the entry */
	const char *path;    /* of the route */
	const char *label;   /* how the receipt is kept and printed */
	const char *content; /* what is sealed */
	int64_t sequence;
	int64_t start_gps_ns; /* of the slot it is about, or 0 */
	uint64_t duration_ns;
};

/* One above every number that this party used in the campaign. */
enum qb_status submit_next_sequence(struct cli_call *c, const struct campaign *k, int64_t *out) QB_MUST_USE;
/*
 * Seals the content to the group key, posts the hidden entry, checks and keeps the receipt, prints it.
 *
 * Given:    extra   members of the entry beside sequence and record_id; taken over
 */
enum qb_status submit_sealed(struct cli_call *c, const struct campaign *k, const struct custody_group *g,
                             const struct submission *s, json_t *extra) QB_MUST_USE;
/* The receipt must be about what was sent, and signed by the pinned service. Errors: QB_CRYPTO, QB_FORMAT */
enum qb_status submit_check_receipt(struct cli_call *c, const struct campaign *k, const uint8_t nonce[static 32],
                                    const char *entry, const json_t *answer) QB_MUST_USE;

#endif
