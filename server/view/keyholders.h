/*
 * The part of the projection that is about who holds shares of the group key: key generation with its complaints,
 * rehearsals, resharing and repair. Only view_apply and the drafting call it.
 */
#ifndef QB_VIEW_KEYHOLDERS_H
#define QB_VIEW_KEYHOLDERS_H

#include "server/view/view.h"

/* The custodians of the plan, before anything was dealt. Errors: QB_REFUSED when one is not enrolled; QB_CRYPTO */
enum qb_status view_draft_keyholders(const struct view *v, struct campaign *c, int64_t now_ns,
                                     struct qb_error *e) QB_MUST_USE;
/* Applies an entry about shares; false when it is about something else. */
bool view_apply_keyholders(const struct view *v, struct campaign *c, const struct wire_entry *en,
                           const struct entry *leaf, const uint8_t leaf_hash[static 32]);
void view_free_keyholders(struct campaign *c);

#endif
