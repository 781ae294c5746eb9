/* HTTP Message Signatures (RFC 9421) with Ed25519, one profile only: what is not exactly this form is refused. */
#include "server/wire/request.h"

#include <inttypes.h>
#include <sodium.h>
#include <stdio.h>
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/text.h"

#define LABEL        "qb"
#define WITH_BODY    "(\"@method\" \"@authority\" \"@path\" \"@query\" \"content-digest\" \"content-type\")"
#define WITHOUT_BODY "(\"@method\" \"@authority\" \"@path\" \"@query\")"

void wire_signature_base(const char *const *pairs, const char *params, struct buf *out)
{
	for (; pairs[0] != NULL; pairs += 2)
		buf_printf(out, "\"%s\": %s\n", pairs[0], pairs[1]);
	buf_printf(out, "\"@signature-params\": %s", params);
}

char *wire_content_digest(const void *body, size_t n)
{
	uint8_t h[crypto_hash_sha512_BYTES];
	crypto_hash_sha512(h, body, n);
	char *text = base64_encode(h, sizeof h), *out = text_printf("sha-512=:%s:", text);
	qb_free(text);
	return out;
}

/* The base of this request under these parameters. digest is NULL without a body. */
static void base_of(const struct wire_request *r, const char *digest, const char *params, struct buf *out)
{
	char *query = text_printf("?%s", r->query);
	const char *pairs[] = {"@method", r->method, "@authority",     r->authority, "@path",        r->path,
	                       "@query",  query,     "content-digest", digest,       "content-type", r->content_type,
	                       NULL,      NULL};
	if (digest == NULL)
		pairs[8] = NULL;
	wire_signature_base(pairs, params, out);
	qb_free(query);
}

static char *params_of(bool has_body, int64_t created_unix_s, const char *nonce_hex, const char *key_hex)
{
	return text_printf("%s;created=%" PRId64 ";nonce=\"%s\";keyid=\"%s\";alg=\"ed25519\";tag=\"quietbell/1\"",
	                   has_body ? WITH_BODY : WITHOUT_BODY, created_unix_s, nonce_hex, key_hex);
}

void wire_request_sign(const struct wire_request *r, const struct secret *seed, const uint8_t key_id[static 16],
                       int64_t created_unix_s, const uint8_t nonce[static 16], struct wire_signature_headers *out)
{
	char nonce_hex[33], key_hex[33];
	uint8_t signature[SIGN_BYTES];
	struct buf base = {0};
	hex_encode(nonce_hex, nonce, 16);
	hex_encode(key_hex, key_id, 16);
	bool has_body = r->body_n > 0;
	char *params = params_of(has_body, created_unix_s, nonce_hex, key_hex);
	out->content_digest = has_body ? wire_content_digest(r->body, r->body_n) : NULL;
	base_of(r, out->content_digest, params, &base);
	sign_bytes(seed, base.data, base.len, signature);
	char *text = base64_encode(signature, sizeof signature);
	out->signature_input = text_printf(LABEL "=%s", params);
	out->signature = text_printf(LABEL "=:%s:", text);
	qb_free(text);
	qb_free(params);
	buf_free(&base);
}

void wire_signature_headers_free(struct wire_signature_headers *h)
{
	qb_free(h->content_digest);
	qb_free(h->signature_input);
	qb_free(h->signature);
	*h = (struct wire_signature_headers){0};
}

static enum qb_status malformed(struct qb_error *e, const char *header)
{
	return qb_fail(e, QB_FORMAT, header, "sign requests as docs/protocol.md says",
	               "does not have the form required");
}

/* After `prefix` exactly n hexadecimal bytes follow; *at moves behind them. */
static bool take_hex(const char **at, const char *prefix, uint8_t *out, size_t n)
{
	char hex[65];
	size_t len = strlen(prefix);
	if (strncmp(*at, prefix, len) != 0 || strlen(*at + len) < 2 * n)
		return false;
	memcpy(hex, *at + len, 2 * n);
	hex[2 * n] = '\0';
	*at += len + 2 * n;
	return hex_decode(out, n, hex);
}

enum qb_status wire_request_parse(const char *signature_input, const char *signature, bool has_body,
                                  struct wire_claimed *out, struct qb_error *e)
{
	const char *at = signature_input,
	           *list = has_body ? LABEL "=" WITH_BODY ";created=" : LABEL "=" WITHOUT_BODY ";created=";
	char number[24];
	*out = (struct wire_claimed){0};
	if (strlen(signature_input) >= sizeof out->params || strncmp(at, list, strlen(list)) != 0)
		return malformed(e, "Signature-Input");
	at += strlen(list);
	size_t digits = strspn(at, "0123456789");
	if (digits == 0 || digits > 18)
		return malformed(e, "Signature-Input");
	memcpy(number, at, digits);
	number[digits] = '\0';
	at += digits;
	if (!text_i64(number, &out->created_unix_s) || !take_hex(&at, ";nonce=\"", out->nonce, 16) ||
	    !take_hex(&at, "\";keyid=\"", out->key_id, 16) || strcmp(at, "\";alg=\"ed25519\";tag=\"quietbell/1\"") != 0)
		return malformed(e, "Signature-Input");
	(void)snprintf(out->params, sizeof out->params, "%s", signature_input + strlen(LABEL "="));
	struct buf b = {0};
	size_t n = strlen(signature), head = strlen(LABEL "=:");
	bool good = n > head + 1 && n < 128 && strncmp(signature, LABEL "=:", head) == 0 && signature[n - 1] == ':';
	if (good) {
		char *inner = qb_memdup(signature + head, n - head - 1);
		good = base64_decode(inner, &b) && b.len == SIGN_BYTES;
		qb_free(inner);
	}
	if (good)
		memcpy(out->signature, b.data, SIGN_BYTES);
	buf_free(&b);
	return good ? QB_OK : malformed(e, "Signature");
}

enum qb_status wire_request_verify(const struct wire_request *r, const struct wire_claimed *claimed,
                                   const char *content_digest, const uint8_t public_key[static 32], int64_t now_unix_s,
                                   struct qb_error *e)
{
	struct buf base = {0};
	enum qb_status st = QB_OK;
	int64_t off = now_unix_s > claimed->created_unix_s ? now_unix_s - claimed->created_unix_s
	                                                   : claimed->created_unix_s - now_unix_s;
	if (r->body_n > 0) {
		char *digest = wire_content_digest(r->body, r->body_n);
		if (content_digest == NULL || r->content_type == NULL || strcmp(digest, content_digest) != 0)
			st = qb_fail(e, QB_CRYPTO, "Content-Digest", "send the digest of the body",
			             "does not fit the body");
		qb_free(digest);
	}
	if (st == QB_OK && off > REQUEST_WINDOW_S)
		st = qb_fail(e, QB_CRYPTO, "Signature-Input: created", "set the clock of your machine",
		             "the request is more than %d s away from the service's clock", REQUEST_WINDOW_S);
	if (st == QB_OK) {
		base_of(r, r->body_n > 0 ? content_digest : NULL, claimed->params, &base);
		if (!sign_verify(public_key, base.data, base.len, claimed->signature))
			st = qb_fail(e, QB_CRYPTO, "Signature", "sign with the enrolled key", "does not verify");
	}
	buf_free(&base);
	return st;
}
