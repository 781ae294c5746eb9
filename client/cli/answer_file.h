/*
 * What custodians say to the outside about one interval, as a file: an answer or a retraction with their signatures.
 * Whoever has the fingerprint of the campaign's custodians can check it, with no account, service or network.
 */
#ifndef QB_CLIENT_CLI_ANSWER_FILE_H
#define QB_CLIENT_CLI_ANSWER_FILE_H

#include "client/cli/internal.h"

enum saying { SAY_ANSWER, SAY_RETRACTION };

struct answer_file {
	enum saying kind;
	char campaign[64], answer[64];
	uint8_t id[16], th[64], authority[64]; /* authority: the spot request's commitment */
	int64_t from_ns, to_ns;
	int n, k;
	char name[CUSTODY_MAX][64];
	uint8_t key[CUSTODY_MAX][SIGN_PUBLIC]; /* of custodians 1..n */
	bool signed_by[CUSTODY_MAX];
	uint8_t signature[CUSTODY_MAX][SIGN_BYTES];
};

/*
 * What each custodian signs: T("quietbell/1/opening/answer" or ".../retraction", th, authority, from, to, answer);
 * times in GPS ns as 8 bytes.
 */
void answer_statement(const struct answer_file *a, uint8_t out[static 64]);
/* T("quietbell/1/campaign/fingerprint", id, th, n, k, signing keys), first 16 bytes: what custodians publish. */
void answer_fingerprint(const struct answer_file *a, uint8_t out[static 16]);
/* The frame of a file about this campaign: everything but interval, answer and signatures. */
void answer_frame(struct answer_file *a, const struct campaign *k, const struct custody_group *g);
json_t *answer_json(const struct answer_file *a);
/* Errors: QB_FORMAT with the member at fault */
enum qb_status answer_read(const json_t *doc, struct answer_file *out, struct qb_error *e) QB_MUST_USE;
/* At least k valid signatures, and no false one. Errors: QB_NO */
enum qb_status answer_verify(const struct answer_file *a, struct qb_error *e) QB_MUST_USE;
/* What it says, as one sentence. Returns out. */
const char *answer_meaning(const struct answer_file *a, char *out, size_t size);
/* The verb `opening check`. */
enum qb_status cli_answer_check(struct cli_call *c) QB_MUST_USE;

#endif
