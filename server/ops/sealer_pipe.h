/*
 * Messages between the service and its sealer: type, length, bytes over two pipes. Both ends are ours, yet every length
 * is bounded, since a sealer may also run on another machine one day.
 */
#ifndef QB_OPS_SEALER_PIPE_H
#define QB_OPS_SEALER_PIPE_H

#include "server/base/buf.h"

enum sealer_message {
	SEALER_JOB = 1,  /* to the sealer: JSON, nothing secret */
	SEALER_SERVICE,  /* to the sealer: the service's contribution, 32 bytes */
	SEALER_KEY,      /* from: the sealer's exchange point, 32 bytes */
	SEALER_BOX,      /* to: custodian index u32 (from 1), boxed contribution */
	SEALER_ACCEPTED, /* from: custodian index u32 */
	SEALER_REJECTED, /* from: custodian index u32; the attempt is over */
	SEALER_RECORD,   /* from: one slot's record, key and recipes (sealer.c) */
	SEALER_DONE,     /* from: number of slots u64 */
	SEALER_FAILED    /* from: one line of text */
};
#define SEALER_MESSAGE_MAX ((size_t)128 << 20)

/* False on a closed or broken pipe; read: also for a message over the bound. `body` is cleared first. */
bool sealer_write(int fd, enum sealer_message type, const void *body, size_t n);
bool sealer_read(int fd, enum sealer_message *type, struct buf *body);

#endif
