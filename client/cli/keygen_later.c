/*
 * A custodian's part after the key generation: dealing the share on to a new set, joining a new set, stating that an
 * old share is erased, helping to repair a lost one, and putting one's own together again.
 */
#include <stdio.h>
#include <string.h>
#include <unistd.h>

#include "client/cli/keygen.h"
#include "client/cli/keygen_part.h"
#include "server/base/alloc.h"
#include "server/base/text.h"
#include "server/custody/complaint.h"

/* ---- resharing ---- */

static enum qb_status deal_on(struct part *p, int place)
{
	const struct reshare_context *x = &p->k->reshare.context;
	struct custody_group *g = QB_NEW(struct custody_group);
	struct secret *share = NULL;
	struct buf b = {0};
	enum qb_status st = campaign_certified_group(p->k, g, &p->c->error);
	if (st == QB_OK)
		st = cli_share(p->c, p->k, g, &share);
	if (st == QB_OK)
		st = reshare_make(x, x->dealer[place], &p->c->home.key, share, &b, &p->c->error);
	if (st == QB_OK)
		st = part_post(p, "reshare-deal", "resharing", part_message(p->k->reshare_attempt, "message", &b));
	if (st == QB_OK)
		cli_note(p->c, "%s: dealt the share on to %u custodians\n", p->name, (unsigned)x->n);
	secret_free(&share);
	buf_free(&b);
	qb_free(g);
	return st;
}

static enum qb_status complain(struct part *p, const struct deal *d, uint32_t me)
{
	const struct reshare_view *r = &p->k->reshare;
	struct dealing g = reshare_dealing(&r->context);
	struct buf b = {0};
	char why[900];
	qb_error_line(&p->c->error, why, sizeof why);
	why[300] = '\0';
	p->c->error = (struct qb_error){0};
	enum qb_status st = complaint_dealing_make(&g, d, me, &p->c->home.key, &b, &p->c->error);
	if (st == QB_OK) {
		const char *accused = p->k->custodian[d->from - 1].party->name;
		json_t *extra = part_message(p->k->reshare_attempt, "complaint", &b);
		json_object_set_new(extra, "accused", json_string(accused));
		cli_note(p->c, "%s: complains about the part that %s dealt; this attempt is over\n", p->name, accused);
		st = part_post(p, "reshare-complaint", why, extra);
	}
	buf_free(&b);
	return st;
}

static enum qb_status join_set(struct part *p, int i)
{
	const struct reshare_view *r = &p->k->reshare;
	struct deal *deals = QB_NEW_ARRAY(struct deal, (size_t)p->k->k);
	struct custody_group *g = QB_NEW(struct custody_group);
	struct secret *share = NULL, *part = NULL;
	uint8_t certificate[64], signature[SIGN_BYTES];
	bool complained = false;
	uint32_t me = (uint32_t)i + 1;
	/* Whose shares are dealt on follows from the ledger, not from the service's word. */
	enum qb_status st = campaign_certified_group(p->k, g, &p->c->error);
	if (st == QB_OK)
		st = reshare_deals(p->k, deals, &p->c->error);
	for (int d = 0; st == QB_OK && d < p->k->k && !complained; d++) {
		if ((st = reshare_check(&r->context, &deals[d], &p->c->error)) != QB_OK)
			break;
		complained = reshare_take(&r->context, &deals[d], me, &p->c->home.key, &part, &p->c->error) != QB_OK;
		secret_free(&part);
		if (complained)
			st = complain(p, &deals[d], me);
	}
	if (st == QB_OK && !complained)
		st = reshare_share(&r->context, deals, me, &p->c->home.key, g, &share, &p->c->error);
	if (st == QB_OK && !complained)
		st = part_save_share(p, SHARE_NEXT, g, me, share);
	if (st == QB_OK && !complained) {
		json_t *extra = json_object();
		keygen_certificate_hash(g, certificate);
		keygen_certificate_sign(g, p->c->home.key.seed, signature);
		json_object_set_new(extra, "attempt", json_integer((json_int_t)p->k->reshare_attempt));
		json_object_set_new(extra, "certificate", json_hex_new(certificate, 64));
		json_object_set_new(extra, "certificate_signature", json_hex_new(signature, SIGN_BYTES));
		st = part_post(p, "reshare-certify", "every check passed", extra);
		if (st == QB_OK)
			cli_note(p->c, "%s: keeps a share of the same key in the new set, certified it\n", p->name);
	}
	secret_free(&share);
	qb_free(deals);
	qb_free(g);
	return st;
}

static enum qb_status rehearse_next(struct part *p, int i)
{
	const struct reshare_view *r = &p->k->reshare;
	struct keyfile_share s = {0};
	char *path;
	enum qb_status st = home_campaign_path(&p->c->home, p->k->id, SHARE_NEXT, &path, &p->c->error);
	if (st != QB_OK)
		return st;
	st = keyfile_read_share(path, p->c->home.passphrase, p->c->link.rehearsal, &s, &p->c->error);
	if (st == QB_OK)
		st = part_rehearse(p, "reshare-rehearsal", p->k->reshare_attempt, &r->group, r->canary_leaf,
		                   r->canary.data, r->canary.len, r->canary_index, (uint32_t)i + 1, s.share);
	secret_free(&s.share);
	qb_free(path);
	return st;
}

static enum qb_status reshare_turn(struct part *p, bool *idle)
{
	const struct reshare_view *r = &p->k->reshare;
	int dealer = reshare_dealer(p->k, p->name), member = reshare_member(p->k, p->name);
	*idle = false;
	if (dealer >= 0 && r->deal[dealer].len == 0)
		return deal_on(p, dealer);
	if (member >= 0 && r->has_group && r->member[member].certify_seq == NO_SEQ)
		return join_set(p, member);
	if (member >= 0 && r->canary_seq != NO_SEQ && r->member[member].rehearsal_seq == NO_SEQ)
		return rehearse_next(p, member);
	*idle = true;
	return QB_OK;
}

/* ---- after a resharing ---- */

/* What no longer counts leaves this home: a share of a former epoch, or what a failed resharing dealt. */
static enum qb_status erase_files(struct part *p, bool in_office)
{
	struct custody_group *g = QB_NEW(struct custody_group);
	char *next = NULL, *now = NULL;
	enum qb_status st = campaign_certified_group(p->k, g, &p->c->error);
	if (st == QB_OK && in_office)
		st = cli_share_adopt(p->c, p->k, g);
	if (st == QB_OK)
		st = home_campaign_path(&p->c->home, p->k->id, SHARE_NEXT, &next, &p->c->error);
	if (st == QB_OK)
		st = home_campaign_path(&p->c->home, p->k->id, SHARE_FILE, &now, &p->c->error);
	/* what the adoption left there fits no group */
	if (st == QB_OK)
		st = home_erase(next, &p->c->error);
	if (st == QB_OK && !in_office)
		st = home_erase(now, &p->c->error);
	qb_free(next);
	qb_free(now);
	qb_free(g);
	return st;
}

/*
 * The parts that were dealt stand in the ledger for ever, encrypted to this party's exchange key: a share is gone only
 * when that key is. So the party's keys are replaced before it states that the share is erased.
 */
static enum qb_status erase_turn(struct part *p, bool *idle)
{
	const struct erasure_owed *owed = campaign_owes(p->k, p->name);
	const struct view_party *me = view_party_named(&p->c->follow.view, p->name);
	if (owed == NULL || me == NULL)
		return QB_OK;
	if (me->key_seq < owed->seq && view_keys_in_use(&p->c->follow.view, me)) {
		if (!p->waited)
			cli_note(p->c, "%s: an old share waits to be erased until the keys can be replaced\n", p->name);
		p->waited = true;
		return QB_OK;
	}
	*idle = false;
	uint64_t epoch = owed->epoch;
	json_t *extra = json_object();
	json_object_set_new(extra, "epoch", json_integer((json_int_t)epoch));
	enum qb_status st = erase_files(p, p->i >= 0);
	if (st == QB_OK && me->key_seq < owed->seq)
		st = cli_rotate(p->c, "a share that was dealt to the old keys is erased");
	if (st == QB_OK)
		st = part_post(p, "share-erased",
		               epoch > 0 ? "another set is in office" : "the resharing came to nothing", extra);
	else
		json_decref(extra);
	if (st == QB_OK)
		cli_note(p->c,
		         "%s: erased what counts no more, replaced the keys it was dealt to, and stated it. Destroy "
		         "copies on paper and in backups too, and make new ones.\n",
		         p->name);
	int debts = 0;
	for (int i = 0; i < p->k->n_owed; i++)
		debts += strcmp(p->k->owed[i].party->name, p->name) == 0;
	p->left = st == QB_OK && debts == 1 && p->i < 0 && reshare_member(p->k, p->name) < 0;
	return st;
}

/* ---- repair ---- */

static enum qb_status read_splits(const struct part *p, struct repair_split *out, bool *all)
{
	const struct repair_view *r = &p->k->repair;
	enum qb_status st = QB_OK;
	*all = true;
	for (int i = 0; i < p->k->k; i++)
		*all = *all && r->split[i].len > 0;
	for (int i = 0; *all && st == QB_OK && i < p->k->k; i++)
		st = repair_split_parse(&r->context, r->split[i].data, r->split[i].len, &out[i], &p->c->error);
	return st;
}

static enum qb_status give_up(struct part *p)
{
	char why[900];
	json_t *extra = json_object();
	struct qb_error first = p->c->error;
	qb_error_line(&first, why, sizeof why);
	why[300] = '\0';
	json_object_set_new(extra, "attempt", json_integer((json_int_t)p->k->repair_attempt));
	p->c->error = (struct qb_error){0};
	enum qb_status st = part_post(p, "repair-failed", why, extra);
	if (st == QB_OK)
		st = qb_fail(&p->c->error, QB_NO, "repair", "ask again with other helpers", "abandoned: %.300s", why);
	return st;
}

static enum qb_status help(struct part *p, int place, bool *idle)
{
	const struct repair_view *r = &p->k->repair;
	uint32_t me = r->context.helper[place];
	struct repair_split *splits = QB_NEW_ARRAY(struct repair_split, (size_t)p->k->k);
	struct custody_group *g = QB_NEW(struct custody_group);
	struct secret *share = NULL;
	struct buf b = {0};
	bool all = false;
	enum qb_status st = QB_OK;
	if (r->split[place].len == 0) {
		*idle = false;
		st = campaign_certified_group(p->k, g, &p->c->error);
		if (st == QB_OK)
			st = cli_share(p->c, p->k, g, &share);
		if (st == QB_OK)
			st = repair_split_make(&r->context, me, &p->c->home.key, share, &b, &p->c->error);
		if (st == QB_OK)
			st = part_post(p, "repair-split", "repair", part_message(r->attempt, "message", &b));
	} else if (r->sum[place].len == 0 && (st = read_splits(p, splits, &all)) == QB_OK && all) {
		*idle = false;
		st = repair_sum_make(&r->context, splits, me, &p->c->home.key, &b, &p->c->error);
		if (st == QB_OK)
			st = part_post(p, "repair-sum", "repair", part_message(r->attempt, "message", &b));
		else
			st = give_up(p);
		if (st == QB_OK)
			cli_note(p->c, "%s: helped to repair the share of %s\n", p->name,
			         p->k->custodian[r->lost].party->name);
	}
	secret_free(&share);
	buf_free(&b);
	qb_free(splits);
	qb_free(g);
	return st;
}

static enum qb_status receive(struct part *p, bool *idle)
{
	const struct repair_view *r = &p->k->repair;
	struct repair_split *splits = QB_NEW_ARRAY(struct repair_split, (size_t)p->k->k);
	struct repair_sum *sums = QB_NEW_ARRAY(struct repair_sum, (size_t)p->k->k);
	struct secret *share = NULL;
	bool all = false;
	enum qb_status st = read_splits(p, splits, &all);
	for (int i = 0; i < p->k->k; i++)
		all = all && r->sum[i].len > 0;
	for (int i = 0; all && st == QB_OK && i < p->k->k; i++)
		st = repair_sum_parse(&r->context, r->sum[i].data, r->sum[i].len, &sums[i], &p->c->error);
	if (all && st == QB_OK) {
		*idle = false;
		st = repair_share(&r->context, splits, sums, &p->c->home.key, &share, &p->c->error);
		if (st != QB_OK) {
			st = give_up(p);
		} else {
			json_t *extra = json_object();
			json_object_set_new(extra, "attempt", json_integer((json_int_t)r->attempt));
			st = part_save_share(p, SHARE_FILE, &r->context.group, r->context.lost, share);
			if (st == QB_OK)
				st = part_post(p, "repaired", "the share fits the certificate", extra);
			else
				json_decref(extra);
			if (st == QB_OK)
				cli_note(p->c, "%s: has the share again\n", p->name);
		}
	}
	secret_free(&share);
	qb_free(splits);
	qb_free(sums);
	return st;
}

enum qb_status part_later(struct part *p, bool *idle)
{
	int helper = repair_helper(p->k, p->name);
	enum qb_status st = erase_turn(p, idle);
	if (st == QB_OK && *idle && p->k->reshare.under_way)
		st = reshare_turn(p, idle);
	if (st == QB_OK && *idle && helper >= 0)
		st = help(p, helper, idle);
	if (st == QB_OK && *idle && p->k->repair.under_way && p->i == p->k->repair.lost)
		st = receive(p, idle);
	return st;
}
