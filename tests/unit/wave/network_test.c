/* Network files and noise tables: what is read, and one clear line for what is refused. */
#include "server/wave/network.h"

#include <math.h>
#include <stdio.h>

#include "server/base/buf.h"
#include "server/wave/noise.h"
#include "tests/unit/wave/wave_fixture.h"

static void reads_the_fixture(void **state)
{
	(void)state;
	struct wave_network *n = fixture_open();
	assert_string_equal(n->name, "fells");
	assert_int_equal(n->n_stations, 3);
	assert_int_equal(network_station(n, "heron"), 1);
	assert_int_equal(network_station(n, "gull"), -1);
	const struct wave_station *s = &n->stations[0];
	near_rel(s->latitude_rad, 54.45 * M_PI / 180, 1e-14);
	near_abs(s->x_arm[0] * s->y_arm[0] + s->x_arm[1] * s->y_arm[1] + s->x_arm[2] * s->y_arm[2], 0, 1e-12);
	assert_true(s->actuator.present && !n->stations[1].actuator.present);
	assert_int_equal(s->actuator.sign, 1);
	near_abs(s->actuator.band_hz[3], 1700, 0);
	assert_string_equal(s->actuator.calibration_id, "tarn-2027a");
	assert_true(s->actuator.valid_to_gps_ns > s->actuator.valid_from_gps_ns);
	/* on the ellipsoid: between the polar and the equatorial radius, and 120 m */
	double r = sqrt(s->position_m[0] * s->position_m[0] + s->position_m[1] * s->position_m[1] +
	                s->position_m[2] * s->position_m[2]);
	assert_true(r > 6356752 + 100 && r < 6378137 + 120);
	wave_network_free(&n);
	assert_null(n);
	wave_network_free(&n);
}

static void refuse(const char *from, const char *to, const char *const words[3])
{
	char text[8192], line[1000];
	struct wave_network *n;
	struct qb_error e = {0};
	const char *at = strstr(fixture_network, from);
	assert_non_null(at);
	int len = snprintf(text, sizeof text, "%.*s%s%s", (int)(at - fixture_network), fixture_network, to,
	                   at + strlen(from));
	assert_true(len > 0 && (size_t)len < sizeof text);
	enum qb_status st = network_parse(text, strlen(text), "net.yaml", NULL, NULL, &n, &e);
	qb_error_line(&e, line, sizeof line);
	if (st == QB_OK)
		fail_msg("'%s' was accepted", to);
	assert_null(n);
	assert_null(strchr(line, '\n'));
	assert_non_null(strstr(line, "net.yaml"));
	for (int k = 0; k < 3; k++) {
		if (strstr(line, words[k]) == NULL)
			fail_msg("'%s' lacks '%s'", line, words[k]);
	}
}

static void refuses_one_line_each(void **state)
{
	(void)state;
	refuse("network: fells", "network: Fells!", (const char *const[]){"network", "Fells!", ""});
	refuse("latitude_deg: 54.45", "latitude_deg: 95", (const char *const[]){"latitude_deg", "95", "90"});
	refuse("    height_m: 120\n", "", (const char *const[]){"height_m", "missing", ""});
	refuse("arm_length_m: 4000", "arm_length_m: long", (const char *const[]){"arm_length_m", "long", ""});
	refuse("{curve: advanced-broadband-b}", "{curve: quiet}",
	       (const char *const[]){"quiet", "advanced-broadband-b", "noise"});
	refuse("{curve: advanced-broadband-b}", "{}", (const char *const[]){"noise", "curve", "asd_file"});
	refuse("{curve: advanced-broadband-b}", "{asd_file: t.txt}", (const char *const[]){"no files", "", ""});
	refuse("kind: pendulum-force", "kind: rubber-band",
	       (const char *const[]){"rubber-band", "pendulum-force", "kind"});
	refuse("[12, 18, 1400, 1700]", "[12, 10, 1400, 1700]", (const char *const[]){"band_hz", "rising", ""});
	refuse("[12, 18, 1400, 1700]", "[12, 18, 1400, 1900]", (const char *const[]){"band_hz", "0.45", ""});
	refuse("[12, 18, 1400, 1700]", "[12, 18, 1400]", (const char *const[]){"band_hz", "four", ""});
	refuse("converter_bits: 18", "converter_bits: 18.5", (const char *const[]){"converter_bits", "18.5", ""});
	refuse("to: 2027-06-01T00:00:00Z", "to: 2026-06-01T00:00:00Z", (const char *const[]){"valid", "after", ""});
	refuse("name: heron", "name: tarn", (const char *const[]){"name", "tarn", "no other station"});
	refuse("mass_kg: 40", "mass_kg: 0", (const char *const[]){"mass_kg", "0", ""});
	refuse("calibration_id: tarn-2027a", "calibration_id: tarn-2027a\n      colour: red",
	       (const char *const[]){"colour", "unknown", ""});
}

/* Hands out one table under any name. */
static enum qb_status fetch(void *state, const char *name, struct buf *out, struct qb_error *e)
{
	(void)e;
	assert_string_equal(name, "tarn.txt");
	buf_text(out, state);
	return QB_OK;
}

static void asd_file_is_interpolated_in_logarithms(void **state)
{
	(void)state;
	char text[8192], table[] = "# Hz, 1/sqrt(Hz)\n10 1e-22\n100 1e-23 # a corner\n\n1000,1e-23\n";
	const char *curve = "{curve: advanced-broadband-b}", *at = strstr(fixture_network, curve);
	struct wave_network *n;
	struct qb_error e = {0};
	(void)snprintf(text, sizeof text, "%.*s{asd_file: tarn.txt}%s", (int)(at - fixture_network), fixture_network,
	               at + strlen(curve));
	assert_int_equal(network_parse(text, strlen(text), "net.yaml", fetch, table, &n, &e), QB_OK);
	const struct wave_noise *s = &n->stations[0].noise;
	assert_int_equal(s->n, 3);
	near_rel(noise_psd(s, 10), 1e-44, 1e-12);
	near_rel(noise_psd(s, sqrt(1000)), 1e-45, 1e-12); /* half way in the logarithms */
	near_rel(noise_psd(s, 500), 1e-46, 1e-12);
	near_rel(noise_psd(s, 1000), 1e-46, 1e-12);
	assert_true(isinf(noise_psd(s, 9.99)) && isinf(noise_psd(s, 1000.1)) && isinf(noise_psd(s, 0)));
	wave_network_free(&n);
}

static void bad_tables_are_refused_with_their_line(void **state)
{
	(void)state;
	static const struct {
		const char *text, *line, *word;
	} bad[] = {
	    {"10 1e-22\n9 1e-22\n", "t.txt:2", "above the one before"},
	    {"10 1e-22\n10 1e-22\n", "t.txt:2", "above the one before"},
	    {"10 1e-22\n20 -1e-22\n", "t.txt:2", "positive"},
	    {"0 1e-22\n20 1e-22\n", "t.txt:1", "positive"},
	    {"10 1e-22\n20 nan\n", "t.txt:2", "two numbers"},
	    {"10 1e-22 7\n20 1e-22\n", "t.txt:1", "two numbers"},
	    {"10\n20 1e-22\n", "t.txt:1", "two numbers"},
	    {"10 1e-22\n", "t.txt", "two lines"},
	    {"", "t.txt", "two lines"},
	};
	for (size_t i = 0; i < sizeof bad / sizeof bad[0]; i++) {
		struct wave_noise noise;
		struct qb_error e = {0};
		char line[1000];
		assert_int_equal(noise_table_parse(bad[i].text, "t.txt", &noise, &e), QB_FORMAT);
		qb_error_line(&e, line, sizeof line);
		assert_non_null(strstr(line, bad[i].line));
		assert_non_null(strstr(line, bad[i].word));
		assert_null(noise.log_f);
	}
}

static void curve_words_go_round(void **state)
{
	(void)state;
	enum wave_curve c;
	for (int i = 0; i < WAVE_CURVES; i++) {
		assert_true(noise_curve_find(noise_curve_word((enum wave_curve)i), &c) && (int)c == i);
		assert_true(noise_curve_psd(c, 100) > 0 && noise_curve_psd(c, 100) < 1e-40);
	}
	assert_false(noise_curve_find("silence", &c));
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(reads_the_fixture),
	    cmocka_unit_test(refuses_one_line_each),
	    cmocka_unit_test(asd_file_is_interpolated_in_logarithms),
	    cmocka_unit_test(bad_tables_are_refused_with_their_line),
	    cmocka_unit_test(curve_words_go_round),
	};
	return cmocka_run_group_tests(tests, NULL, NULL);
}
