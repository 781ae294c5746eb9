/* Among the use cases about shares of the group key: keygen.c, reshare.c and canary.c. */
#ifndef QB_OPS_KEYHOLDERS_H
#define QB_OPS_KEYHOLDERS_H

#include <stddef.h>

#include "server/ops/internal.h"

/* The rules of one entry type, before anything is written. */
typedef enum qb_status keyholder_check(struct ops *o, struct campaign *c, const struct accepted *a, struct qb_error *e);
/* What follows in the same transaction, after the entry; may be NULL. */
typedef enum qb_status keyholder_after(struct txn *t, struct campaign *c, const struct accepted *a, struct qb_error *e);

keyholder_check reshare_check_request, reshare_check_deal, reshare_check_complaint, reshare_check_failed,
    reshare_check_certify, reshare_check_erased, repair_check_request, repair_check_split, repair_check_sum,
    repair_check_failed, repair_check_done, canary_check_request;
keyholder_after reshare_after_certify, canary_after_request;

/* Whether everybody but one has done a step: offset of the step's sequence number in struct custodian. */
bool custodians_all_in(const struct custodian *list, int n, int except, size_t offset);
/* The entry's message, decoded, at most max bytes. */
enum qb_status keyholder_message(const struct accepted *a, const char *key, struct buf *out,
                                 struct qb_error *e) QB_MUST_USE;

/* Seals a canary to the group and enters it: "canary", or "reshare-canary" for the set of a resharing. */
enum qb_status canary_seal(struct txn *t, struct campaign *c, const struct custody_group *g, const char *type,
                           uint64_t attempt, const char *why, struct qb_error *e) QB_MUST_USE;

#endif
