/* Request authentication: parse, look up, verify, take the nonce. */
#include "server/api/auth.h"

#include <string.h>

#include "server/base/secret.h"

/*
 * A valid point of the curve that nobody is enrolled with (test 1 of RFC 8032, section 7.1): an unknown key is verified
 * against it, so that the work is the same.
 */
static const uint8_t nobody[32] = {0xd7, 0x5a, 0x98, 0x01, 0x82, 0xb1, 0x0a, 0xb7, 0xd5, 0x4b, 0xfe,
                                   0xd3, 0xc9, 0x64, 0x07, 0x3a, 0x0e, 0xe1, 0x72, 0xf3, 0xda, 0xa6,
                                   0x23, 0x25, 0xaf, 0x02, 0x1a, 0x68, 0xf7, 0x07, 0x51, 0x1a};

bool auth_wanted(const struct wire_route *route)
{
	return (route->roles & ROLE_BIT(ROLE_NONE)) == 0 || route->id == R_PARTIES_POST;
}

/* The key of an enrolment entry, when the body is one and the key is the one that the request claims. */
static bool enrolling_key(const struct auth_request *r, const uint8_t key_id[static 16], uint8_t key[static 32])
{
	const char *text, *type;
	struct qb_error ignored = {0};
	json_t *entry = NULL;
	uint8_t id[KEY_ID_BYTES];
	if (r->route->id != R_PARTIES_POST || json_str(r->body, "entry", "request", &text, &ignored) != QB_OK)
		return false;
	bool found = json_read(text, strlen(text), "entry", &entry, &ignored) == QB_OK &&
	             json_str(entry, "type", "entry", &type, &ignored) == QB_OK && strcmp(type, "enrolment") == 0 &&
	             json_hex(entry, "signing_key", "entry", key, 32, &ignored) == QB_OK;
	json_decref(entry);
	if (!found)
		return false;
	sign_key_id(key, id);
	return same_bytes(id, key_id, sizeof id);
}

enum qb_status auth_check(struct ops *ops, const struct auth_request *r, int64_t now_unix_s, struct view_party *who,
                          struct qb_error *e)
{
	struct wire_claimed claimed;
	struct qb_error ignored = {0};
	*who = (struct view_party){0};
	if (r->signature_input == NULL || r->signature == NULL)
		return qb_fail(e, QB_CRYPTO, NULL, "sign it with an enrolled key", "the request is not signed");
	enum qb_status st = wire_request_parse(r->signature_input, r->signature, r->request.body_n > 0, &claimed, e);
	if (st != QB_OK)
		return QB_CRYPTO;
	bool known = ops_party_by_key(ops, claimed.key_id, who, &ignored) == QB_OK;
	if (!known) {
		*who = (struct view_party){.role = ROLE_NONE};
		known = enrolling_key(r, claimed.key_id, who->signing_key);
		memcpy(who->key_id, claimed.key_id, sizeof who->key_id);
	}
	if (!known)
		memcpy(who->signing_key, nobody, sizeof nobody);
	st = wire_request_verify(&r->request, &claimed, r->content_digest, who->signing_key, now_unix_s, e);
	if (st == QB_OK && !known)
		st = qb_fail(e, QB_CRYPTO, NULL, NULL, "the key is nobody's");
	if (st == QB_OK)
		st = ops_nonce_take(ops, claimed.key_id, claimed.nonce, now_unix_s, e);
	return st;
}
