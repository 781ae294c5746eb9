/*
 * Heads of several clients, held against each other. A service that shows one history here and another there must sign
 * two heads that no one ledger has; whoever sees both can prove it to anybody.
 */
#ifndef QB_CLIENT_HEADS_H
#define QB_CLIENT_HEADS_H

#include "client/link/follow.h"

#define HEADS_MAX 256 /* heads of others in one answer */

/*
 * Holds a head, whose signatures were verified, against the copy and its newest head. When no one ledger has both,
 * both are written to a new file evidence-SIZE-SIZE.json in the home, which the error names.
 *
 * Given:    f         with a head; said_by: whose head the other is, for the error
 * Errors:   QB_CRYPTO two histories; a ledger that was rolled back; a part that is withheld from this client
 */
enum qb_status heads_compare(const struct follow *f, const struct home *h, const struct head *theirs,
                             const char *said_by, struct qb_error *e) QB_MUST_USE;
/* Writes the evidence; *path is the caller's. `what` is one of the words below. */
#define HEADS_TWO_HISTORIES "two-histories"
#define HEADS_ROLLED_BACK   "rolled-back"
#define HEADS_WITHHELD      "withheld"
enum qb_status heads_evidence(const struct follow *f, const struct home *h, const char *what, const struct head *ours,
                              const struct head *theirs, char **path, struct qb_error *e) QB_MUST_USE;
/*
 * What a file of evidence proves by itself: both heads are the service's, and no ledger that only grows has both.
 *
 * Returned: why, one line; key: the service's key as the file says it
 * Errors:   QB_FORMAT; QB_CRYPTO a false signature; QB_NO the two heads do not contradict each other by themselves
 */
enum qb_status heads_evidence_check(const char *text, size_t n, uint8_t key[static 32], char why[static 200],
                                    struct qb_error *e) QB_MUST_USE;

/*
 * The heads of others in an answer of the service ("cosigned"): parsed, the service's signature and the known
 * cosigners' verified, sorted by size. Appended to f->other (cleared first); not compared yet.
 */
enum qb_status heads_read(struct follow *f, const uint8_t service_key[static 32], const json_t *list,
                          struct qb_error *e) QB_MUST_USE;

/* head.txt: the newest head that the home saw. */
enum qb_status heads_keep(const struct home *h, const struct head *head, struct qb_error *e) QB_MUST_USE;
/* QB_NOT_FOUND when there is none. The signature is checked against the home's service key. */
enum qb_status heads_kept(const struct home *h, struct head *out, struct qb_error *e) QB_MUST_USE;
/* A head in a file that somebody sent. Errors: QB_IO, QB_FORMAT, QB_CRYPTO */
enum qb_status heads_file(const char *path, const uint8_t service_key[static 32], struct head *out,
                          struct qb_error *e) QB_MUST_USE;

/* How many custodians of a campaign cosigned a head, each once, by signatures that verify. */
int heads_custodians(const struct view *v, const struct campaign *k, const struct head *head);

#endif
