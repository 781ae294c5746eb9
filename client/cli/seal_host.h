/* Sealing on another machine, the administrator's part: a carrier of messages. */
#ifndef QB_CLIENT_CLI_SEAL_HOST_H
#define QB_CLIENT_CLI_SEAL_HOST_H

#include "client/cli/internal.h"

/*
 * Asks for the sealing and carries messages until the sealer has said its last word.
 *
 * Given:    host_file   YAML: address: HOST:PORT, or folder: DIR
 * Errors:   QB_FORMAT, QB_UNREACHABLE, what the service refuses
 */
enum qb_status cli_seal_relay(struct cli_call *c, const struct campaign *k, const char *host_file) QB_MUST_USE;
/* Posts the seal request. */
enum qb_status cli_seal_ask(struct cli_call *c, const struct campaign *k, bool remote) QB_MUST_USE;

#endif
