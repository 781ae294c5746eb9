/* A custodian's whole part before a campaign runs: deal, certify, rehearse, contribute; restartable at any point. */
#ifndef QB_CLIENT_CLI_KEYGEN_H
#define QB_CLIENT_CLI_KEYGEN_H

#include "client/cli/internal.h"

enum qb_status cli_keygen(struct cli_call *c) QB_MUST_USE;
/* The custodian's share of this campaign from its key file, checked against the group. The caller frees *out. */
enum qb_status cli_share(struct cli_call *c, const struct campaign *k, const struct custody_group *g,
                         struct secret **out) QB_MUST_USE;

#endif
