/* The rule by which a client moves from one head to the next. */
#include "server/ledger/memory.h"

#include <string.h>

static enum qb_status refuse(struct qb_error *e, const char *what, const struct memory *m, const struct head *head)
{
	return qb_fail(e, QB_NO, "ledger head",
	               "keep both heads and tell the custodians: the service shows two histories",
	               "%s (remembered size %llu, shown size %llu)", what, (unsigned long long)m->last.size,
	               (unsigned long long)head->size);
}

enum qb_status memory_accept(struct memory *m, const struct head *head, const struct tree_proof *proof,
                             struct qb_error *e)
{
	static const struct tree_proof none;
	const struct tree_proof *p = proof == NULL ? &none : proof;
	if (m->seen) {
		if (memcmp(m->last.origin, head->origin, sizeof head->origin) != 0)
			return refuse(e, "the head comes from another service", m, head);
		if (head->size < m->last.size)
			return refuse(e, "the ledger became smaller", m, head);
		if (head->size == m->last.size && !hash_equal(&head->root, &m->last.root))
			return refuse(e, "same size but another root", m, head);
	}
	if (!m->seen || m->last.size == 0) {
		if (p->n != 0)
			return refuse(e, "a consistency proof from nothing must be empty", m, head);
	} else if (tree_check_consistency(m->last.size, &m->last.root, head->size, &head->root, p, NULL) != QB_OK) {
		return refuse(e, "the new head does not continue the remembered one", m, head);
	}
	m->seen = true;
	m->last = *head;
	return QB_OK;
}
