/*
 * The part of the projection that is about who holds shares of the group key: key generation with its complaints
 * (keyholders.c), rehearsals (rehearsals.c), resharing and repair (reshare.c). An entry that no honest service would
 * have taken has no effect in any of them, so that no service can put somebody in or out of office with it.
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
/* After somebody's keys changed: attempts in which nothing is dealt yet go on with the new ones. */
void view_renew_keyholders(struct view *v);
void view_free_keyholders(struct campaign *c);

/* ---- among the three files ---- */
bool view_apply_rehearsals(struct campaign *c, const struct wire_entry *en, const struct entry *leaf,
                           const uint8_t leaf_hash[static 32]);
/* An opening of a canary as custodian number `index`, proof checked. */
bool view_rehearsal_holds(const struct custody_group *g, const uint8_t *canary, size_t canary_n,
                          const uint8_t leaf[static 32], const struct wire_entry *en, uint32_t index);
bool view_apply_reshare(const struct view *v, struct campaign *c, const struct wire_entry *en, const struct entry *leaf,
                        const uint8_t leaf_hash[static 32]);
void view_free_reshare(struct campaign *c);
/* Notes an attempt that ended; `excluded` "" when nobody is to blame. */
void view_note_failure(struct campaign *c, enum attempt_kind kind, uint64_t attempt, const char *excluded,
                       const char *how, const struct wire_entry *en);
void view_begin_term(struct campaign *c, const struct view_party *p, int64_t from_ns);
void view_end_term(struct campaign *c, const struct view_party *p, int64_t to_ns);
/* What proves the first group for ever; nothing when it was kept before. */
void view_keep_founders(struct campaign *c);
bool view_all_did(const struct custodian *list, int n, size_t offset); /* offset: of a step in struct custodian */

#endif
