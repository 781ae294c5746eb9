/* A custodian's whole part before a campaign runs: deal, certify, rehearse, contribute; restartable at any point. */
#ifndef QB_CLIENT_CLI_KEYGEN_H
#define QB_CLIENT_CLI_KEYGEN_H

#include "client/cli/internal.h"

enum qb_status cli_keygen(struct cli_call *c) QB_MUST_USE;
/* The custodian's share of this campaign from its key file, checked against the group. The caller frees *out. */
enum qb_status cli_share(struct cli_call *c, const struct campaign *k, const struct custody_group *g,
                         struct secret **out) QB_MUST_USE;
/* Takes the share of a resharing that has taken effect into use; nothing when there is none. */
enum qb_status cli_share_adopt(struct cli_call *c, const struct campaign *k, const struct custody_group *g) QB_MUST_USE;

/*
 * A custodian's part, whatever is due: dealing, complaining, certifying, rehearsing, contributing, dealing on,
 * repairing, erasing. wait: goes on until the campaign is sealed and nothing is under way.
 */
enum qb_status cli_keygen_part(struct cli_call *c, const char *campaign, bool wait, int64_t seed) QB_MUST_USE;

#endif
