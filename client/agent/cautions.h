/* What the driver says to people when it starts: the usual cautions, and the limits it will hold the drives to. */
#ifndef QB_AGENT_CAUTIONS_H
#define QB_AGENT_CAUTIONS_H

#include "server/base/buf.h"
#include "server/drill/plan.h"

/* Lines of text, appended. */
void cautions_text(const struct drill_plan *plan, int station, struct buf *out);

#endif
