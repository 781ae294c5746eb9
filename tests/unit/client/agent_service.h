/*
 * A service small enough to sit in a test: it stands in for the client's transport, keeps a rehearsal clock that moves
 * when the driver has done its part, and opens what the driver files with the custodians' shares.
 */
#ifndef QB_TESTS_AGENT_SERVICE_H
#define QB_TESTS_AGENT_SERVICE_H

#include <stdio.h>
#include <stdlib.h>
#include <sys/stat.h>
#include <unistd.h>

#include "client/agent/driver.h"
#include "server/base/alloc.h"
#include "server/base/text.h"
#include "server/drill/recipe.h"
#include "server/drill/report.h"
#include "server/wave/render.h"
#include "tests/near.h"
#include "tests/unit/custody/scene.h"

#define SERVICE_SLOTS 2
#define SERVICE_RATE  2048.0
#define SERVICE_START (INT64_C(1488789012) * NS_PER_S)
#define SERVICE_SLOT  (16 * NS_PER_S)
#define SERVICE_LEAD  (4 * NS_PER_S)
#define SERVICE_N     (16 * 2048)
#define SERVICE_STEPS 8

struct service {
	struct scene scene;
	struct drill_plan plan;
	struct wave_network network;
	struct campaign campaign;
	struct slot_public slot[SERVICE_SLOTS];
	struct driver driver;
	char dir[64], keys[96], spec[96];
	uint8_t slot_key[SERVICE_SLOTS][SLOT_KEY_BYTES];
	struct drill_recipe recipe[SERVICE_SLOTS];
	struct buf wrapped[SERVICE_SLOTS];
	/* The clock goes through these times, each after the driver looked at it a few times. */
	int64_t step[SERVICE_STEPS];
	int n_steps, at, looks;
	/* What stands in the way, from when on. */
	int64_t held_from_ns, stopped_from_ns;
	bool not_going, ended;                /* ended: before any freeze */
	const char *host;                     /* who plays the slot, as the service says; NULL: undecided */
	int64_t silent_from_ns, silent_to_ns; /* the service answers nothing in between */
	int lose_answers;                     /* so many posts arrive, but their answers do not */
	/* What came in. */
	struct play_note note[PLAY_NOTES_MAX];
	int n_notes, n_reports, n_keys;
	size_t note_bytes, report_bytes;
	struct play_report report;
	struct buf asked; /* every request that changes something, in order */
};

static struct service *service; /* the transport's functions have no other way to it */

static inline int64_t service_now(void)
{
	return service->step[service->at];
}

/* ---- the transport's functions ---- */

enum qb_status link_refresh(struct link *l, struct qb_error *e)
{
	(void)e;
	if (service->looks++ > 4 && service->at + 1 < service->n_steps) {
		service->at++;
		service->looks = 0;
	}
	assert_true(service->looks < 2000);
	l->now_gps_ns = service_now();
	return QB_OK;
}

static inline bool service_silent(struct qb_error *e)
{
	bool silent = service_now() >= service->silent_from_ns && service_now() < service->silent_to_ns;
	return silent && qb_fail(e, QB_UNREACHABLE, NULL, NULL, "no answer") != QB_OK;
}

/* A system clock that runs by itself: a tenth of a second each time that somebody looks. */
static inline int64_t service_tick(void *state)
{
	(void)state;
	return service->step[0] += NS_PER_S / 10;
}

static inline json_t *service_slot(int64_t n)
{
	json_t *doc = json_object(), *x = json_object(), *all = json_object();
	int64_t now = service_now();
	bool frozen = now >= SERVICE_START + n * SERVICE_SLOT - SERVICE_LEAD, stopped = now >= service->stopped_from_ns;
	json_object_set_new(doc, "slot", json_integer(n));
	json_object_set_new(doc, "ended", json_boolean(service->ended));
	json_object_set_new(x, "held", json_boolean(now >= service->held_from_ns));
	json_object_set_new(x, "stopped", json_boolean(stopped));
	json_object_set_new(x, "stopped_gps", stopped ? json_gps_new(service->stopped_from_ns) : json_null());
	json_object_set_new(x, "ready", json_true());
	json_object_set_new(x, "going", frozen && !service->ended ? json_boolean(!service->not_going) : json_null());
	json_object_set_new(x, "host", service->host != NULL ? json_string(service->host) : json_null());
	json_object_set_new(x, "reported", json_boolean(service->n_reports > 0));
	json_object_set_new(x, "notes", json_integer(service->n_notes));
	json_object_set_new(all, "tarn", x);
	json_object_set_new(doc, "stations", all);
	return doc;
}

static inline enum qb_status service_key(int64_t n, json_t *doc, struct qb_error *e)
{
	int64_t start = SERVICE_START + n * SERVICE_SLOT, now = service_now();
	service->n_keys++;
	if (now < start - SERVICE_LEAD || now >= start + SERVICE_SLOT || service->not_going)
		return qb_fail(e, QB_CONFLICT, NULL, NULL, "not now");
	json_object_set_new(doc, "key", json_hex_new(service->slot_key[n], SLOT_KEY_BYTES));
	return QB_OK;
}

enum qb_status link_get(struct link *l, const char *path, json_t **out, struct qb_error *e)
{
	long long n;
	int end = 0;
	enum qb_status st = QB_OK;
	(void)l;
	*out = NULL;
	if (service_silent(e))
		return QB_UNREACHABLE;
	*out = json_object();
	if (sscanf(path, "/v1/campaigns/fells/slots/%lld%n", &n, &end) == 1 && path[end] == '\0') {
		json_decref(*out);
		*out = service_slot(n);
	} else if (sscanf(path, "/v1/campaigns/fells/recipes/%lld/key%n", &n, &end) == 1 && end > 0 &&
	           path[end] == '\0') {
		st = service_key(n, *out, e);
		buf_printf(&service->asked, "key %lld\n", n);
	} else if (sscanf(path, "/v1/campaigns/fells/recipes/%lld%n", &n, &end) == 1 && path[end] == '\0') {
		char *text = base64_encode(service->wrapped[n].data, service->wrapped[n].len);
		json_object_set_new(*out, "recipe", json_string(text));
		qb_free(text);
		buf_printf(&service->asked, "recipe %lld\n", n);
	} else {
		fail_msg("unexpected GET %s", path);
	}
	if (st != QB_OK) {
		json_decref(*out);
		*out = NULL;
	}
	return st;
}

enum qb_status link_entry(struct link *l, const char *type, const uint8_t *campaign, const char *why, json_t *extra,
                          json_t **body, char **text, struct qb_error *e)
{
	(void)l, (void)why, (void)text, (void)e;
	assert_memory_equal(campaign, scene_campaign, 16);
	assert_true(strcmp(type, "play-note") == 0 || strcmp(type, "play-report") == 0);
	assert_string_equal(json_string_value(json_object_get(extra, "station")), "tarn");
	*body = json_object();
	json_object_set_new(*body, "entry", extra);
	return QB_OK;
}

/* Opens a record with two custodians' shares. */
static inline void service_open(const struct buf *b, enum record_type type, uint64_t index, const char *id,
                                struct buf *content)
{
	struct record rec;
	struct partial p[2];
	char hex[129];
	struct partial_authority a = scene_authority(partial_full_purpose(type), 7);
	assert_int_equal(record_check(&service->scene.g, b->data, b->len, &rec, NULL), QB_OK);
	assert_int_equal(record_expect(&rec, type, index, NULL), QB_OK);
	assert_int_equal(rec.header.duration_ns, SERVICE_SLOT);
	hex_encode(hex, rec.id, 64);
	assert_string_equal(hex, id);
	for (uint32_t i = 1; i <= 2; i++)
		scene_partial(&service->scene, &rec, i, &a, &p[i - 1]);
	assert_int_equal(partial_open(&service->scene.g, &rec, p, 2, content, NULL), QB_OK);
}

enum qb_status link_post(struct link *l, const char *path, const json_t *body, json_t **out, struct qb_error *e)
{
	long long n;
	char kind[16] = "";
	struct buf b = {0}, content = {0};
	const char *id = json_string_value(json_object_get(json_object_get(body, "entry"), "record_id"));
	(void)l, (void)out;
	if (service_silent(e))
		return QB_UNREACHABLE;
	assert_int_equal(sscanf(path, "/v1/campaigns/fells/recipes/%lld/%15[a-z]", &n, kind), 2);
	bool report = strcmp(kind, "report") == 0;
	if (report ? service->n_reports > 0 : false)
		return qb_fail(e, QB_CONFLICT, NULL, NULL, "here already");
	assert_true(base64_decode(json_string_value(json_object_get(body, "record")), &b));
	uint64_t number = report ? 15 : (uint64_t)service->n_notes;
	struct record rec;
	assert_int_equal(record_check(&service->scene.g, b.data, b.len, &rec, NULL), QB_OK);
	if (rec.header.index != (uint64_t)n * 256 + number) {
		buf_free(&b);
		return qb_fail(e, QB_REFUSED, NULL, NULL, "another note was expected");
	}
	service_open(&b, report ? RECORD_PLAY_REPORT : RECORD_PLAY_NOTE, (uint64_t)n * 256 + number, id, &content);
	if (report) {
		assert_int_equal(play_report_decode(content.data, content.len, &service->report, NULL), QB_OK);
		service->n_reports++;
		service->report_bytes = b.len;
	} else {
		assert_int_equal(play_note_decode(content.data, content.len, &service->note[service->n_notes++], NULL),
		                 QB_OK);
		service->note_bytes = b.len;
	}
	buf_printf(&service->asked, "%s %lld %zu\n", kind, n, b.len);
	buf_free(&b);
	buf_free(&content);
	if (service->lose_answers > 0) {
		service->lose_answers--;
		return qb_fail(e, QB_UNREACHABLE, NULL, NULL, "the answer was lost");
	}
	return QB_OK;
}

enum qb_status link_open(struct link *l, struct home *home, const char *url, struct qb_error *e)
{
	(void)l, (void)home, (void)url;
	return qb_fail(e, QB_UNREACHABLE, NULL, NULL, "this test has no network");
}

void link_close(struct link *l)
{
	(void)l;
}

enum qb_status link_get_bytes(struct link *l, const char *path, size_t limit, struct buf *out, struct qb_error *e)
{
	(void)l, (void)path, (void)limit, (void)out;
	return qb_fail(e, QB_UNREACHABLE, NULL, NULL, "this test has no network");
}

/* ---- the campaign ---- */

static inline void service_network(struct wave_network *w)
{
	*w = (struct wave_network){.name = "fells", .n_stations = 1};
	w->stations[0] = (struct wave_station){.name = "tarn",
	                                       .latitude_rad = 0.95,
	                                       .longitude_rad = -0.056,
	                                       .height_m = 120,
	                                       .x_arm_azimuth_rad = 0.61,
	                                       .y_arm_azimuth_rad = 2.18,
	                                       .arm_length_m = 4000};
	w->stations[0].actuator = (struct wave_actuator){.present = true,
	                                                 .mass_kg = 40,
	                                                 .pendulum_hz = 1,
	                                                 .quality = 1000,
	                                                 .newton_per_volt = 2e-9,
	                                                 .volt_per_count = 1.5e-4,
	                                                 .converter_bits = 18,
	                                                 .rate_hz = SERVICE_RATE,
	                                                 .slew_counts_per_s = 2e7,
	                                                 .band_hz = {12, 18, 700, 900},
	                                                 .calibration_id = "tarn-2027a",
	                                                 .valid_from_gps_ns = SERVICE_START - NS_PER_S,
	                                                 .valid_to_gps_ns = SERVICE_START + 40 * NS_PER_S,
	                                                 .sign = 1};
	station_survey(&w->stations[0]);
}

/* A burst in the middle of the slot, loud enough to see and well within the limits. */
static inline void service_recipe(const struct service *s, int64_t n, double gain, double hrss,
                                  struct drill_recipe *out)
{
	const struct wave_station *w = &s->network.stations[0];
	struct wave_source source;
	double before, after;
	assert_int_equal(source_init(&source, "sine-gaussian", NULL, "test", NULL), QB_OK);
	source.p[SG_FREQUENCY] = 150;
	source.p[SG_QUALITY] = 9;
	source.p[SG_HRSS] = hrss;
	source.right_ascension_rad = 1.1;
	source.declination_rad = 0.4;
	source.polarization_rad = 0.3;
	source.lowest_frequency_hz = 20;
	source.arrival_gps_ns = SERVICE_START + n * SERVICE_SLOT + 8 * NS_PER_S + 123456789;
	wave_drive_extent(w, &source, &before, &after);
	int64_t at = wave_arrival_gps_ns(w, &source);
	*out = (struct drill_recipe){.slot = n,
	                             .slot_start_ns = SERVICE_START + n * SERVICE_SLOT,
	                             .slot_ns = SERVICE_SLOT,
	                             .station = "tarn",
	                             .rate_hz = SERVICE_RATE,
	                             .gain = gain,
	                             .drive_from_ns = at - (int64_t)(before * 1e9),
	                             .drive_to_ns = at + (int64_t)(after * 1e9),
	                             .source = source};
	memcpy(out->campaign, scene_campaign, 16);
}

/* Wraps a recipe for a slot's place, whatever slot it speaks of. */
static inline void service_wrap(struct service *s, int64_t n, const struct drill_recipe *r)
{
	uint8_t bytes[DRILL_RECIPE_BYTES], scalar[SCALAR_BYTES];
	struct buf points = {0};
	const struct recipe_address at = {.slot = (uint64_t)n, .station = 0, .place = RECIPE_MAIN};
	assert_int_equal(drill_recipe_encode(r, bytes, NULL), QB_OK);
	assert_int_equal(prekeys_points(s->driver.prekeys, &points, NULL), QB_OK);
	group_scalar_random(scalar);
	buf_clear(&s->wrapped[n]);
	assert_int_equal(recipe_wrap(s->scene.c.ctx, &at, points.data + n * POINT_BYTES, scalar, s->slot_key[n], bytes,
	                             sizeof bytes, &s->wrapped[n], NULL),
	                 QB_OK);
	buf_free(&points);
}

static inline void service_campaign(struct service *s)
{
	struct campaign *c = &s->campaign;
	s->plan.slots = (struct slots){.start_gps_ns = SERVICE_START,
	                               .end_gps_ns = SERVICE_START + SERVICE_SLOTS * SERVICE_SLOT,
	                               .slot_ns = SERVICE_SLOT,
	                               .guard_ns = 2 * NS_PER_S,
	                               .lead_ns = SERVICE_LEAD};
	s->plan.network = &s->network;
	s->plan.largest_drive = 0.8;
	memcpy(c->id, scene_campaign, 16);
	snprintf(c->name, sizeof c->name, "fells");
	c->plan = &s->plan;
	c->state = C_SEALED;
	c->n_slots = SERVICE_SLOTS;
	c->slot = s->slot;
	for (uint64_t n = 0; n < SERVICE_SLOTS; n++) {
		random_bytes(s->slot_key[n], SLOT_KEY_BYTES);
		recipe_key_commitment(scene_campaign, n, s->slot_key[n], s->slot[n].slot_key_commitment);
	}
}

static inline void service_driver(struct service *s)
{
	struct driver *d = &s->driver;
	struct prekeys_for what = {.station = "tarn", .place = RECIPE_MAIN, .count = SERVICE_SLOTS};
	memcpy(what.campaign, scene_campaign, 16);
	*d =
	    (struct driver){.log = {.fd = -1}, .system = clock_system(), .campaign = &s->campaign, .group = s->scene.g};
	d->link.rehearsal = true;
	party_key_new(&d->home.key);
	party_key_public(&d->home.key, &d->home.pub);
	sign_key_id(d->home.pub.sign, d->home.key_id);
	d->recipe = QB_NEW_ARRAY(struct buf, DRIVER_READY_AHEAD);
	assert_int_equal(prekeys_create(s->keys, &what, &d->home.key, NULL), QB_OK);
	assert_int_equal(prekeys_open(s->keys, &what, &d->prekeys, NULL), QB_OK);
	assert_int_equal(sink_open(s->spec, &d->sink, NULL), QB_OK);
}

/* Before each test: slot 0 has a recipe with this gain, the clock goes freeze, start, 9 s, end. */
static inline void service_begin(double gain)
{
	struct service *s = QB_NEW(struct service);
	service = s;
	scene_make(&s->scene, 3, 2);
	snprintf(s->dir, sizeof s->dir, "/tmp/agent-slot-XXXXXX");
	assert_non_null(mkdtemp(s->dir));
	snprintf(s->keys, sizeof s->keys, "%s/prekeys", s->dir);
	snprintf(s->spec, sizeof s->spec, "file:%s", s->dir);
	service_network(&s->network);
	service_campaign(s);
	service_driver(s);
	for (int64_t n = 0; n < SERVICE_SLOTS; n++) {
		service_recipe(s, n, gain, 1e-22, &s->recipe[n]);
		service_wrap(s, n, &s->recipe[n]);
	}
	const int64_t steps[] = {-60, -4, 0, 9, 16};
	for (size_t i = 0; i < sizeof steps / sizeof steps[0]; i++)
		s->step[s->n_steps++] = SERVICE_START + steps[i] * NS_PER_S;
	s->silent_from_ns = STATES_NEVER;
	s->held_from_ns = s->stopped_from_ns = STATES_NEVER;
}

/* The same with the system's clock, from the freeze on. */
static inline void service_begin_system(double contact_s)
{
	service_begin(1);
	service->step[0] = SERVICE_START - SERVICE_LEAD;
	service->n_steps = 1;
	service->driver.link.rehearsal = false;
	service->driver.opt.contact_s = contact_s;
	service->driver.system = (struct clock_source){.now_gps_ns = service_tick};
	service->driver.contact_ns = service->step[0];
}

static inline void service_end(void)
{
	struct service *s = service;
	char *names[] = {"prekeys",         "slot-000000.npy",  "slot-000000.json",
	                 "slot-000001.npy", "slot-000001.json", "state"};
	sink_close(&s->driver.sink);
	prekeys_close(&s->driver.prekeys);
	party_key_free(&s->driver.home.key);
	for (int i = 0; i < DRIVER_READY_AHEAD; i++)
		buf_free(&s->driver.recipe[i]);
	qb_free(s->driver.recipe);
	for (int i = 0; i < SERVICE_SLOTS; i++)
		buf_free(&s->wrapped[i]);
	for (size_t i = 0; i < sizeof names / sizeof names[0]; i++) {
		char *path = text_printf("%s/%s", s->dir, names[i]);
		unlink(path);
		qb_free(path);
	}
	assert_int_equal(rmdir(s->dir), 0);
	buf_free(&s->asked);
	scene_free(&s->scene);
	qb_free(s);
	service = NULL;
}

#endif
