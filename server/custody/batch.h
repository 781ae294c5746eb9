/*
 * The work of a full opening over many records, shared among threads: checking the records, making one custodian's
 * partial openings, checking them, and opening with those of several. What comes out does not depend on the number of
 * threads.
 */
#ifndef QB_CUSTODY_BATCH_H
#define QB_CUSTODY_BATCH_H

#include "server/custody/partial.h"

#define BATCH_THREADS_MAX 16

/* One custodian's partial openings, n * PARTIAL_BYTES, in the order of the records. */
struct batch_set {
	uint32_t i; /* whose they must be, from 1 */
	const uint8_t *partials;
};

/* Which records of a full opening, each passed record_check, under which request. */
struct batch {
	const struct custody_group *group;
	const struct record *const *record;
	size_t n;
	uint8_t leaf[32]; /* of the request in the ledger */
	int threads;      /* 1..BATCH_THREADS_MAX, or 0: as many as the machine has processors */
};

/*
 * Every function: on an error *bad, unless bad is NULL, is the first record in the order of the list that has one, and
 * e says what it is.
 */

/*
 * The first of all: the records themselves.
 *
 * Given:    bytes           n of them, each stays where it is
 *           threads         as in struct batch
 * Returned: out             n records
 * Errors:   as record_check
 */
enum qb_status batch_records(const struct custody_group *g, const struct buf *const *bytes, size_t n, int threads,
                             struct record *out, size_t *bad, struct qb_error *e) QB_MUST_USE;
/*
 * Given:    out             n * PARTIAL_BYTES
 * Errors:   as partial_make
 */
enum qb_status batch_make(const struct batch *b, uint32_t i, const struct secret *share, uint8_t *out, size_t *bad,
                          struct qb_error *e) QB_MUST_USE;
/* Errors: as partial_check; QB_CRYPTO when one is another custodian's. */
enum qb_status batch_check(const struct batch *b, const struct batch_set *set, size_t *bad,
                           struct qb_error *e) QB_MUST_USE;
/*
 * Checks all sets and opens with the first k of them.
 *
 * Given:    content, opens  n each; content empty
 * Returned: content         of each record that opens; the caller wipes them, also after an error
 *           opens           as partial_open_filed
 * Errors:   as partial_check and partial_open_filed
 */
enum qb_status batch_open(const struct batch *b, const struct batch_set *set, size_t n_sets, struct buf *content,
                          bool *opens, size_t *bad, struct qb_error *e) QB_MUST_USE;

#endif
