/* The recipe's fixed binary form. */
#include "server/drill/recipe.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include "server/base/check.h"
#include "server/base/text.h"
#include "server/drill/signal.h"

#define WHAT             "recipe"
#define MAGIC            "QBRP"
#define NAME_BYTES       64
#define WORD_BYTES       32
#define KEY_BYTES        40
#define MAX_PARAMETERS   16
#define PARAMETERS_START (DRILL_RECIPE_BYTES - MAX_PARAMETERS * (KEY_BYTES + 8))

static void put_text(struct buf *b, const char *s, size_t room)
{
	size_t n = strlen(s);
	CHECK(n < room);
	buf_put(b, s, n);
	buf_zeros(b, room - n);
}

static void put_double(struct buf *b, double v)
{
	uint64_t bits;
	memcpy(&bits, &v, sizeof bits);
	buf_u64(b, bits);
}

/* Text ended by zeros up to its room; anything behind the first zero makes it bad. */
static void get_text(struct cursor *c, char *out, size_t room)
{
	cursor_copy(c, out, room);
	size_t n = strnlen(out, room);
	if (n == room) {
		c->bad = true;
		out[room - 1] = '\0';
		return;
	}
	for (size_t i = n; i < room; i++)
		c->bad = c->bad || out[i] != '\0';
}

static double get_double(struct cursor *c)
{
	uint64_t bits = cursor_u64(c);
	double v;
	memcpy(&v, &bits, sizeof v);
	return v;
}

void drill_recipe_from_truth(const struct drill_truth *t, int i, const uint8_t campaign[static 16], double rate_hz,
                             struct drill_recipe *out)
{
	const struct truth_station *s = &t->station[i];
	CHECK(i >= 0 && i < t->n_stations);
	*out = (struct drill_recipe){.slot = t->slot,
	                             .slot_start_ns = t->slot_start_ns,
	                             .slot_ns = t->slot_ns,
	                             .rate_hz = rate_hz,
	                             .gain = t->gain,
	                             .drive_from_ns = s->drive_from_ns,
	                             .drive_to_ns = s->drive_to_ns,
	                             .source = t->source};
	memcpy(out->campaign, campaign, 16);
	(void)snprintf(out->station, sizeof out->station, "%s", s->name);
}

/* Rules that hold for every recipe, whoever made it. */
static enum qb_status check(const struct drill_recipe *r, struct qb_error *e)
{
	if (!text_is_name(r->station))
		return qb_fail(e, QB_RANGE, WHAT, NULL, "has no valid station name");
	if (r->slot < 0 || r->slot_start_ns < 0 || r->slot_ns <= 0 || r->slot_start_ns > INT64_MAX - r->slot_ns)
		return qb_fail(e, QB_RANGE, WHAT, NULL, "has a slot that makes no sense");
	if (!(r->rate_hz >= 1 && r->rate_hz <= 1e6))
		return qb_fail(e, QB_RANGE, WHAT, NULL, "has the rate %g Hz, accepted: 1 to 1e6", r->rate_hz);
	if (!(r->gain >= 0 && r->gain <= 0) && !(r->gain >= 1 && r->gain <= 1))
		return qb_fail(e, QB_RANGE, WHAT, NULL, "has a gain that is neither 0 nor 1");
	if (r->drive_from_ns < r->slot_start_ns || r->drive_to_ns < r->drive_from_ns ||
	    r->drive_to_ns > r->slot_start_ns + r->slot_ns)
		return qb_fail(e, QB_RANGE, WHAT, NULL, "has a drive outside its slot");
	if (r->source.arrival_gps_ns < r->slot_start_ns || r->source.arrival_gps_ns > r->slot_start_ns + r->slot_ns)
		return qb_fail(e, QB_RANGE, WHAT, NULL, "has an arrival outside its slot");
	return source_check(&r->source, WHAT, e);
}

enum qb_status drill_recipe_encode(const struct drill_recipe *r, uint8_t out[static DRILL_RECIPE_BYTES],
                                   struct qb_error *e)
{
	const struct wave_source *s = &r->source;
	int n = signal_parameter_count(s);
	struct buf b = {0};
	enum qb_status st = check(r, e);
	if (st != QB_OK)
		return st;
	if (n > MAX_PARAMETERS)
		return qb_fail(e, QB_RANGE, WHAT, NULL, "has %d parameters, at most %d fit", n, MAX_PARAMETERS);
	buf_put(&b, MAGIC, 4);
	buf_u16(&b, DRILL_RECIPE_VERSION);
	buf_u16(&b, TRUTH_CONVENTIONS);
	buf_put(&b, r->campaign, 16);
	buf_u64(&b, (uint64_t)r->slot);
	buf_i64(&b, r->slot_start_ns);
	buf_i64(&b, r->slot_ns);
	put_text(&b, r->station, NAME_BYTES);
	put_double(&b, r->rate_hz);
	put_double(&b, r->gain);
	buf_i64(&b, r->drive_from_ns);
	buf_i64(&b, r->drive_to_ns);
	put_text(&b, signal_family_name(s), WORD_BYTES);
	put_text(&b, source_model_word(s), WORD_BYTES);
	buf_i64(&b, s->arrival_gps_ns);
	put_double(&b, s->right_ascension_rad);
	put_double(&b, s->declination_rad);
	put_double(&b, s->polarization_rad);
	put_double(&b, s->lowest_frequency_hz);
	buf_u32(&b, (uint32_t)n);
	buf_zeros(&b, 4);
	CHECK(b.len == PARAMETERS_START);
	for (int i = 0; i < n; i++) {
		put_text(&b, signal_parameter_key(s, i), KEY_BYTES);
		put_double(&b, signal_parameter_value(s, i));
	}
	buf_zeros(&b, DRILL_RECIPE_BYTES - b.len);
	memcpy(out, b.data, DRILL_RECIPE_BYTES);
	buf_wipe(&b);
	return QB_OK;
}

static enum qb_status get_parameters(struct cursor *c, uint32_t n, struct wave_source *s, struct qb_error *e)
{
	if (n > MAX_PARAMETERS || (int)n != signal_parameter_count(s))
		return qb_fail(e, QB_FORMAT, WHAT, NULL, "has not exactly the parameters of its family");
	for (int i = 0; i < (int)n; i++) {
		char key[KEY_BYTES];
		get_text(c, key, sizeof key);
		double v = get_double(c);
		if (c->bad || strcmp(key, signal_parameter_key(s, i)) != 0)
			return qb_fail(e, QB_FORMAT, WHAT, NULL,
			               "has other parameters than its family, or in another order");
		signal_parameter_put(s, i, v);
	}
	for (const uint8_t *p; c->left > 0 && (p = cursor_take(c, 1)) != NULL;) {
		if (*p != 0)
			return qb_fail(e, QB_FORMAT, WHAT, NULL, "has bytes that are not zero behind its parameters");
	}
	return QB_OK;
}

enum qb_status drill_recipe_decode(const void *p, size_t n, struct drill_recipe *out, struct qb_error *e)
{
	struct cursor c = cursor_over(p, n);
	char magic[5] = "", family[WORD_BYTES], model[WORD_BYTES];
	*out = (struct drill_recipe){0};
	if (n != DRILL_RECIPE_BYTES)
		return qb_fail(e, QB_FORMAT, WHAT, NULL, "has %zu bytes, not %d", n, DRILL_RECIPE_BYTES);
	cursor_copy(&c, magic, 4);
	unsigned version = cursor_u16(&c), conventions = cursor_u16(&c);
	if (strcmp(magic, MAGIC) != 0 || version != DRILL_RECIPE_VERSION || conventions != TRUTH_CONVENTIONS)
		return qb_fail(e, QB_FORMAT, WHAT, "use programs of one version", "is not a recipe of version %d, %d",
		               DRILL_RECIPE_VERSION, TRUTH_CONVENTIONS);
	cursor_copy(&c, out->campaign, 16);
	uint64_t slot = cursor_u64(&c);
	out->slot = slot > INT64_MAX ? -1 : (int64_t)slot;
	out->slot_start_ns = cursor_i64(&c);
	out->slot_ns = cursor_i64(&c);
	get_text(&c, out->station, NAME_BYTES);
	out->rate_hz = get_double(&c);
	out->gain = get_double(&c);
	out->drive_from_ns = cursor_i64(&c);
	out->drive_to_ns = cursor_i64(&c);
	get_text(&c, family, sizeof family);
	get_text(&c, model, sizeof model);
	int64_t arrival = cursor_i64(&c);
	double sky[4];
	for (int i = 0; i < 4; i++)
		sky[i] = get_double(&c);
	uint32_t count = cursor_u32(&c), zero = cursor_u32(&c);
	if (c.bad || zero != 0)
		return qb_fail(e, QB_FORMAT, WHAT, NULL, "has text or padding that is not well formed");
	enum qb_status st = signal_init(&out->source, family, model, WHAT, e);
	if (st != QB_OK)
		return st;
	out->source.arrival_gps_ns = arrival;
	out->source.right_ascension_rad = sky[0];
	out->source.declination_rad = sky[1];
	out->source.polarization_rad = sky[2];
	out->source.lowest_frequency_hz = sky[3];
	st = get_parameters(&c, count, &out->source, e);
	return st == QB_OK ? check(out, e) : st;
}

enum qb_status drill_recipe_to_source(const struct drill_recipe *r, struct wave_source *out, struct qb_error *e)
{
	enum qb_status st = check(r, e);
	*out = r->source;
	return st;
}
