/*
 * The table of ledger entry types, shared by daemon and clients: who may author one, whether it is hidden, which
 * members it has, and the fixed sentences that say what it is and what its signature means.
 */
#ifndef QB_WIRE_ENTRIES_H
#define QB_WIRE_ENTRIES_H

#include <stdbool.h>
#include <stdint.h>

#include "server/base/json.h"
#include "server/base/secret.h"
#include "server/wire/roles.h"

enum wire_member_kind {
	WIRE_TEXT,  /* one line, at most 4000 bytes */
	WIRE_LONG,  /* text of any length below the body limit */
	WIRE_NAME,  /* text_is_name */
	WIRE_INT,   /* -1 .. 2^53 */
	WIRE_GPS,   /* decimal string */
	WIRE_HEX16, /* hexadecimal of this many bytes */
	WIRE_HEX32,
	WIRE_HEX64,
	WIRE_HEX96,
	WIRE_BASE64,
	WIRE_NAMES, /* list of names */
	WIRE_PAIRS, /* list of [gps, gps] */
	WIRE_FILES  /* map of file name to text */
};

struct wire_member {
	const char *key; /* NULL ends the list */
	enum wire_member_kind kind;
};

struct wire_entry_type {
	const char *type;
	unsigned roles; /* bit set of 1u << enum wire_role: who may author it */
	bool hidden;
	bool needs_campaign;
	const char *what;    /* fixed sentence */
	const char *meaning; /* what the signature means, fixed sentence */
	const struct wire_member *members;
};

/* The type by name, or NULL. */
const struct wire_entry_type *wire_entry_type(const char *type);
/* All types in table order; *n their number. */
const struct wire_entry_type *wire_entry_types(int *n);

/*
 * Composes the exact text of an entry.
 *
 * Given:    type        must exist
 *           by          party name
 *           campaign    16 bytes, or NULL for service-level types
 *           now_gps_ns  written as when_gps and when_utc
 *           why         one line, "" becomes "-"
 *           extra       object with exactly the type's members (borrowed)
 * Returned: the text, owned by the caller (qb_free); NULL never
 * Errors:   QB_FAULT when extra does not match the table
 */
enum qb_status wire_entry_compose(const char *type, const char *by, const uint8_t *campaign, int64_t now_gps_ns,
                                  const char *why, const json_t *extra, char **out, struct qb_error *e) QB_MUST_USE;

/* A parsed entry. `doc` owns everything; free with wire_entry_free. */
struct wire_entry {
	const struct wire_entry_type *type;
	json_t *doc;
	const char *by, *why;
	bool has_campaign;
	uint8_t campaign[16];
	int64_t when_gps_ns;
};

/*
 * Strict: exactly the common members and the type's, each of its kind, fixed sentences as in the table.
 * Errors: QB_FORMAT, QB_RANGE
 */
enum qb_status wire_entry_parse(const char *text, size_t n, struct wire_entry *out, struct qb_error *e) QB_MUST_USE;
void wire_entry_free(struct wire_entry *entry);

/* Typed members of a parsed entry; the table guarantees that they exist and have the kind. */
const char *wire_entry_text(const struct wire_entry *entry, const char *key);
int64_t wire_entry_int(const struct wire_entry *entry, const char *key);
int64_t wire_entry_gps(const struct wire_entry *entry, const char *key);
void wire_entry_hex(const struct wire_entry *entry, const char *key, uint8_t *out, size_t n);
const json_t *wire_entry_json(const struct wire_entry *entry, const char *key);

#endif
