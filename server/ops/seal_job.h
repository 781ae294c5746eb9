/* A sealing under way, between its use cases (seal_cases.c) and its thread (seal.c). */
#ifndef QB_OPS_SEAL_JOB_H
#define QB_OPS_SEAL_JOB_H

#include "server/ops/internal.h"
#include "server/ops/seal_channel.h"

struct seal_job {
	struct ops *o;
	struct campaign *c;
	pthread_t thread;
	struct seal_channel *channel;
	uint8_t sealer_key[32], host_signature[64]; /* zeros without a host */
	bool started, ended;                        /* the campaign's projection says the rest */
	bool cancelled;
	struct buf boxes[CUSTODY_MAX]; /* waiting to be relayed, by custodian from 0 */
	bool relayed[CUSTODY_MAX];
	int64_t done;
	struct secret *contribution;
	uint8_t commitment[64];
	char failure[400];
};

/*
 * Starts a sealer for the campaign, local or behind a post box, and the thread that takes over what comes out.
 * Under the lock. On success the campaign owns the job.
 */
enum qb_status seal_job_start(struct ops *o, struct campaign *c, bool remote, struct qb_error *e) QB_MUST_USE;
/* Forgets a job that has ended; its thread needs the lock no more, so it can be joined under it. */
void seal_job_drop(struct campaign *c);

#endif
