/*
 * Server-Sent Events for boards: the ledger's size and the service's clock. Everybody gets the same two public numbers;
 * a stream that reads slowly gets only the newest. One thread waits for news and wakes the suspended connections.
 */
#ifndef QB_API_EVENTS_H
#define QB_API_EVENTS_H

#include <microhttpd.h>

#include "server/ops/ops.h"

struct events;

/*
 * Given:    most   streams at once; a further one is refused
 */
struct events *events_start(struct ops *ops, int most);
/* Ends every stream; afterwards none is accepted. Call it before the HTTP daemon stops. */
void events_end(struct events *ev);
void events_free(struct events **ev);

/* A streaming response for one connection, or NULL when there are too many streams. */
struct MHD_Response *events_stream(struct events *ev, struct MHD_Connection *connection);
int events_count(struct events *ev);

#endif
