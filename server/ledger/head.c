/* Text codec of heads, strict by construction: what was parsed is formatted again and must be the same bytes. */
#include "server/ledger/head.h"

#include <string.h>

#include "server/base/alloc.h"
#include "server/base/clock.h"
#include "server/base/text.h"
#include "server/ledger/tree.h"

void head_signed_text(const struct head *head, struct buf *out)
{
	char origin[2 * KEY_ID_BYTES + 1], root[2 * LEDGER_HASH_BYTES + 1], gps[40];
	hex_encode(origin, head->origin, sizeof head->origin);
	hex_encode(root, head->root.b, sizeof head->root.b);
	clock_gps_text(head->time_gps_ns, gps, sizeof gps);
	buf_printf(out, "quietbell/1/head\norigin %s\nsize %llu\nroot %s\ntime %s\n\n", origin,
	           (unsigned long long)head->size, root, gps);
}

static void format_signature(const char *word, const struct head_signature *s, struct buf *out)
{
	char id[2 * KEY_ID_BYTES + 1], sig[2 * SIGN_BYTES + 1];
	hex_encode(id, s->key_id, sizeof s->key_id);
	hex_encode(sig, s->signature, sizeof s->signature);
	buf_printf(out, "%s %s %s\n", word, id, sig);
}

void head_format(const struct head *head, struct buf *out)
{
	head_signed_text(head, out);
	format_signature("service", &head->service, out);
	for (size_t i = 0; i < head->n_cosigners; i++)
		format_signature("cosigner", &head->cosigner[i], out);
}

/* The text after `word ` on the next line, or NULL. Lines are cut in place; *at moves past the newline. */
static char *line_after(char **at, const char *word)
{
	char *line = *at, *end = strchr(line, '\n');
	size_t n = strlen(word);
	if (end == NULL || strncmp(line, word, n) != 0)
		return NULL;
	*end = '\0';
	*at = end + 1;
	return line + n;
}

static bool parse_signature(char *text, struct head_signature *out)
{
	if (text == NULL || strlen(text) != 2 * (KEY_ID_BYTES + SIGN_BYTES) + 1 || text[2 * KEY_ID_BYTES] != ' ')
		return false;
	text[2 * KEY_ID_BYTES] = '\0';
	return hex_decode(out->key_id, KEY_ID_BYTES, text) &&
	       hex_decode(out->signature, SIGN_BYTES, text + 2 * KEY_ID_BYTES + 1);
}

static bool parse_size(const char *text, uint64_t *out)
{
	int64_t v;
	if (text == NULL || !text_i64(text, &v) || v < 0)
		return false;
	*out = (uint64_t)v;
	return true;
}

static bool has_cosigner(const struct head *head, const uint8_t id[static KEY_ID_BYTES], size_t *which)
{
	for (*which = 0; *which < head->n_cosigners; ++*which)
		if (memcmp(head->cosigner[*which].key_id, id, KEY_ID_BYTES) == 0)
			return true;
	return false;
}

static const char *parse_lines(char *at, struct head *out)
{
	const char *text;
	if (line_after(&at, "quietbell/1/head") == NULL)
		return "it does not start with quietbell/1/head";
	if ((text = line_after(&at, "origin ")) == NULL || !hex_decode(out->origin, sizeof out->origin, text))
		return "its origin is not a key id";
	if (!parse_size(line_after(&at, "size "), &out->size))
		return "its size is not a number of leaves";
	if ((text = line_after(&at, "root ")) == NULL || !hex_decode(out->root.b, sizeof out->root.b, text))
		return "its root is not a hash";
	if ((text = line_after(&at, "time ")) == NULL || !clock_gps_parse(text, &out->time_gps_ns))
		return "its time is not a GPS time";
	if (line_after(&at, "") == NULL)
		return "the blank line is missing";
	if (!parse_signature(line_after(&at, "service "), &out->service))
		return "the service's signature is missing or malformed";
	while (*at != '\0') {
		struct head_signature s;
		size_t which;
		if (out->n_cosigners == HEAD_COSIGNERS_MAX)
			return "it has too many cosignatures";
		if (!parse_signature(line_after(&at, "cosigner "), &s))
			return "a cosignature is malformed";
		if (has_cosigner(out, s.key_id, &which))
			return "a key cosigns twice";
		out->cosigner[out->n_cosigners++] = s;
	}
	return NULL;
}

enum qb_status head_parse(const char *text, size_t n, struct head *out, struct qb_error *e)
{
	memset(out, 0, sizeof *out);
	if (n == 0 || n > HEAD_TEXT_MAX || memchr(text, '\0', n) != NULL)
		return qb_fail(e, QB_FORMAT, "ledger head", NULL, "it is empty, too long or not text");
	char *copy = qb_memdup(text, n);
	const char *wrong = parse_lines(copy, out);
	if (wrong == NULL) {
		struct buf again = {0};
		head_format(out, &again);
		if (again.len != n || memcmp(again.data, text, n) != 0)
			wrong = "it is not written in the one accepted way";
		buf_free(&again);
	}
	qb_free(copy);
	return wrong == NULL ? QB_OK : qb_fail(e, QB_FORMAT, "ledger head", NULL, "%s", wrong);
}

static void sign_head(const struct head *head, const struct secret *seed, struct head_signature *out)
{
	uint8_t pk[SIGN_PUBLIC];
	struct buf text = {0};
	sign_public(seed, pk);
	sign_key_id(pk, out->key_id);
	head_signed_text(head, &text);
	sign_bytes(seed, text.data, text.len, out->signature);
	buf_free(&text);
}

void head_sign(struct head *head, const struct secret *seed)
{
	uint8_t pk[SIGN_PUBLIC];
	sign_public(seed, pk);
	sign_key_id(pk, head->origin);
	head->n_cosigners = 0;
	sign_head(head, seed, &head->service);
}

void head_cosign(const struct head *head, const struct secret *seed, struct head_signature *out)
{
	sign_head(head, seed, out);
}

enum qb_status head_add(struct head *head, const struct head_signature *cosignature, struct qb_error *e)
{
	size_t which;
	if (!has_cosigner(head, cosignature->key_id, &which)) {
		if (head->n_cosigners == HEAD_COSIGNERS_MAX)
			return qb_fail(e, QB_RANGE, "ledger head", NULL, "it has %d cosignatures already",
			               HEAD_COSIGNERS_MAX);
		head->n_cosigners++;
	}
	head->cosigner[which] = *cosignature;
	return QB_OK;
}

/* 1 good, 0 not signed by pk at all, -1 false. */
static int cosigned_by(const struct head *head, const struct buf *text, const uint8_t pk[static SIGN_PUBLIC])
{
	uint8_t id[KEY_ID_BYTES];
	size_t which;
	sign_key_id(pk, id);
	if (!has_cosigner(head, id, &which))
		return 0;
	return sign_verify(pk, text->data, text->len, head->cosigner[which].signature) ? 1 : -1;
}

enum qb_status head_verify(const struct head *head, const uint8_t service_pk[static SIGN_PUBLIC],
                           const uint8_t (*known)[SIGN_PUBLIC], size_t n_known, size_t *n_valid, struct qb_error *e)
{
	uint8_t id[KEY_ID_BYTES];
	struct buf text = {0};
	enum qb_status s = QB_OK;
	size_t valid = 0;
	sign_key_id(service_pk, id);
	head_signed_text(head, &text);
	if (memcmp(id, head->origin, sizeof id) != 0 || memcmp(id, head->service.key_id, sizeof id) != 0)
		s = qb_fail(e, QB_CRYPTO, "ledger head", NULL, "it comes from another service than the pinned one");
	else if (!sign_verify(service_pk, text.data, text.len, head->service.signature))
		s = qb_fail(e, QB_CRYPTO, "ledger head", NULL, "the service's signature is false");
	for (size_t i = 0; s == QB_OK && i < n_known; i++) {
		bool repeated = false;
		for (size_t j = 0; j < i; j++)
			repeated = repeated || memcmp(known[i], known[j], SIGN_PUBLIC) == 0;
		int by = repeated ? 0 : cosigned_by(head, &text, known[i]);
		if (by < 0)
			s = qb_fail(e, QB_CRYPTO, "ledger head", NULL, "the cosignature of custodian key %zu is false",
			            i + 1);
		valid += by > 0;
	}
	buf_free(&text);
	if (n_valid != NULL)
		*n_valid = s == QB_OK ? valid : 0;
	return s;
}

size_t head_quorum(size_t n_custodians)
{
	return n_custodians / 2 + 1;
}
