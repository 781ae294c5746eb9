/* Resharing and repair in the projection; inside the keyholders' part of it. */
#ifndef QB_VIEW_RESHARE_H
#define QB_VIEW_RESHARE_H

#include "server/view/view.h"

bool view_apply_reshare(const struct view *v, struct campaign *c, const struct wire_entry *en, const struct entry *leaf,
                        const uint8_t leaf_hash[static 32]);
void view_free_reshare(struct campaign *c);

#endif
