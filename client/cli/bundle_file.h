/*
 * A bundle read into memory, strictly: nothing in it is trusted, every size is bounded, the schema must be the text
 * that the format fixes. What it means is bundle_verify's business. The only user of SQLite in the client.
 */
#ifndef QB_CLIENT_CLI_BUNDLE_FILE_H
#define QB_CLIENT_CLI_BUNDLE_FILE_H

#include "client/cli/opening_join.h"

struct bundle_hidden {
	uint8_t commitment[64], promise[64], nonce[32], signature[64], author[16];
	int64_t seq, received_gps_ns, due_gps_ns;
	struct buf entry; /* owned */
};
struct bundle_blob {
	int64_t slot;
	int place;
	char name[64]; /* station or custodian */
	uint8_t opening[16];
	struct buf bytes; /* owned */
};
struct bundle {
	uint8_t campaign[16];
	int64_t bytes; /* of the file */
	int n_tables;
	struct buf head;
	struct buf *frame; /* leaves in order */
	uint64_t n_frames;
	struct bundle_hidden *hidden;
	size_t n_hidden;
	struct sealed_items records;
	uint8_t (*record_id)[64]; /* as the table says, one for each record */
	uint8_t (*author)[16];
	struct bundle_blob *recipe, *prekey, *share;
	size_t n_recipes, n_prekeys, n_shares;
};
/* Errors: QB_IO no such file; QB_NO not a bundle of this format, truncated, or damaged (one line says where). */
enum qb_status bundle_read(const char *path, struct bundle **out, struct qb_error *e) QB_MUST_USE;
void bundle_free(struct bundle **b);

#endif
