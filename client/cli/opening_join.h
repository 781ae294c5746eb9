/* A custodian's part of an opening: check everything, show it, then give partial openings. */
#ifndef QB_CLIENT_CLI_OPENING_JOIN_H
#define QB_CLIENT_CLI_OPENING_JOIN_H

#include "client/cli/answer_file.h"
#include "client/cli/internal.h"
#include "server/custody/partial.h"

/* One sealed record as the service hands it out. */
struct sealed_item {
	int64_t position, slot;
	int type;
	char station[64], by[64];
	struct buf bytes;  /* owned */
	struct record rec; /* points into bytes; after item_check or items_check */
};
struct sealed_items {
	struct sealed_item *item; /* owned */
	size_t n;
};
/* Every record that the service shows, in the order of positions. */
enum qb_status items_fetch(struct cli_call *c, const struct campaign *k, struct sealed_items *out) QB_MUST_USE;
/* The parsed records in their order, as a list of pointers into items; the caller frees the list (qb_free). */
const struct record **items_records(const struct sealed_items *items);
void items_free(struct sealed_items *items);
/* Proof, group, type and place of a record, against the verified ledger. Errors: QB_CRYPTO with the record's place. */
enum qb_status item_check(const struct campaign *k, const struct view *v, const struct custody_group *g,
                          struct sealed_item *item, struct qb_error *e) QB_MUST_USE;
/* Its two halves for many: proofs and group of all records, on all processors; then the type and place of each. */
enum qb_status items_check(const struct custody_group *g, struct sealed_items *items, struct qb_error *e) QB_MUST_USE;
enum qb_status item_place(const struct campaign *k, const struct view *v, const struct sealed_item *item,
                          struct qb_error *e) QB_MUST_USE;

enum qb_status join_full(struct cli_call *c, struct campaign *k, const struct opening *op) QB_MUST_USE;
/* Gives this custodian's part, waits for the others, and answers; or signs the retraction of that answer. */
enum qb_status join_spot(struct cli_call *c, struct campaign *k, const json_t *doc, enum saying kind) QB_MUST_USE;
/* The asker's side: k agreeing, signed answers (or retractions). QB_NO: not enough yet. */
enum qb_status spot_result(struct cli_call *c, struct campaign *k, const json_t *doc, enum saying kind,
                           struct answer_file *out) QB_MUST_USE;
/* Asks the person at the terminal unless --yes was given. QB_REFUSED: the person said no. */
enum qb_status join_confirm(struct cli_call *c, const char *what) QB_MUST_USE;
#endif
