/*
 * Messages between the service and its sealer: type, length, bytes, over pipes on one machine, or over a socket or as
 * files when the sealer has a host of its own. Nothing secret is in them: the job is public, contributions and slot
 * keys are boxed, records and recipes are sealed. Every length is bounded, since the other end may be anybody.
 */
#ifndef QB_WIRE_SEALER_FRAME_H
#define QB_WIRE_SEALER_FRAME_H

#include "server/base/buf.h"

enum sealer_message {
	SEALER_JOB = 1, /* to the sealer: JSON */
	SEALER_KEY = 3, /* from: the sealer's exchange point 32 | statement 64 | a host's signature of it 64, if any */
	SEALER_BOX = 4, /* to: who u32 (0 the service, custodians from 1), boxed contribution */
	SEALER_ACCEPTED = 5, /* from: who u32 */
	SEALER_REJECTED = 6, /* from: who u32; the attempt is over */
	SEALER_RECORD = 7,   /* from: one slot's record, boxed key and recipes (sealer.c) */
	SEALER_DONE = 8,     /* from: number of slots u64 | statement 64 | a host's signature of it 64, if any */
	SEALER_FAILED = 9    /* from: one line of text */
};
#define SEALER_MESSAGE_MAX ((size_t)128 << 20)

/* False on a closed or broken pipe; read: also for a message over the bound. `body` is cleared first. */
bool sealer_write(int fd, enum sealer_message type, const void *body, size_t n);
bool sealer_read(int fd, enum sealer_message *type, struct buf *body);

#endif
