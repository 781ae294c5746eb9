/* The daemon's usage and manual page, from one table of verbs and the table of configuration keys. */
#ifndef QB_DAEMON_MAN_H
#define QB_DAEMON_MAN_H

#include "server/base/buf.h"

#define MAN_VERSION "1.0"

struct man_verb {
	const char *name, *usage, *help;
};
const struct man_verb *man_verbs(void); /* ends with a NULL name */

/* docs/man/quietbelld.8, whole (roff). */
void man_page(struct buf *out);

#endif
