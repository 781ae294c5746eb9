/*
 * How the service talks to its sealer: over two pipes to a process of its own, or through a post box that the
 * administrator's client empties and fills when the sealer runs on another machine. The thread of the sealing sees no
 * difference.
 */
#ifndef QB_OPS_SEAL_CHANNEL_H
#define QB_OPS_SEAL_CHANNEL_H

#include <sys/types.h>

#include "server/base/buf.h"
#include "server/base/json.h"
#include "server/wire/sealer_frame.h"

struct seal_channel;

/* Over pipes; the process is ended and waited for when the channel is closed. */
struct seal_channel *seal_channel_local(int to_fd, int from_fd, pid_t pid);
/* A post box. */
struct seal_channel *seal_channel_remote(void);
bool seal_channel_is_remote(const struct seal_channel *ch);

/* False on a broken pipe or after seal_channel_break. */
bool seal_channel_send(struct seal_channel *ch, enum sealer_message type, const void *body, size_t n);
/* Waits; a post box for a day at most. */
bool seal_channel_receive(struct seal_channel *ch, enum sealer_message *type, struct buf *body);
/* Ends every waiting, from any thread: kills the local process, closes the post box. */
void seal_channel_break(struct seal_channel *ch);
/* Frees it; waits for the local process. No other thread uses it any more. */
void seal_channel_close(struct seal_channel **ch);

/*
 * The post box's outside. Messages are numbered from 0 on each side.
 *
 * collect: appends {"type", "body"} objects for the messages to the sealer from number `from` on, up to about 8 MiB.
 * deliver: takes one message from the sealer. Errors: QB_CONFLICT a number that is not the next; QB_REFUSED when too
 * much waits already or the box is closed. A number that was taken before is passed over.
 */
void seal_channel_collect(struct seal_channel *ch, uint64_t from, json_t *out, bool *closed);
enum qb_status seal_channel_deliver(struct seal_channel *ch, uint64_t number, enum sealer_message type,
                                    struct buf *body, struct qb_error *e) QB_MUST_USE;
uint64_t seal_channel_delivered(struct seal_channel *ch);

#endif
