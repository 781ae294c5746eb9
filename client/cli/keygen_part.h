/* Inside `campaign keygen`: one custodian's part, whatever is due. keygen.c, keygen_later.c */
#ifndef QB_CLIENT_CLI_KEYGEN_PART_H
#define QB_CLIENT_CLI_KEYGEN_PART_H

#include "client/cli/internal.h"

struct part {
	struct cli_call *c;
	const char *name;
	struct campaign *k;
	int i; /* own position among the custodians in office, from 0; -1: not in office (yet, or any more) */
	int64_t seed;
	bool left;   /* the last thing to do for this campaign is done */
	bool waited; /* it was said that an erasure waits */
};

/* Posts one entry of the key generation's route; extra is taken over. */
enum qb_status part_post(struct part *p, const char *type, const char *why, json_t *extra) QB_MUST_USE;
/* A message in base64 with its attempt. */
json_t *part_message(uint64_t attempt, const char *key, const struct buf *message);
/* Keeps a share of group g in a file of the campaign's directory. */
enum qb_status part_save_share(struct part *p, const char *file, const struct custody_group *g, uint32_t index,
                               struct secret *share) QB_MUST_USE;
/* Opens a canary with a share and posts the rehearsal. */
enum qb_status part_rehearse(struct part *p, const char *type, uint64_t attempt, const struct custody_group *g,
                             const uint8_t leaf[static 32], const uint8_t *canary, size_t canary_n,
                             uint64_t canary_index, uint32_t index, const struct secret *share) QB_MUST_USE;

/* What a resharing, its end, or a repair wants of this party; *idle stays true when nothing is. keygen_later.c */
enum qb_status part_later(struct part *p, bool *idle) QB_MUST_USE;

#define SHARE_FILE "share.qbk"
#define SHARE_NEXT "share-next.qbk" /* of a resharing that has not taken effect yet */

#endif
