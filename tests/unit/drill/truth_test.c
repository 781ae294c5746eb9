/* Truth records: round trip to the same bytes, capacity at eight stations, strictness, comparison by name. */
#include <math.h>

#include "server/base/clock.h"
#include "server/drill/signal.h"
#include "server/drill/truth.h"
#include "tests/unit/drill/demo.h"

static void round_trip(void **state)
{
	(void)state;
	struct drill_plan *p = demo_plan(DEMO_PLAN);
	for (int64_t slot = 0; slot < 8; slot++) {
		struct drill_truth t, back;
		struct buf a = {0}, b = {0};
		struct qb_error e = {0};
		demo_draw(p, false, slot, &t);
		for (int i = 0; i < 64; i++)
			t.station[1].recipe_hash[0][i] = (uint8_t)(i + slot);
		assert_int_equal(truth_encode(&t, &a, &e), QB_OK);
		assert_int_equal(truth_decode(a.data, a.len, &back, &e), QB_OK);
		assert_int_equal(truth_encode(&back, &b, &e), QB_OK);
		assert_int_equal(a.len, b.len);
		assert_memory_equal(a.data, b.data, a.len);
		assert_int_equal(truth_compare(&t, &back, 0, &e), QB_OK);
		assert_int_equal(back.live, t.live);
		assert_int_equal(back.source.arrival_gps_ns, t.source.arrival_gps_ns);
		assert_memory_equal(back.station[1].recipe_hash, t.station[1].recipe_hash, 128);
		buf_free(&a);
		buf_free(&b);
	}
	plan_free(&p);
}

/* Eight stations with the longest names and every number at its widest still fit the sealed record. */
static void fits_at_eight_stations(void **state)
{
	(void)state;
	struct drill_plan *p = demo_plan(DEMO_PLAN);
	struct drill_truth t;
	struct buf b = {0};
	struct qb_error e = {0};
	demo_draw(p, false, 0, &t);
	memset(t.name, 'n', 63);
	t.slot = 999999;
	t.redraws = 10000;
	t.weight_mpc3 = 1.2345678901234567e-300;
	t.has_weight = true;
	t.network_snr = t.redshift = 1.2345678901234567e-300;
	for (int i = 0; i < 8; i++) {
		struct truth_station s = t.station[0];
		memset(s.name, 'a' + i, 63);
		s.name[63] = '\0';
		s.snr = s.peak_strain = s.peak_drive_counts = 1.2345678901234567e-300;
		s.drive_from_ns = t.slot_start_ns + 123456789;
		s.drive_to_ns = t.slot_start_ns + 987654321;
		memset(s.recipe_hash, 0xab, sizeof s.recipe_hash);
		t.station[i] = s;
	}
	t.n_stations = 8;
	assert_int_equal(truth_encode(&t, &b, &e), QB_OK);
	assert_true(b.len <= TRUTH_BYTES);
	buf_free(&b);
	plan_free(&p);
}

static void every_truncation_is_refused(void **state)
{
	(void)state;
	struct drill_plan *p = demo_plan(DEMO_PLAN);
	struct drill_truth t, back;
	struct buf b = {0};
	struct qb_error e = {0};
	demo_draw(p, false, 1, &t);
	assert_int_equal(truth_encode(&t, &b, &e), QB_OK);
	for (size_t n = 0; n < b.len; n++) {
		struct qb_error cut = {0};
		assert_int_not_equal(truth_decode(b.data, n, &back, &cut), QB_OK);
	}
	/* One changed byte is either refused or gives another truth; it never gives the same. */
	for (size_t n = 0; n < b.len; n++) {
		struct qb_error bad = {0};
		struct buf again = {0};
		b.data[n] ^= 1;
		if (truth_decode(b.data, b.len, &back, &bad) == QB_OK) {
			assert_int_equal(truth_encode(&back, &again, &bad), QB_OK);
			b.data[n] ^= 1;
			if (again.len == b.len && memcmp(again.data, b.data, b.len) == 0 &&
			    strchr("0123456789", b.data[n]) == NULL)
				fail_msg("byte %zu does not matter", n);
			buf_free(&again);
		} else {
			b.data[n] ^= 1;
		}
	}
	buf_free(&b);
	plan_free(&p);
}

static void spoiled(const struct buf *good, const char *from, const char *to)
{
	struct drill_truth t;
	struct qb_error e = {0};
	char *at = strstr((char *)good->data, from);
	if (at == NULL)
		fail_msg("no '%s' in %s", from, (char *)good->data);
	char *text = text_printf("%.*s%s%s", (int)(at - (char *)good->data), (char *)good->data, to, at + strlen(from));
	enum qb_status st = truth_decode(text, strlen(text), &t, &e);
	if ((st != QB_FORMAT && st != QB_RANGE) || e.what[0] == '\0')
		fail_msg("accepted with '%s'", to);
	qb_free(text);
}

static void decoding_is_strict(void **state)
{
	(void)state;
	struct drill_plan *p = demo_plan(DEMO_PLAN);
	struct drill_truth t;
	struct buf b = {0};
	struct qb_error e = {0};
	int64_t slot = 0;
	do
		demo_draw(p, false, slot++, &t);
	while (!t.live || !t.source_frame);
	assert_int_equal(truth_encode(&t, &b, &e), QB_OK);
	spoiled(&b, "\"version\":1", "\"version\":2");
	spoiled(&b, "\"conventions\":1", "\"conventions\":2");
	spoiled(&b, "{", "{\"more\":1,");
	spoiled(&b, "\"redraws\":0,", "");
	spoiled(&b, "\"redraws\":0", "\"redraws\":-1");
	spoiled(&b, "\"redraws\":0", "\"redraws\":0.0");
	spoiled(&b, "\"live\"", "\"null\"");
	spoiled(&b, "\"live\"", "\"dead\"");
	spoiled(&b, "\"gain\":1.0", "\"gain\":0.5");
	spoiled(&b, "\"gain\":1.0", "\"gain\":\"1\"");
	spoiled(&b, "\"compact-binary\"", "\"whistle\"");
	spoiled(&b, "IMRPhenomD", "magic");
	spoiled(&b, "\"primary_mass_msun\":", "\"primary_mass_msun\":-");
	spoiled(&b, "\"primary_mass_msun\":", "\"third_mass_msun\":");
	spoiled(&b, "\"primary_spin\":", "\"primary_spin\":1");
	spoiled(&b, "\"parameters\":{", "\"parameters\":{\"x\":1,");
	spoiled(&b, "\"arrival_gps\":\"1", "\"arrival_gps\":\"x");
	spoiled(&b, "\"drive_from_gps\":\"1", "\"drive_from_gps\":\"2");
	spoiled(&b, "\"drive_to_gps\":\"1", "\"drive_to_gps\":\"0");
	spoiled(&b, "\"frame\":\"source\"", "\"frame\":\"sauce\"");
	spoiled(&b, "\"network_snr\":", "\"network_snr\":-");
	spoiled(&b, "\"declination_rad\":", "\"declination_rad\":9");
	spoiled(&b, "\"stations\":[", "\"stations\":[{},");
	spoiled(&b, "\"recipe_hashes\":[\"0", "\"recipe_hashes\":[\"");
	spoiled(&b, "\"recipe_hashes\":[\"0", "\"recipe_hashes\":[\"G");
	spoiled(&b, "\"tarn\"", "\"\"");
	spoiled(&b, "{", "[");
	buf_free(&b);
	plan_free(&p);
}

static void differs(const struct drill_truth *t, const struct drill_truth *u, const char *name)
{
	struct qb_error e = {0};
	assert_int_equal(truth_compare(t, u, TRUTH_TOLERANCE, &e), QB_NO);
	if (strstr(e.what, name) == NULL)
		fail_msg("'%s' does not name %s", e.what, name);
}

static void comparison_names_the_first_difference(void **state)
{
	(void)state;
	struct drill_plan *p = demo_plan(DEMO_PLAN);
	struct drill_truth t, u;
	struct qb_error e = {0};
	int64_t slot = 0;
	do
		demo_draw(p, false, slot++, &t);
	while (!t.source_frame);
	/* Last bits may differ, more may not. */
	u = t;
	u.network_snr *= 1 + 5e-7;
	u.station[2].snr *= 1 - 5e-7;
	u.source.right_ascension_rad += 5e-7;
	u.source.arrival_gps_ns += 900;
	signal_parameter_put(&u.source, 0, signal_parameter_value(&u.source, 0) * (1 + 5e-7));
	assert_int_equal(truth_compare(&t, &u, TRUTH_TOLERANCE, &e), QB_OK);
	assert_int_equal(truth_compare(&t, &u, 1e-9, &e), QB_NO);
#define CHANGED(change, name)                                                                                          \
	do {                                                                                                           \
		u = t;                                                                                                 \
		change;                                                                                                \
		differs(&t, &u, name);                                                                                 \
	} while (0)
	CHANGED(u.network_snr *= 1 + 3e-6, "network_snr");
	CHANGED(u.live = !t.live, "assignment");
	CHANGED(u.redraws++, "redraws");
	CHANGED(u.slot++, "slot");
	CHANGED(u.source.arrival_gps_ns += 1100, "arrival_gps");
	CHANGED(u.source.declination_rad += 1e-5, "declination_rad");
	CHANGED(u.redshift *= 1.001, "redshift");
	CHANGED(u.weight_mpc3 *= 1.001, "weight_mpc3");
	CHANGED(u.has_weight = !t.has_weight, "weight");
	CHANGED(u.station[1].peak_drive_counts *= 1.001, "heron: peak_drive_counts");
	CHANGED(u.station[1].drive_from_ns += 2000, "heron: drive_from_gps");
	CHANGED(u.station[0].snr += 1, "tarn: snr");
	CHANGED(u.station[2].name[0] = 'x', "skerry");
	CHANGED(u.n_stations = 2, "stations");
	CHANGED(signal_parameter_put(&u.source, 0, 1 + signal_parameter_value(&t.source, 0)),
	        signal_parameter_key(&t.source, 0));
	/* Recipe hashes are not drawn: they are compared with the recipes themselves. */
	u = t;
	u.station[0].recipe_hash[0][0] ^= 1;
	assert_int_equal(truth_compare(&t, &u, TRUTH_TOLERANCE, &e), QB_OK);
	plan_free(&p);
}

static void encoding_refuses_what_is_not_finite(void **state)
{
	(void)state;
	struct drill_plan *p = demo_plan(DEMO_PLAN);
	struct drill_truth t, u;
	struct buf b = {0};
	demo_draw(p, false, 3, &t);
#define REFUSED(change)                                                                                                \
	do {                                                                                                           \
		struct qb_error e_ = {0};                                                                              \
		u = t;                                                                                                 \
		change;                                                                                                \
		assert_int_equal(truth_encode(&u, &b, &e_), QB_RANGE);                                                 \
		assert_int_equal(b.len, 0);                                                                            \
	} while (0)
	REFUSED(u.network_snr = (double)NAN);
	REFUSED(u.station[0].snr = (double)INFINITY);
	REFUSED(u.gain = 0.5);
	REFUSED(u.live = !u.live);
	REFUSED(u.n_stations = 9);
	REFUSED(u.n_stations = 0);
	REFUSED(u.name[0] = '\0');
	REFUSED(u.station[1].drive_to_ns = u.slot_start_ns + u.slot_ns + 1);
	REFUSED(u.weight_mpc3 = -1);
	REFUSED(signal_parameter_put(&u.source, 0, (double)NAN));
	plan_free(&p);
}

/* What the audit folder gets: the fields of a live slot; of a null only what the format knows. */
static void audit_fields(void **state)
{
	(void)state;
	static const char *const wanted[] = {
	    "network_snr",     "chirp_mass_msun", "distance_mpc", "right_ascension_rad", "declination_rad",
	    "inclination_rad", "effective_spin",  "weight_mpc3",  "primary_mass_msun",   "stations"};
	struct drill_plan *p = demo_plan(DEMO_PLAN);
	int seen_live = 0, seen_null = 0;
	for (int64_t slot = 0; slot < 40 && (seen_live < 1 || seen_null < 1); slot++) {
		struct drill_truth t;
		int64_t from, to, ns;
		struct qb_error e = {0};
		demo_draw(p, false, slot, &t);
		json_t *j = truth_audit_json(&t);
		assert_int_equal(json_gps(j, "arrival_gps", "t", &ns, &e), QB_OK);
		assert_int_equal(ns, t.source.arrival_gps_ns);
		assert_int_equal(json_gps(j, "planned_gps", "t", &ns, &e), QB_OK);
		assert_int_equal(ns, t.slot_start_ns);
		assert_string_equal(json_string_value(json_object_get(j, "assignment")), t.live ? "live" : "null");
		for (size_t i = 0; i < sizeof wanted / sizeof wanted[0] && t.live && t.source_frame; i++) {
			if (json_object_get(j, wanted[i]) == NULL)
				fail_msg("lacks %s", wanted[i]);
		}
		seen_live += t.live && t.source_frame;
		seen_null += !t.live;
		if (!t.live)
			assert_null(json_object_get(j, "network_snr"));
		truth_drive_interval(&t, &from, &to);
		assert_true(from < t.source.arrival_gps_ns && to > t.source.arrival_gps_ns);
		json_decref(j);
	}
	assert_true(seen_live > 0 && seen_null > 0);
	plan_free(&p);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(round_trip),
	    cmocka_unit_test(fits_at_eight_stations),
	    cmocka_unit_test(every_truncation_is_refused),
	    cmocka_unit_test(decoding_is_strict),
	    cmocka_unit_test(comparison_names_the_first_difference),
	    cmocka_unit_test(encoding_refuses_what_is_not_finite),
	    cmocka_unit_test(audit_fields),
	};
	return cmocka_run_group_tests_name("drill/truth", tests, NULL, NULL);
}
