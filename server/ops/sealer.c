/*
 * The sealer: a process of its own that draws and seals a campaign and exits. It has two pipes and nothing else. The
 * seed exists in its guarded memory only; what leaves it are sealed records, slot keys boxed to the service's storage
 * key, and wrapped recipes: nothing that whoever carries the messages could read.
 */
#include <stdio.h>
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/text.h"
#include "server/drill/draw.h"
#include "server/drill/recipe.h"
#include "server/ops/internal.h"
#include "server/ops/seal_output.h"
#include "server/wire/sealer_frame.h"

struct sealer {
	int in, out;
	json_t *job;
	struct keygen_context context;
	struct custody_group group;
	struct drill_plan *plan;
	uint64_t attempt; /* sealing attempt */
	uint8_t service_id[16], storage_point[POINT_BYTES];
	uint8_t point[POINT_BYTES];   /* of this run's own key */
	struct secret *exchange;      /* this run's own key */
	struct secret *contributions; /* (n + 1) x 32, the service's first */
	struct secret *seed;
	struct buf prekeys[STATES_MAX_STATIONS][RECIPE_PLACES]; /* points; empty: none */
};

static enum qb_status fetch_file(void *state, const char *name, struct buf *out, struct qb_error *e)
{
	const char *text = json_string_value(json_object_get((const json_t *)state, name));
	if (text == NULL)
		return qb_fail(e, QB_NOT_FOUND, name, NULL, "is not with the plan");
	buf_text(out, text);
	return QB_OK;
}

static enum qb_status read_parties(struct sealer *s, struct qb_error *e)
{
	const json_t *list = json_object_get(s->job, "custodians");
	struct party_public parties[CUSTODY_MAX];
	uint8_t campaign[16];
	int64_t attempt, k;
	size_t n = json_array_size(list);
	enum qb_status st = json_hex(s->job, "campaign", "job", campaign, 16, e);
	if (st == QB_OK)
		st = json_int(s->job, "attempt", "job", 1, INT32_MAX, &attempt, e);
	if (st == QB_OK)
		st = json_int(s->job, "needed", "job", 1, CUSTODY_MAX, &k, e);
	if (st == QB_OK && (n == 0 || n > CUSTODY_MAX))
		st = qb_fail(e, QB_FORMAT, "job: custodians", NULL, "has a bad length");
	for (size_t i = 0; st == QB_OK && i < n; i++) {
		const json_t *p = json_array_get(list, i);
		st = json_hex(p, "signing_key", "job", parties[i].sign, 32, e);
		if (st == QB_OK)
			st = json_hex(p, "exchange_key", "job", parties[i].exchange, 32, e);
	}
	if (st == QB_OK)
		st = keygen_context_init(&s->context, campaign, 1, (uint64_t)attempt, (uint32_t)n, (uint32_t)k, parties,
		                         e);
	return st;
}

/* The sealer trusts no group key that it is told: it follows from the signed deals, and all n certified it. */
static enum qb_status read_group(struct sealer *s, struct qb_error *e)
{
	struct deal *deals = QB_NEW_ARRAY(struct deal, s->context.n);
	const json_t *list = json_object_get(s->job, "deals");
	struct buf b = {0};
	enum qb_status st = QB_OK;
	for (size_t i = 0; st == QB_OK && i < s->context.n; i++) {
		const char *text = json_string_value(json_array_get(list, i));
		buf_clear(&b);
		if (text == NULL || !base64_decode(text, &b))
			st = qb_fail(e, QB_FORMAT, "job: deals", NULL, "is malformed");
		if (st == QB_OK)
			st = deal_parse(&s->context, b.data, b.len, &deals[i], e);
	}
	buf_clear(&b);
	if (st == QB_OK)
		st = body_base64(s->job, "certificate", 1 << 16, &b, e);
	if (st == QB_OK)
		st = keygen_certificate_verify(&s->context, deals, b.data, b.len, &s->group, e);
	buf_free(&b);
	qb_free(deals);
	return st;
}

static enum qb_status read_prekeys(struct sealer *s, struct qb_error *e)
{
	int64_t slots = slots_count(&s->plan->slots);
	const json_t *all = json_object_get(s->job, "prekeys");
	for (int i = 0; i < s->plan->network->n_stations; i++) {
		const json_t *places = json_object_get(all, s->plan->network->stations[i].name);
		for (size_t p = 0; p < RECIPE_PLACES; p++) {
			const char *text = json_string_value(json_array_get(places, p));
			struct buf *b = &s->prekeys[i][p];
			if (text == NULL && p == RECIPE_SPARE)
				continue;
			if (text == NULL || !base64_decode(text, b) || b->len != (size_t)slots * POINT_BYTES)
				return qb_fail(e, QB_FORMAT, "job: prekeys", NULL, "is malformed");
		}
	}
	return QB_OK;
}

static enum qb_status read_job(struct sealer *s, struct qb_error *e)
{
	struct buf b = {0};
	enum sealer_message type;
	const char *plan;
	int64_t attempt;
	enum qb_status st = QB_OK;
	if (!sealer_read(s->in, &type, &b) || type != SEALER_JOB)
		st = qb_fail(e, QB_FORMAT, "sealer", NULL, "no job came");
	if (st == QB_OK)
		st = json_read((const char *)b.data, b.len, "job", &s->job, e);
	if (st == QB_OK)
		st = read_parties(s, e);
	if (st == QB_OK)
		st = read_group(s, e);
	if (st == QB_OK)
		st = json_int(s->job, "sealing_attempt", "job", 1, INT32_MAX, &attempt, e);
	if (st == QB_OK)
		st = json_hex(s->job, "service_id", "job", s->service_id, 16, e);
	if (st == QB_OK)
		st = json_hex(s->job, "storage_point", "job", s->storage_point, POINT_BYTES, e);
	if (st == QB_OK && !group_point_ok(s->storage_point))
		st = qb_fail(e, QB_CRYPTO, "job: storage_point", NULL, "is no valid point");
	if (st == QB_OK)
		st = json_str(s->job, "plan", "job", &plan, e);
	if (st == QB_OK) {
		s->attempt = (uint64_t)attempt;
		st = plan_parse(plan, strlen(plan), "plan", fetch_file, json_object_get(s->job, "files"), &s->plan, e);
	}
	if (st == QB_OK)
		st = read_prekeys(s, e);
	buf_free(&b);
	return st;
}

static uint8_t *contribution_at(struct sealer *s, uint32_t who)
{
	return secret_bytes(s->contributions) + (size_t)who * CONTRIBUTION_BYTES;
}

static bool committed(struct sealer *s, uint32_t who)
{
	const char *text = json_string_value(json_array_get(json_object_get(s->job, "commitments"), who));
	uint8_t commitment[64];
	return text != NULL && strlen(text) == 128 && hex_decode(commitment, 64, text) &&
	       seed_commit_matches(s->context.ctx, s->attempt, who, contribution_at(s, who), commitment);
}

static bool take_box(struct sealer *s, const struct buf *message, uint32_t *who)
{
	struct cursor c = cursor_over(message->data, message->len);
	struct buf content = {0};
	*who = cursor_u32(&c);
	bool good = !c.bad && *who <= s->context.n &&
	            box_open(s->exchange, BOX_SEALER, s->context.ctx, 64, c.p, c.left, &content, NULL) == QB_OK &&
	            content.len == CONTRIBUTION_BYTES;
	if (good) {
		memcpy(contribution_at(s, *who), content.data, CONTRIBUTION_BYTES);
		good = committed(s, *who);
	}
	buf_wipe(&content);
	return good;
}

static enum qb_status collect(struct sealer *s, struct qb_error *e)
{
	struct buf b = {0};
	enum sealer_message type;
	uint8_t key[POINT_BYTES + 64], who_le[4];
	enum qb_status st = QB_OK;
	uint32_t missing = s->context.n + 1, who;
	bool seen[CUSTODY_MAX + 1] = {false};
	s->exchange = secret_new(SCALAR_BYTES);
	group_scalar_random(secret_bytes(s->exchange));
	s->contributions = secret_new((s->context.n + 1) * (size_t)CONTRIBUTION_BYTES);
	if (!group_mul_base(s->point, secret_view(s->exchange)))
		st = qb_fail(e, QB_FAULT, "sealer", NULL, "a key came out as the identity");
	memcpy(key, s->point, POINT_BYTES);
	seal_key_statement(s->context.ctx, s->attempt, s->point, key + POINT_BYTES);
	if (st == QB_OK && !sealer_write(s->out, SEALER_KEY, key, sizeof key))
		st = qb_fail(e, QB_IO, "sealer", NULL, "the service is gone");
	while (st == QB_OK && missing > 0) {
		if (!sealer_read(s->in, &type, &b) || type != SEALER_BOX) {
			st = qb_fail(e, QB_IO, "sealer", NULL, "the service is gone");
			break;
		}
		bool good = take_box(s, &b, &who) && !seen[who];
		for (int i = 0; i < 4; i++)
			who_le[i] = (uint8_t)(who >> 8 * i);
		if (!sealer_write(s->out, good ? SEALER_ACCEPTED : SEALER_REJECTED, who_le, 4) || !good)
			st = qb_fail(e, QB_CRYPTO, "sealer", NULL, "a contribution is not the committed one");
		if (good) {
			seen[who] = true;
			missing--;
		}
	}
	buf_free(&b);
	return st;
}

struct variates {
	uint8_t truth[TRUTH_SEED_BYTES];
};

static double variate(void *state, uint64_t m)
{
	return seed_uniform(((const struct variates *)state)->truth, m);
}

static enum qb_status wrap_recipes(struct sealer *s, struct drill_truth *truth, const uint8_t slot_key[static 32],
                                   struct buf *out, struct qb_error *e)
{
	enum qb_status st = QB_OK;
	uint8_t plain[DRILL_RECIPE_BYTES], scalar[SCALAR_BYTES];
	for (int i = 0; st == QB_OK && i < s->plan->network->n_stations; i++) {
		struct drill_recipe recipe;
		drill_recipe_from_truth(truth, i, s->context.campaign, s->plan->network->stations[i].actuator.rate_hz,
		                        &recipe);
		st = drill_recipe_encode(&recipe, plain, e);
		for (int p = 0; st == QB_OK && p < RECIPE_PLACES; p++) {
			struct recipe_address at = {(uint64_t)truth->slot, (uint64_t)i, (enum recipe_place)p};
			struct buf wrapped = {0};
			if (s->prekeys[i][p].len == 0)
				continue;
			seed_recipe_scalar(s->seed, &at, scalar);
			st = recipe_wrap(s->context.ctx, &at, s->prekeys[i][p].data + (size_t)truth->slot * POINT_BYTES,
			                 scalar, slot_key, plain, sizeof plain, &wrapped, e);
			if (st == QB_OK) {
				recipe_hash(wrapped.data, wrapped.len, truth->station[i].recipe_hash[p]);
				buf_u8(out, (uint8_t)i);
				buf_u8(out, (uint8_t)p);
				buf_u32(out, (uint32_t)wrapped.len);
				buf_put(out, wrapped.data, wrapped.len);
			}
			buf_free(&wrapped);
		}
		wipe(&recipe, sizeof recipe);
	}
	wipe(plain, sizeof plain);
	wipe(scalar, sizeof scalar);
	return st;
}

/*
 * slot i64 | commitment 64 | key length u32, slot key boxed to the service | record length u32, record |
 * { station u8, place u8, length u32, recipe }
 */
static enum qb_status seal_slot(struct sealer *s, bool empty, int64_t n, struct buf *message, struct qb_error *e)
{
	struct variates v;
	struct draw_uniforms u = {variate, &v};
	struct drill_truth *truth = QB_NEW(struct drill_truth);
	struct record_header h = {.type = RECORD_SLOT, .epoch = (uint32_t)s->group.seal_epoch, .index = (uint64_t)n};
	uint8_t key[SLOT_KEY_BYTES], commitment[64], r[SCALAR_BYTES];
	struct buf content = {0}, record = {0}, recipes = {0}, boxed = {0};
	seed_slot_truth(s->seed, (uint64_t)n, v.truth);
	seed_slot_key(s->seed, (uint64_t)n, key);
	seed_slot_scalar(s->seed, (uint64_t)n, r);
	recipe_key_commitment(s->context.campaign, (uint64_t)n, key, commitment);
	memcpy(h.campaign, s->context.campaign, 16);
	memcpy(h.author, s->service_id, 16);
	memcpy(h.auxiliary, commitment, 32);
	h.start_gps_ns = slots_start(&s->plan->slots, n);
	h.duration_ns = (uint64_t)s->plan->slots.slot_ns;
	enum qb_status st = draw_slot(s->plan, empty, n, &u, truth, e);
	if (st == QB_OK)
		st = wrap_recipes(s, truth, key, &recipes, e);
	if (st == QB_OK)
		st = truth_encode(truth, &content, e);
	if (st == QB_OK)
		st = record_seal_with(&s->group, &h, r, content.data, content.len, &record, e);
	if (st == QB_OK)
		st = slot_key_box(s->storage_point, s->context.campaign, n, key, &boxed, e);
	if (st == QB_OK) {
		buf_i64(message, n);
		buf_put(message, commitment, sizeof commitment);
		buf_u32(message, (uint32_t)boxed.len);
		buf_put(message, boxed.data, boxed.len);
		buf_u32(message, (uint32_t)record.len);
		buf_put(message, record.data, record.len);
		buf_put(message, recipes.data, recipes.len);
	}
	wipe(truth, sizeof *truth);
	qb_free(truth);
	wipe(&v, sizeof v);
	wipe(key, sizeof key);
	wipe(r, sizeof r);
	buf_wipe(&content);
	buf_free(&record);
	buf_free(&recipes);
	buf_free(&boxed);
	return st;
}

static enum qb_status seal_seed(struct sealer *s, struct buf *message, struct qb_error *e)
{
	struct record_header h = {
	    .type = RECORD_SEED, .epoch = (uint32_t)s->group.seal_epoch, .start_gps_ns = s->plan->slots.start_gps_ns};
	uint8_t r[SCALAR_BYTES], zeros[64] = {0};
	struct buf content = {0}, record = {0};
	char hex[65];
	memcpy(h.campaign, s->context.campaign, 16);
	memcpy(h.author, s->service_id, 16);
	h.duration_ns = (uint64_t)(s->plan->slots.end_gps_ns - s->plan->slots.start_gps_ns);
	buf_printf(&content, "{\"version\":1,\"sealing_attempt\":%llu,\"first_slot\":0,\"contributions\":[",
	           (unsigned long long)s->attempt);
	for (uint32_t i = 0; i <= s->context.n; i++) {
		hex_encode(hex, contribution_at(s, i), CONTRIBUTION_BYTES);
		buf_printf(&content, "%s\"%s\"", i > 0 ? "," : "", hex);
	}
	buf_text(&content, "]}");
	seed_record_scalar(s->seed, r);
	enum qb_status st = record_seal_with(&s->group, &h, r, content.data, content.len, &record, e);
	if (st == QB_OK) {
		buf_i64(message, -1);
		buf_put(message, zeros, sizeof zeros);
		buf_u32(message, 0);
		buf_u32(message, (uint32_t)record.len);
		buf_put(message, record.data, record.len);
	}
	wipe(r, sizeof r);
	wipe(hex, sizeof hex);
	buf_wipe(&content);
	buf_free(&record);
	return st;
}

/* The run's output so far: what the statement at its end is about. */
struct output {
	struct transcript all, recipes;
	uint8_t hash[64];
};

static enum qb_status note_output(struct output *o, const struct custody_group *g, const struct buf *message,
                                  struct qb_error *e)
{
	struct sealed_message m;
	struct record rec;
	uint8_t station, place;
	const uint8_t *recipe;
	uint32_t n;
	enum qb_status st = sealed_message_read(message, &m, e);
	if (st == QB_OK)
		st = record_check(g, m.record, m.record_n, &rec, e);
	if (st == QB_OK)
		seal_output_record(&o->all, rec.id, m.commitment);
	while (st == QB_OK && sealed_message_recipe(&m, &station, &place, &recipe, &n))
		transcript_field(&o->recipes, recipe, n);
	return st;
}

static enum qb_status draw_and_seal(struct sealer *s, struct qb_error *e)
{
	struct variates v;
	struct draw_uniforms u = {variate, &v};
	struct buf message = {0}, last = {0};
	struct output output;
	uint8_t statement[64];
	int64_t slots = slots_count(&s->plan->slots);
	s->seed = seed_draw(s->context.ctx, s->attempt, 0,
	                    (const uint8_t(*)[CONTRIBUTION_BYTES])secret_view(s->contributions), s->context.n);
	seed_campaign_truth(s->seed, v.truth);
	bool empty = draw_campaign_empty(s->plan, &u);
	wipe(&v, sizeof v);
	seal_output_begin(&output.all, s->context.ctx, s->attempt, s->point);
	transcript_begin(&output.recipes, "quietbell/1/recipe/all");
	enum qb_status st = seal_seed(s, &message, e);
	for (int64_t n = 0; st == QB_OK; n++) {
		st = note_output(&output, &s->group, &message, e);
		if (st == QB_OK && !sealer_write(s->out, SEALER_RECORD, message.data, message.len))
			st = qb_fail(e, QB_IO, "sealer", NULL, "the service is gone");
		if (n == slots || st != QB_OK)
			break;
		buf_clear(&message);
		st = seal_slot(s, empty, n, &message, e);
	}
	buf_free(&message);
	transcript_end(&output.recipes, output.hash);
	seal_output_end(&output.all, output.hash, statement);
	buf_u64(&last, (uint64_t)slots);
	buf_put(&last, statement, sizeof statement);
	if (st == QB_OK && !sealer_write(s->out, SEALER_DONE, last.data, last.len))
		st = qb_fail(e, QB_IO, "sealer", NULL, "the service is gone");
	buf_free(&last);
	return st;
}

int ops_sealer_main(int in, int out)
{
	struct sealer *s = QB_NEW(struct sealer);
	struct qb_error e = {0};
	char line[900];
	s->in = in;
	s->out = out;
	enum qb_status st = read_job(s, &e);
	if (st == QB_OK)
		st = collect(s, &e);
	if (st == QB_OK)
		st = draw_and_seal(s, &e);
	if (st != QB_OK) {
		qb_error_line(&e, line, sizeof line);
		(void)sealer_write(out, SEALER_FAILED, line, strlen(line));
	}
	secret_free(&s->exchange);
	secret_free(&s->contributions);
	secret_free(&s->seed);
	for (int i = 0; i < STATES_MAX_STATIONS; i++) {
		for (int p = 0; p < RECIPE_PLACES; p++)
			buf_free(&s->prekeys[i][p]);
	}
	plan_free(&s->plan);
	json_decref(s->job);
	qb_free(s);
	return qb_exit_status(st);
}
