/*
 * A custodian who deals badly, or complains falsely, over the real interface: what no client of ours would send.
 *   bad_dealer HOME SERVICE CAMPAIGN deal VICTIM     a deal whose share for number VICTIM is wrong, signed all the same
 *   bad_dealer HOME SERVICE CAMPAIGN reshare VICTIM  the same when a share is dealt on
 *   bad_dealer HOME SERVICE CAMPAIGN complain NUMBER a complaint about a good share
 * The passphrase is read as the client reads it.
 */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "client/link/follow.h"
#include "client/link/home.h"
#include "client/link/transport.h"
#include "server/base/alloc.h"
#include "server/base/text.h"
#include "server/custody/complaint.h"

struct me {
	struct home home;
	struct link link;
	struct follow follow;
	struct campaign *k;
	struct qb_error e;
};

static enum qb_status open_all(struct me *m, char **argv)
{
	enum qb_status st = home_open(argv[1], false, &m->home, &m->e);
	if (st == QB_OK)
		st = link_open(&m->link, &m->home, argv[2], &m->e);
	if (st == QB_OK)
		st = home_unlock(&m->home, NULL, true, &m->e);
	if (st == QB_OK)
		st = follow_open(&m->follow, &m->home, &m->e);
	if (st == QB_OK)
		st = follow_update(&m->follow, &m->link, &m->e);
	if (st == QB_OK && (m->k = view_campaign(&m->follow.view, argv[3])) == NULL)
		st = qb_fail(&m->e, QB_NOT_FOUND, "campaign", NULL, "is not there");
	return st;
}

/* Turns one bit of the share for `victim` and signs again. */
static void spoil(struct deal *d, uint32_t victim, const struct party_key *key, struct buf *out)
{
	d->share[victim - 1][5] ^= 1;
	deal_hash(d, d->hash);
	sign_bytes(key->seed, d->hash, 64, d->signature);
	buf_clear(out);
	deal_encode(d, out);
}

static enum qb_status post(struct me *m, const char *type, json_t *extra)
{
	json_t *body = NULL, *answer = NULL;
	char *path = text_printf("/v1/campaigns/%s/keygen/%s", m->k->name, type);
	enum qb_status st = link_entry(&m->link, type, m->k->id, "hostile", extra, &body, NULL, &m->e);
	if (st == QB_OK)
		st = link_post(&m->link, path, body, &answer, &m->e);
	json_decref(body);
	json_decref(answer);
	qb_free(path);
	return st;
}

static json_t *message(uint64_t attempt, const char *key, const struct buf *b)
{
	char *text = base64_encode(b->data, b->len);
	json_t *extra = json_object();
	json_object_set_new(extra, "attempt", json_integer((json_int_t)attempt));
	json_object_set_new(extra, key, json_string(text));
	qb_free(text);
	return extra;
}

static enum qb_status deal(struct me *m, uint32_t victim)
{
	struct deal *d = QB_NEW(struct deal);
	struct buf b = {0};
	uint8_t commitment[64] = {1};
	uint32_t i = (uint32_t)custodian_index(m->k, m->home.name) + 1;
	enum qb_status st = deal_make(&m->k->context, i, &m->home.key, &b, &m->e);
	if (st == QB_OK)
		st = deal_parse(&m->k->context, b.data, b.len, d, &m->e);
	if (st == QB_OK) {
		spoil(d, victim, &m->home.key, &b);
		json_t *extra = message(m->k->attempt, "message", &b);
		json_object_set_new(extra, "contribution_commitment", json_hex_new(commitment, 64));
		st = post(m, "deal", extra);
	}
	buf_free(&b);
	qb_free(d);
	return st;
}

static enum qb_status reshare(struct me *m, uint32_t victim)
{
	struct deal *d = QB_NEW(struct deal);
	struct buf b = {0};
	struct keyfile_share s = {0};
	const struct reshare_context *x = &m->k->reshare.context;
	int place = reshare_dealer(m->k, m->home.name);
	char *path;
	enum qb_status st = home_campaign_path(&m->home, m->k->id, "share.qbk", &path, &m->e);
	if (st == QB_OK)
		st = keyfile_read_share(path, m->home.passphrase, true, &s, &m->e);
	if (st == QB_OK && place < 0)
		st = qb_fail(&m->e, QB_REFUSED, "reshare", NULL, "not a dealer");
	if (st == QB_OK)
		st = reshare_make(x, x->dealer[place], &m->home.key, s.share, &b, &m->e);
	if (st == QB_OK)
		st = reshare_parse(x, b.data, b.len, d, &m->e);
	if (st == QB_OK) {
		spoil(d, victim, &m->home.key, &b);
		st = post(m, "reshare-deal", message(m->k->reshare_attempt, "message", &b));
	}
	secret_free(&s.share);
	buf_free(&b);
	qb_free(d);
	qb_free(path);
	return st;
}

static enum qb_status complain(struct me *m, uint32_t accused)
{
	struct deal *d = QB_NEW(struct deal);
	struct buf b = {0};
	const struct custodian *cu = &m->k->custodian[accused - 1];
	uint32_t i = (uint32_t)custodian_index(m->k, m->home.name) + 1;
	enum qb_status st = deal_parse(&m->k->context, cu->deal, cu->deal_n, d, &m->e);
	if (st == QB_OK)
		st = complaint_make(&m->k->context, d, i, &m->home.key, &b, &m->e);
	if (st == QB_OK) {
		json_t *extra = message(m->k->attempt, "complaint", &b);
		json_object_set_new(extra, "accused", json_string(cu->party->name));
		st = post(m, "complaint", extra);
	}
	buf_free(&b);
	qb_free(d);
	return st;
}

int main(int argc, char **argv)
{
	struct me *m = QB_NEW(struct me);
	char line[900];
	if (argc != 6)
		return 2;
	uint32_t number = (uint32_t)strtoul(argv[5], NULL, 10);
	enum qb_status st = secret_setup(&m->e);
	if (st == QB_OK)
		st = open_all(m, argv);
	if (st == QB_OK)
		st = strcmp(argv[4], "deal") == 0      ? deal(m, number)
		     : strcmp(argv[4], "reshare") == 0 ? reshare(m, number)
		                                       : complain(m, number);
	if (st != QB_OK)
		fprintf(stderr, "bad_dealer: %s\n", qb_error_line(&m->e, line, sizeof line));
	follow_close(&m->follow);
	link_close(&m->link);
	home_close(&m->home);
	qb_free(m);
	return qb_exit_status(st);
}
