/*
 * A custodian's one message of key generation. Making, parsing and checking it; what follows from all deals is
 * keygen.h, and what deals have in common with resharing is dealing.h.
 */
#ifndef QB_CUSTODY_DEAL_H
#define QB_CUSTODY_DEAL_H

#include "server/custody/dealing.h"
#include "server/custody/keygen.h"

/* All deal to all: the table that the functions of dealing.h and complaint.h take. Points into c. */
struct dealing keygen_dealing(const struct keygen_context *c);

/* Custodian i's fresh deal. Errors: QB_RANGE, these are not custodian i's keys. */
enum qb_status deal_make(const struct keygen_context *c, uint32_t i, const struct party_key *me, struct buf *out,
                         struct qb_error *e) QB_MUST_USE;

/* As dealing_parse, dealing_check and dealing_take. */
enum qb_status deal_parse(const struct keygen_context *c, const uint8_t *p, size_t n, struct deal *out,
                          struct qb_error *e) QB_MUST_USE;
enum qb_status deal_check(const struct keygen_context *c, const struct deal *d, struct qb_error *e) QB_MUST_USE;
enum qb_status deal_take(const struct keygen_context *c, const struct deal *d, uint32_t to, const struct party_key *me,
                         struct secret **share, struct qb_error *e) QB_MUST_USE;

#endif
