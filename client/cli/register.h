/*
 * The register: every campaign that was ever drafted on a service, so that nobody drafts, looks and drafts again in
 * silence; and who held the key of one, with every attempt that failed.
 */
#ifndef QB_CLIENT_CLI_REGISTER_H
#define QB_CLIENT_CLI_REGISTER_H

#include "server/base/json.h"
#include "server/view/view.h"

/* One object a campaign, in the order of drafting; the caller's. */
json_t *register_of(const struct view *v);
/* The custody of one campaign; the caller's. */
json_t *register_custody(const struct campaign *k);

#endif
