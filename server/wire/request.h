/*
 * Request signatures: HTTP Message Signatures (RFC 9421) with Ed25519, made by clients and checked by the service from
 * the same code. Only the covered components below are accepted, in this order.
 */
#ifndef QB_WIRE_REQUEST_H
#define QB_WIRE_REQUEST_H

#include <stdint.h>

#include "server/base/buf.h"
#include "server/base/secret.h"

#define REQUEST_WINDOW_S 60

struct wire_request {
	const char *method;       /* upper case */
	const char *authority;    /* host[:port], lower case */
	const char *path;         /* raw, as sent, begins with '/' */
	const char *query;        /* raw, without '?'; "" when there is none (then @query is "?") */
	const char *content_type; /* NULL without a body */
	const void *body;
	size_t body_n; /* 0: no body, content-digest and content-type are left out */
};

/* Header values to send; each owned by the caller (qb_free). digest is NULL without a body. */
struct wire_signature_headers {
	char *content_digest, *signature_input, *signature;
};

void wire_request_sign(const struct wire_request *r, const struct secret *seed, const uint8_t key_id[static 16],
                       int64_t created_unix_s, const uint8_t nonce[static 16], struct wire_signature_headers *out);
void wire_signature_headers_free(struct wire_signature_headers *h);

/* What a request claims about itself, parsed strictly from its Signature-Input before any key is looked up. */
struct wire_claimed {
	uint8_t key_id[16], nonce[16], signature[64];
	int64_t created_unix_s;
	char params[400]; /* the exact @signature-params value */
};
enum qb_status wire_request_parse(const char *signature_input, const char *signature, bool has_body,
                                  struct wire_claimed *out, struct qb_error *e) QB_MUST_USE;
/*
 * Checks window, digest and signature. Replays are the caller's to refuse (record the nonce after this returned QB_OK,
 * keep it longer than the window).
 * Errors: QB_CRYPTO with a reason that does not depend on anything secret
 */
enum qb_status wire_request_verify(const struct wire_request *r, const struct wire_claimed *claimed,
                                   const char *content_digest, const uint8_t public_key[static 32], int64_t now_unix_s,
                                   struct qb_error *e) QB_MUST_USE;

/* Content-Digest value "sha-512=:...:" (RFC 9530); caller frees. */
char *wire_content_digest(const void *body, size_t n);

/*
 * The signature base of RFC 9421 section 2.5 for any list of components, used by both functions above and held to the
 * RFC's example B.2.6 by a test. Components and values alternate in `pairs`, NULL-ended.
 */
void wire_signature_base(const char *const *pairs, const char *params, struct buf *out);

#endif
