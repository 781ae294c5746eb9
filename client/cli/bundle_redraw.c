/* Re-derivation: the seed from the contributions, the records from the seed, the drills from the plan and the seed. */
#include <inttypes.h>
#include <string.h>

#include "client/cli/bundle_verify.h"
#include "server/base/alloc.h"
#include "server/base/text.h"
#include "server/custody/seed.h"
#include "server/drill/draw.h"
#include "server/drill/recipe.h"

static enum qb_status no(struct qb_error *e, const char *what, long long slot)
{
	return qb_fail(e, QB_NO, "bundle", "ask the custodians how this could happen", "%s (slot %lld)", what, slot);
}

static size_t seed_position(const struct verified *v)
{
	size_t i = 0;
	while (i < v->bundle->records.n && v->bundle->records.item[i].rec.header.type != RECORD_SEED)
		i++;
	return i;
}

enum qb_status verify_seed(struct verified *v, struct qb_error *e)
{
	const struct buf *content = &v->content[seed_position(v)];
	uint8_t given[CUSTODY_MAX + 1][CONTRIBUTION_BYTES];
	json_t *doc = NULL;
	int64_t attempt = 0;
	int n;
	const struct custodian *drawer = campaign_drawers(v->k, &n);
	enum qb_status st = json_read((const char *)content->data, content->len, "seed record", &doc, e);
	if (st == QB_OK)
		st = json_int(doc, "sealing_attempt", "seed record", 1, INT32_MAX, &attempt, e);
	const json_t *list = json_object_get(doc, "contributions");
	if (st == QB_OK && ((uint64_t)attempt != v->k->sealing_attempt || json_array_size(list) != (size_t)n + 1))
		st = no(e, "the seed record is of another sealing", -1);
	for (int i = 0; st == QB_OK && i <= n; i++) {
		const char *hex = json_string_value(json_array_get(list, (size_t)i));
		const uint8_t *commitment = i == 0 ? v->k->service_commitment : drawer[i - 1].contribution_commitment;
		if (hex == NULL || strlen(hex) != 64 || !hex_decode(given[i], CONTRIBUTION_BYTES, hex) ||
		    !seed_commit_matches(v->k->context.ctx, v->k->sealing_attempt, (uint64_t)i, given[i], commitment))
			st = no(e, "a contribution is not the committed one", -1);
	}
	if (st == QB_OK) {
		v->seed = seed_draw(v->k->context.ctx, v->k->sealing_attempt, 0,
		                    (const uint8_t(*)[CONTRIBUTION_BYTES])given, (uint32_t)n);
		v->audit_seed = seed_audit(v->seed);
		verify_note(v, "%d contributions: the service's and %d custodians'; sealing attempt %" PRIu64, n + 1, n,
		            v->k->sealing_attempt);
	}
	json_decref(doc);
	return st;
}

enum qb_status verify_reseal(struct verified *v, struct qb_error *e)
{
	enum qb_status st = QB_OK;
	for (size_t i = 0; st == QB_OK && i < v->bundle->records.n; i++) {
		const struct sealed_item *x = &v->bundle->records.item[i];
		uint8_t r[SCALAR_BYTES], key[SLOT_KEY_BYTES], commitment[64];
		struct buf again = {0};
		bool seed = x->rec.header.type == RECORD_SEED;
		if (!seed && x->rec.header.type != RECORD_SLOT)
			continue;
		if (seed) {
			seed_record_scalar(v->seed, r);
		} else {
			seed_slot_scalar(v->seed, (uint64_t)x->slot, r);
			seed_slot_key(v->seed, (uint64_t)x->slot, key);
			recipe_key_commitment(v->k->id, (uint64_t)x->slot, key, commitment);
			if (memcmp(commitment, v->k->slot[x->slot].slot_key_commitment, 64) != 0)
				st = no(e, "the slot key does not follow from the seed", (long long)x->slot);
		}
		if (st == QB_OK)
			st = record_seal_with(&v->group, &x->rec.header, r, v->content[i].data, v->content[i].len,
			                      &again, e);
		if (st == QB_OK && (again.len != x->bytes.len || memcmp(again.data, x->bytes.data, again.len) != 0))
			st = no(e, "sealing the opened content again gives another record", (long long)x->slot);
		wipe(r, sizeof r);
		buf_free(&again);
	}
	verify_note(v, "%" PRId64 " records of slots and the seed's", v->k->n_slots);
	return st;
}

struct variates {
	uint8_t truth[TRUTH_SEED_BYTES];
};

static double variate(void *state, uint64_t m)
{
	return seed_uniform(((const struct variates *)state)->truth, m);
}

static const struct bundle_blob *find_blob(const struct bundle_blob *x, size_t n, int64_t slot, const char *name,
                                           int place)
{
	for (size_t i = 0; i < n; i++) {
		if ((slot < 0 || x[i].slot == slot) && x[i].place == place && strcmp(x[i].name, name) == 0)
			return &x[i];
	}
	return NULL;
}

/* The wrapped recipes made again from the sealed truth must be the ones handed to the drivers, bit for bit. */
static enum qb_status check_recipes(struct verified *v, const struct drill_truth *t, struct qb_error *e)
{
	uint8_t key[SLOT_KEY_BYTES], scalar[SCALAR_BYTES], plain[DRILL_RECIPE_BYTES], hash[64];
	static const uint8_t none[64];
	enum qb_status st = QB_OK;
	seed_slot_key(v->seed, (uint64_t)t->slot, key);
	for (int i = 0; st == QB_OK && i < t->n_stations; i++) {
		struct drill_recipe recipe;
		drill_recipe_from_truth(t, i, v->k->id, v->k->plan->network->stations[i].actuator.rate_hz, &recipe);
		st = drill_recipe_encode(&recipe, plain, e);
		for (int p = 0; st == QB_OK && p < RECIPE_PLACES; p++) {
			struct recipe_address at = {(uint64_t)t->slot, (uint64_t)i, (enum recipe_place)p};
			const struct bundle_blob *points =
			    find_blob(v->bundle->prekey, v->bundle->n_prekeys, -1, t->station[i].name, p);
			const struct bundle_blob *given =
			    find_blob(v->bundle->recipe, v->bundle->n_recipes, t->slot, t->station[i].name, p);
			struct buf again = {0};
			if (points == NULL && given == NULL && memcmp(t->station[i].recipe_hash[p], none, 64) == 0)
				continue;
			if (points == NULL || given == NULL ||
			    points->bytes.len < ((size_t)t->slot + 1) * POINT_BYTES) {
				st = no(e, "a recipe is missing", (long long)t->slot);
				break;
			}
			seed_recipe_scalar(v->seed, &at, scalar);
			st = recipe_wrap(v->k->context.ctx, &at, points->bytes.data + (size_t)t->slot * POINT_BYTES,
			                 scalar, key, plain, sizeof plain, &again, e);
			recipe_hash(given->bytes.data, given->bytes.len, hash);
			if (st == QB_OK &&
			    (again.len != given->bytes.len || memcmp(again.data, given->bytes.data, again.len) != 0 ||
			     memcmp(hash, t->station[i].recipe_hash[p], 64) != 0))
				st = no(e, "a recipe is not the one that follows from the sealed truth",
				        (long long)t->slot);
			buf_free(&again);
		}
	}
	wipe(key, sizeof key);
	wipe(scalar, sizeof scalar);
	return st;
}

enum qb_status verify_redraw(struct verified *v, struct qb_error *e)
{
	struct variates x;
	struct draw_uniforms u = {variate, &x};
	struct drill_truth *sealed = QB_NEW(struct drill_truth), *again = QB_NEW(struct drill_truth);
	enum qb_status st = QB_OK;
	seed_campaign_truth(v->seed, x.truth);
	bool empty = draw_campaign_empty(v->k->plan, &u);
	for (size_t i = 0; st == QB_OK && i < v->bundle->records.n; i++) {
		const struct sealed_item *item = &v->bundle->records.item[i];
		if (item->rec.header.type != RECORD_SLOT)
			continue;
		seed_slot_truth(v->seed, (uint64_t)item->slot, x.truth);
		st = truth_decode(v->content[i].data, v->content[i].len, sealed, e);
		if (st == QB_OK)
			st = draw_slot(v->k->plan, empty, item->slot, &u, again, e);
		for (int s = 0; st == QB_OK && s < sealed->n_stations && s < again->n_stations; s++)
			memcpy(again->station[s].recipe_hash, sealed->station[s].recipe_hash,
			       sizeof sealed->station[s].recipe_hash);
		if (st == QB_OK)
			st = truth_compare(sealed, again, TRUTH_TOLERANCE, e);
		if (st == QB_OK)
			st = check_recipes(v, sealed, e);
	}
	verify_note(v, "%" PRId64 " slots%s, and %zu recipes made again", v->k->n_slots,
	            empty ? ", empty by design" : "", v->bundle->n_recipes);
	qb_free(sealed);
	qb_free(again);
	return st;
}
