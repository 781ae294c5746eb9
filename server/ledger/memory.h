/*
 * What a client remembers of the ledger: the last head it verified. A service that shows a smaller or another history
 * is refused here, whoever signed it.
 */
#ifndef QB_LEDGER_MEMORY_H
#define QB_LEDGER_MEMORY_H

#include "server/ledger/head.h"
#include "server/ledger/tree.h"

/* Starts as all zeros: nothing seen yet. Kept on disk as the head's own text (head_format, head_parse). */
struct memory {
	bool seen;
	struct head last;
};

/*
 * Takes a new head if it continues the remembered one. The signatures must have been verified before (head_verify).
 *
 * Given:    head, proof   consistency from the remembered size to head's; empty (n = 0) when sizes are equal, when
 *                         nothing was seen yet, or when the remembered tree was empty
 * Returned: *m            advanced; unchanged on refusal
 * Errors:   QB_NO         other origin, smaller, same size with another root, or proof does not connect them
 */
enum qb_status memory_accept(struct memory *m, const struct head *head, const struct tree_proof *proof,
                             struct qb_error *e) QB_MUST_USE;

#endif
