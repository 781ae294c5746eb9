/*
 * Who sends a request: the signature headers, the enrolled key, the signature, then the nonce, in this order. An
 * unknown key takes the same steps as a wrong signature and gives the same words.
 */
#ifndef QB_API_AUTH_H
#define QB_API_AUTH_H

#include <stdbool.h>
#include <stdint.h>

#include "server/ops/ops.h"
#include "server/wire/request.h"

struct auth_request {
	struct wire_request request;
	const char *content_digest, *signature_input, *signature; /* header values; NULL when absent */
	const struct wire_route *route;
	const json_t *body; /* only looked at for an enrolment, which is signed by the key that it brings */
};

/* Does this route want a signature? Public reads don't look at one. */
bool auth_wanted(const struct wire_route *route);

/*
 * Returned: *who     the enrolled party; for an enrolment a party without name and role, with the key that signed
 * Errors:   QB_CRYPTO  not signed, stale, altered, unknown key, or sent before
 *           QB_FAULT, QB_IO  the nonce can't be recorded
 */
enum qb_status auth_check(struct ops *ops, const struct auth_request *r, int64_t now_unix_s, struct view_party *who,
                          struct qb_error *e) QB_MUST_USE;

#endif
