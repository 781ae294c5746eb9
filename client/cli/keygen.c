/*
 * The custodian's part of key generation as one command. Each turn looks at the verified ledger only, does the next
 * step that is this custodian's, and saves secrets before anything that depends on them is sent.
 */
#include "client/cli/keygen.h"

#include <stdio.h>
#include <string.h>
#include <time.h>
#include <unistd.h>

#include "client/cli/keygen_part.h"
#include "server/base/alloc.h"
#include "server/base/text.h"
#include "server/custody/box.h"
#include "server/custody/keyfile.h"
#include "server/custody/complaint.h"
#include "server/custody/seed.h"

static char *route(const struct part *p, const char *tail)
{
	return text_printf("/v1/campaigns/%s/%s", p->k->name, tail);
}

enum qb_status part_post(struct part *p, const char *type, const char *why, json_t *extra)
{
	char *tail = text_printf("keygen/%s", type), *path = route(p, tail);
	enum qb_status st = cli_post_entry(p->c, path, type, p->k->id, why, extra, NULL, NULL);
	qb_free(path);
	qb_free(tail);
	return st;
}

json_t *part_message(uint64_t attempt, const char *key, const struct buf *message)
{
	char *text = base64_encode(message->data, message->len);
	json_t *extra = json_object();
	json_object_set_new(extra, "attempt", json_integer((json_int_t)attempt));
	json_object_set_new(extra, key, json_string(text));
	qb_free(text);
	return extra;
}

static enum keyfile_level level_of(const struct part *p)
{
	return p->c->link.rehearsal ? KEYFILE_INTERACTIVE : KEYFILE_SENSITIVE;
}

/* ---- the contribution to the draw: made once per sealing attempt, kept until it is delivered ---- */

static enum qb_status contribution_path(const struct part *p, char **out)
{
	char name[64];
	(void)snprintf(name, sizeof name, "contribution-%llu-%llu.qbk", (unsigned long long)p->k->attempt,
	               (unsigned long long)p->k->sealing_attempt);
	return home_campaign_path(&p->c->home, p->k->id, name, out, &p->c->error);
}

static enum qb_status contribution(const struct part *p, struct secret **out)
{
	char *path;
	enum qb_status st = contribution_path(p, &path);
	if (st != QB_OK)
		return st;
	if (access(path, F_OK) == 0) {
		st = keyfile_read(path, KEYFILE_OTHER, p->c->home.passphrase, p->c->link.rehearsal, out, NULL,
		                  &p->c->error);
	} else {
		*out = secret_random(CONTRIBUTION_BYTES);
		if (p->seed >= 0) {
			struct transcript t;
			uint8_t h[64];
			transcript_begin(&t, "quietbell/1/rehearsal/contribution");
			transcript_u64(&t, (uint64_t)p->seed);
			transcript_field(&t, p->k->context.ctx, 64);
			transcript_u64(&t, p->k->sealing_attempt);
			transcript_u64(&t, (uint64_t)p->i + 1);
			transcript_end(&t, h);
			memcpy(secret_bytes(*out), h, CONTRIBUTION_BYTES);
		}
		/* it is of use for hours, not years: the level of party keys will do */
		st = keyfile_write(path, KEYFILE_OTHER, p->c->link.rehearsal ? KEYFILE_INTERACTIVE : KEYFILE_MODERATE,
		                   p->c->home.passphrase, *out, &p->c->error);
		if (st != QB_OK)
			secret_free(out);
	}
	qb_free(path);
	return st;
}

static enum qb_status commitment(const struct part *p, uint8_t out[static 64])
{
	struct secret *s = NULL;
	enum qb_status st = contribution(p, &s);
	if (st == QB_OK)
		seed_commit(p->k->context.ctx, p->k->sealing_attempt, (uint64_t)p->i + 1, secret_view(s), out);
	secret_free(&s);
	return st;
}

/* ---- the steps ---- */

static enum qb_status step_deal(struct part *p)
{
	struct buf deal = {0};
	uint8_t commit[64];
	enum qb_status st = commitment(p, commit);
	if (st == QB_OK)
		st = deal_make(&p->k->context, (uint32_t)p->i + 1, &p->c->home.key, &deal, &p->c->error);
	if (st == QB_OK) {
		json_t *extra = part_message(p->k->attempt, "message", &deal);
		json_object_set_new(extra, "contribution_commitment", json_hex_new(commit, 64));
		st = part_post(p, "deal", "key generation", extra);
	}
	if (st == QB_OK)
		cli_note(p->c, "%s: dealt shares to all %d custodians\n", p->name, p->k->n);
	buf_free(&deal);
	return st;
}

static enum qb_status parse_deals(const struct part *p, struct deal *out)
{
	enum qb_status st = QB_OK;
	for (int i = 0; st == QB_OK && i < p->k->n; i++)
		st = deal_parse(&p->k->context, p->k->custodian[i].deal, p->k->custodian[i].deal_n, &out[i],
		                &p->c->error);
	return st;
}

/* A bad share ends the attempt, and the complaint proves to everybody who is at fault. */
static enum qb_status complain(struct part *p, int who, const struct deal *d)
{
	char why[900];
	struct buf b = {0};
	struct qb_error first = p->c->error;
	json_t *extra;
	qb_error_line(&first, why, sizeof why);
	why[300] = '\0';
	p->c->error = (struct qb_error){0};
	enum qb_status st = complaint_make(&p->k->context, d, (uint32_t)p->i + 1, &p->c->home.key, &b, &p->c->error);
	if (st == QB_OK) {
		extra = part_message(p->k->attempt, "complaint", &b);
		json_object_set_new(extra, "accused", json_string(p->k->custodian[who].party->name));
		st = part_post(p, "complaint", why, extra);
	}
	buf_free(&b);
	if (st == QB_OK)
		cli_note(p->c, "%s: complained about the share that %s dealt; the next attempt is without one of us\n",
		         p->name, p->k->custodian[who].party->name);
	return st;
}

/* *complained: the attempt is over. */
static enum qb_status check_each(struct part *p, const struct deal *deals, bool *complained)
{
	enum qb_status st = QB_OK;
	for (int i = 0; st == QB_OK && i < p->k->n && !*complained; i++) {
		struct secret *share = NULL;
		if ((st = deal_check(&p->k->context, &deals[i], &p->c->error)) != QB_OK)
			break; /* the service let in what anybody can see to be false */
		if (deal_take(&p->k->context, &deals[i], (uint32_t)p->i + 1, &p->c->home.key, &share, &p->c->error) !=
		    QB_OK) {
			*complained = true;
			st = complain(p, i, &deals[i]);
		}
		secret_free(&share);
	}
	return st;
}

enum qb_status part_save_share(struct part *p, const char *file, const struct custody_group *g, uint32_t index,
                               struct secret *share)
{
	char *path;
	struct keyfile_share s = {.epoch = g->epoch, .index = index, .share = share};
	memcpy(s.campaign, p->k->id, 16);
	memcpy(s.th, g->th, 64);
	enum qb_status st = home_campaign_path(&p->c->home, p->k->id, file, &path, &p->c->error);
	if (st == QB_OK)
		st = keyfile_write_share(path, level_of(p), p->c->home.passphrase, &s, &p->c->error);
	qb_free(path);
	return st;
}

static enum qb_status step_certify(struct part *p)
{
	struct deal *deals = QB_NEW_ARRAY(struct deal, (size_t)p->k->n);
	struct custody_group *g = QB_NEW(struct custody_group);
	struct secret *share = NULL;
	uint8_t certificate[64], signature[SIGN_BYTES];
	bool complained = false;
	enum qb_status st = parse_deals(p, deals);
	if (st == QB_OK)
		st = check_each(p, deals, &complained);
	if (complained) {
		qb_free(deals);
		qb_free(g);
		return st;
	}
	if (st == QB_OK)
		st = keygen_share(&p->k->context, deals, (uint32_t)p->i + 1, &p->c->home.key, g, &share, &p->c->error);
	if (st == QB_OK)
		st = part_save_share(p, SHARE_FILE, g, (uint32_t)p->i + 1, share);
	if (st == QB_OK) {
		json_t *extra = json_object();
		keygen_certificate_hash(g, certificate);
		keygen_certificate_sign(g, p->c->home.key.seed, signature);
		json_object_set_new(extra, "attempt", json_integer((json_int_t)p->k->attempt));
		json_object_set_new(extra, "certificate", json_hex_new(certificate, 64));
		json_object_set_new(extra, "certificate_signature", json_hex_new(signature, SIGN_BYTES));
		st = part_post(p, "certify", "every check passed", extra);
	}
	if (st == QB_OK)
		cli_note(p->c, "%s: checked every deal, keeps a share, certified the group key\n", p->name);
	secret_free(&share);
	qb_free(deals);
	qb_free(g);
	return st;
}

static enum qb_status read_share(struct cli_call *c, const struct campaign *k, const char *file,
                                 const struct custody_group *g, struct secret **out)
{
	char *path;
	struct keyfile_share s = {0};
	enum qb_status st = home_campaign_path(&c->home, k->id, file, &path, &c->error);
	if (st == QB_OK)
		st = keyfile_read_share(path, c->home.passphrase, c->link.rehearsal, &s, &c->error);
	if (st == QB_OK && (memcmp(s.campaign, k->id, 16) != 0 || memcmp(s.th, g->th, 64) != 0)) {
		st = qb_fail(&c->error, QB_CRYPTO, path, "restore the share of this campaign, or ask for its repair",
		             "is of another key generation or resharing");
		secret_free(&s.share);
	}
	qb_free(path);
	*out = s.share;
	return st;
}

/* After a resharing the share of the new set takes the place of the old one, which is erased. */
enum qb_status cli_share_adopt(struct cli_call *c, const struct campaign *k, const struct custody_group *g)
{
	char *next, *now;
	struct secret *share = NULL;
	struct qb_error before = c->error;
	enum qb_status st = home_campaign_path(&c->home, k->id, SHARE_NEXT, &next, &c->error);
	if (st != QB_OK)
		return st;
	if (access(next, F_OK) == 0 &&
	    (st = home_campaign_path(&c->home, k->id, SHARE_FILE, &now, &c->error)) == QB_OK) {
		if (read_share(c, k, SHARE_NEXT, g, &share) == QB_OK)
			st = home_replace(next, now, &c->error);
		secret_free(&share);
		qb_free(now);
	}
	if (st == QB_OK)
		c->error = before;
	qb_free(next);
	return st;
}

enum qb_status cli_share(struct cli_call *c, const struct campaign *k, const struct custody_group *g,
                         struct secret **out)
{
	enum qb_status st = cli_share_adopt(c, k, g);
	*out = NULL;
	return st == QB_OK ? read_share(c, k, SHARE_FILE, g, out) : st;
}

enum qb_status part_rehearse(struct part *p, const char *type, uint64_t attempt, const struct custody_group *g,
                             const uint8_t leaf[static 32], const uint8_t *canary, size_t canary_n,
                             uint64_t canary_index, uint32_t index, const struct secret *share)
{
	struct record rec;
	struct buf partial = {0};
	struct partial_authority auth = {.purpose = PARTIAL_REHEARSAL};
	memcpy(auth.hash, leaf, 32);
	enum qb_status st = record_check(g, canary, canary_n, &rec, &p->c->error);
	if (st == QB_OK)
		st = record_expect(&rec, RECORD_CANARY, canary_index, &p->c->error);
	if (st == QB_OK)
		st = partial_make(g, &rec, index, share, &auth, &partial, &p->c->error);
	if (st == QB_OK) {
		char *path = route(p, "sealer/rehearsals");
		json_t *extra = part_message(attempt, "share", &partial);
		json_object_set_new(extra, "record_id", json_hex_new(rec.id, 64));
		st = cli_post_entry(p->c, path, type, p->k->id, "rehearsal of the opening", extra, NULL, NULL);
		qb_free(path);
	}
	if (st == QB_OK)
		cli_note(p->c, "%s: opened the canary\n", p->name);
	buf_free(&partial);
	return st;
}

static enum qb_status step_rehearse(struct part *p)
{
	struct custody_group *g = QB_NEW(struct custody_group);
	struct secret *share = NULL;
	enum qb_status st = campaign_certified_group(p->k, g, &p->c->error);
	if (st == QB_OK)
		st = cli_share(p->c, p->k, g, &share);
	if (st == QB_OK)
		st = part_rehearse(p, "rehearsal", p->k->attempt, g, p->k->canary_leaf, p->k->canary, p->k->canary_n,
		                   p->k->canary_index, (uint32_t)p->i + 1, share);
	secret_free(&share);
	qb_free(g);
	return st;
}

static enum qb_status step_commit(struct part *p)
{
	uint8_t commit[64];
	enum qb_status st = commitment(p, commit);
	if (st != QB_OK)
		return st;
	char *path = route(p, "keygen/commit");
	json_t *extra = json_object();
	json_object_set_new(extra, "sealing_attempt", json_integer((json_int_t)p->k->sealing_attempt));
	json_object_set_new(extra, "contribution_commitment", json_hex_new(commit, 64));
	st = cli_post_entry(p->c, path, "contribution-commitment", p->k->id, "the sealing failed before", extra, NULL,
	                    NULL);
	qb_free(path);
	return st;
}

static enum qb_status step_contribute(struct part *p)
{
	struct secret *s = NULL;
	struct buf box = {0};
	/* Whoever runs another sealer than the plan's would learn the draw from the contributions. */
	if (p->k->plan->has_sealer_host && !p->k->host_signed_key)
		return qb_fail(&p->c->error, QB_CRYPTO, "sealing", "do not contribute; tell the other custodians",
		               "the sealer that waits is not signed by the plan's sealer host");
	enum qb_status st = contribution(p, &s);
	if (st == QB_OK)
		st = box_seal(p->k->sealer_key, BOX_SEALER, p->k->context.ctx, 64, secret_view(s), CONTRIBUTION_BYTES,
		              CONTRIBUTION_BYTES, &box, &p->c->error);
	if (st == QB_OK) {
		char *text = base64_encode(box.data, box.len), *path = route(p, "sealer/contributions");
		json_t *extra = json_object();
		json_object_set_new(extra, "sealing_attempt", json_integer((json_int_t)p->k->sealing_attempt));
		json_object_set_new(extra, "box", json_string(text));
		st = cli_post_entry(p->c, path, "contribution", p->k->id, "the sealer waits", extra, NULL, NULL);
		qb_free(text);
		qb_free(path);
	}
	if (st == QB_OK)
		cli_note(p->c, "%s: contributed to the draw\n", p->name);
	secret_free(&s);
	buf_free(&box);
	return st;
}

/* After the sealing the contribution has no use any more, and must not be found. */
static enum qb_status step_finish(struct part *p)
{
	char *path;
	enum qb_status st = contribution_path(p, &path);
	if (st == QB_OK)
		(void)unlink(path);
	qb_free(path);
	cli_note(p->c, "%s: the campaign is sealed; keep %s/campaigns and its passphrase for the opening\n", p->name,
	         p->c->home.dir);
	return st;
}

/* One turn: the step that is due, or *idle. */
static enum qb_status turn(struct part *p, bool *idle, bool *done)
{
	*idle = true;
	if (campaign_over(p->k) && p->k->state < C_SEALED)
		return qb_fail(&p->c->error, QB_NO, p->k->name, "nothing more is to do", "was abandoned by %s: %.200s",
		               p->k->ended_by, p->k->ended_why);
	enum qb_status st = part_later(p, idle);
	if (p->left)
		*done = true;
	if (st != QB_OK || !*idle || p->left)
		return st;
	*done = p->k->state >= C_SEALED && !p->k->reshare.under_way && !p->k->repair.under_way;
	/* Who waits for the repair of a share can do nothing with it yet. */
	if (p->i < 0 || (p->k->repair.under_way && p->i == p->k->repair.lost))
		return QB_OK;
	const struct custodian *me = &p->k->custodian[p->i];
	bool canary = p->k->canary_seq != NO_SEQ && me->rehearsal_seq == NO_SEQ && p->k->state <= C_CLOSED;
	*idle = false;
	if (canary && p->k->state >= C_CERTIFIED) {
		*done = false;
		return step_rehearse(p);
	}
	if (*done)
		return step_finish(p);
	if (p->k->stalled)
		return qb_fail(&p->c->error, QB_NO, "key generation", "draft a new plan with other custodians",
		               "too few custodians are left");
	bool drafted = p->k->state == C_DRAFTED;
	if (drafted && me->deal_seq == NO_SEQ)
		return step_deal(p);
	if (drafted && p->k->has_group && me->certify_seq == NO_SEQ)
		return step_certify(p);
	if (p->k->state == C_REHEARSED && me->commitment_seq == NO_SEQ)
		return step_commit(p);
	if (p->k->state == C_SEALING && me->contribution_seq == NO_SEQ)
		return step_contribute(p);
	*idle = true;
	return QB_OK;
}

static enum qb_status find_part(struct part *p, const char *campaign)
{
	struct cli_call *c = p->c;
	enum qb_status st = cli_campaign(c, campaign, &p->k);
	if (st != QB_OK)
		return st;
	p->name = c->home.name;
	p->i = custodian_index(p->k, p->name);
	for (int f = 0; f < p->k->n_failures; f++) {
		const struct custody_failure *x = &p->k->failure[f];
		if (x->kind == ATTEMPT_KEYGEN && strcmp(x->excluded, p->name) == 0)
			return qb_fail(&c->error, QB_NO, "key generation", NULL,
			               "%s was left out after attempt %llu: %s %s", p->name,
			               (unsigned long long)x->attempt, p->name, x->how);
	}
	if (p->i < 0 && reshare_member(p->k, p->name) < 0 && campaign_owes(p->k, p->name) == NULL)
		return qb_fail(&c->error, QB_REFUSED, "campaign", NULL, "%s is no custodian of '%s'", p->name,
		               p->k->name);
	if (p->seed >= 0 && !c->link.rehearsal)
		return qb_fail(&c->error, QB_REFUSED, "--rehearsal-seed", NULL,
		               "is for services with a rehearsal clock");
	return QB_OK;
}

enum qb_status cli_keygen_part(struct cli_call *c, const char *campaign, bool wait, int64_t seed)
{
	struct part p = {.c = c, .seed = seed};
	struct timespec pause = {0, 150000000};
	bool done = false;
	enum qb_status st = QB_OK;
	while (st == QB_OK && !done) {
		bool idle = false;
		if ((st = find_part(&p, campaign)) == QB_OK)
			st = turn(&p, &idle, &done);
		if (st == QB_OK && idle && !wait)
			break;
		if (st == QB_OK && idle && !done)
			nanosleep(&pause, NULL);
	}
	/* A custodian holds the service to one history: every command ends with a cosignature. */
	if (st == QB_OK)
		st = cli_follow(c);
	return st == QB_OK ? follow_cosign(&c->follow, &c->link, &c->error) : st;
}

enum qb_status cli_keygen(struct cli_call *c)
{
	int64_t seed;
	enum qb_status st = cli_option_int(c, "rehearsal-seed", 0, INT64_MAX, -1, &seed);
	return st == QB_OK ? cli_keygen_part(c, cli_arg(c, 0), cli_option(c, "wait") != NULL, seed) : st;
}
