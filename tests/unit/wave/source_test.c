/* Source files: what is read, what is refused, and that a refusal is one clear line with file, line and key. */
#include "server/wave/source.h"

#include <math.h>
#include <stdio.h>

#include "tests/unit/wave/wave_fixture.h"

#define SKY                                                                                                            \
	"right_ascension_rad: 1\n"                                                                                     \
	"declination_rad: 0.2\n"                                                                                       \
	"arrival_gps: \"1488789012.5\"\n"

static void reads_a_pair(void **state)
{
	(void)state;
	struct wave_source s = fixture_source(fixture_pair);
	assert_int_equal(s.family, WAVE_COMPACT_BINARY);
	assert_int_equal(s.model, WAVE_IMRPHENOMD);
	assert_string_equal(source_model_word(&s), "IMRPhenomD");
	near_abs(s.p[CB_PRIMARY_MASS], 36, 0);
	near_abs(s.p[CB_SECONDARY_SPIN], 0, 0);
	assert_true(s.arrival_gps_ns == FIXTURE_ARRIVAL);
	near_rel(source_chirp_mass_msun(&s), pow(36.0 * 29, 0.6) / pow(65, 0.2), 1e-14);
	near_rel(source_effective_spin(&s), 36 * 0.2 / 65, 1e-14);
}

static void lighter_first_is_turned_round(void **state)
{
	(void)state;
	struct wave_source s = fixture_source("family: compact-binary\nmodel: TaylorF2\nprimary_mass_msun: 1.2\n"
	                                      "secondary_mass_msun: 1.6\nprimary_spin: 0.05\nsecondary_spin: -0.1\n"
	                                      "primary_tidal_deformability: 900\nsecondary_tidal_deformability: 250\n"
	                                      "distance_mpc: 40\n" SKY);
	near_abs(s.p[CB_PRIMARY_MASS], 1.6, 0);
	near_abs(s.p[CB_PRIMARY_SPIN], -0.1, 0);
	near_abs(s.p[CB_PRIMARY_TIDE], 250, 0);
	near_abs(s.p[CB_SECONDARY_TIDE], 900, 0);
	near_abs(s.lowest_frequency_hz, 20, 0);
}

static void refuses_one_line_each(void **state)
{
	(void)state;
	static const struct {
		const char *text;
		int status;
		const char *line[3]; /* all of them are in the line */
	} bad[] = {
	    {"family: compact-binary\nprimary_mass_msun: -3\nsecondary_mass_msun: 1\ndistance_mpc: 1\n" SKY,
	     QB_RANGE,
	     {"bad.yaml:2", "primary_mass_msun", "-3"}},
	    {"family: compact-binary\nprimary_mass_msun: heavy\nsecondary_mass_msun: 1\ndistance_mpc: 1\n" SKY,
	     QB_FORMAT,
	     {"bad.yaml:2", "primary_mass_msun", "heavy"}},
	    {"family: compact-binary\nsecondary_mass_msun: 1\ndistance_mpc: 1\n" SKY,
	     QB_FORMAT,
	     {"primary_mass_msun", "missing", ""}},
	    {"family: compact-binary\nprimary_mass_msun: 30\nsecondary_mass_msun: 30\n" SKY,
	     QB_FORMAT,
	     {"distance_mpc", "missing", ""}},
	    {"family: supernova\n" SKY, QB_FORMAT, {"bad.yaml:1", "supernova", "accepted"}},
	    {"family: compact-binary\nmodel: Best\nprimary_mass_msun: 30\nsecondary_mass_msun: 30\ndistance_mpc: "
	     "1\n" SKY,
	     QB_FORMAT,
	     {"Best", "IMRPhenomD", "TaylorF2"}},
	    {"family: sine-gaussian\nmodel: TaylorF2\nfrequency_hz: 100\nquality: 9\nhrss_per_sqrt_hz: 1e-22\n" SKY,
	     QB_FORMAT,
	     {"no models", "", ""}},
	    {"family: compact-binary\nprimary_mass_msun: 90\nsecondary_mass_msun: 3\ndistance_mpc: 1\n" SKY,
	     QB_RANGE,
	     {"mass ratio", "30", "18"}},
	    {"family: compact-binary\nprimary_mass_msun: 30\nsecondary_mass_msun: 30\nprimary_spin: "
	     "0.999\ndistance_mpc: 1\n" SKY,
	     QB_RANGE,
	     {"bad.yaml:4", "primary_spin", "0.999"}},
	    {"family: compact-binary\nprimary_mass_msun: 2\nsecondary_mass_msun: 1\nprimary_tidal_deformability: "
	     "4\ndistance_mpc: 1\n" SKY,
	     QB_RANGE,
	     {"tidal", "TaylorF2", ""}},
	    {"family: compact-binary\nprimary_mass_msun: 30\nsecondary_mass_msun: 30\ndistance_mpc: 1\ncolour: "
	     "red\n" SKY,
	     QB_FORMAT,
	     {"bad.yaml:5", "colour", "unknown"}},
	    {"family: gaussian-pulse\nwidth_s: 0\nhrss_per_sqrt_hz: 1e-22\n" SKY, QB_RANGE, {"width_s", "", ""}},
	    {"family: gaussian-pulse\nwidth_s: 1e-3\nhrss_per_sqrt_hz: 1e-22\nright_ascension_rad: 1\ndeclination_rad: "
	     "2\n"
	     "arrival_gps: \"1\"\n",
	     QB_RANGE,
	     {"bad.yaml:5", "declination_rad", ""}},
	    {"family: gaussian-pulse\nwidth_s: 1e-3\nhrss_per_sqrt_hz: 1e-22\nright_ascension_rad: 1\ndeclination_rad: "
	     "1\n",
	     QB_FORMAT,
	     {"arrival_gps", "missing", ""}},
	    {"family: gaussian-pulse\nwidth_s: nan\nhrss_per_sqrt_hz: 1e-22\n" SKY, QB_FORMAT, {"width_s", "nan", ""}},
	    {"- 1\n- 2\n", QB_FORMAT, {"bad.yaml", "", ""}},
	    {"", QB_FORMAT, {"bad.yaml", "", ""}},
	};
	for (size_t i = 0; i < sizeof bad / sizeof bad[0]; i++) {
		struct wave_source s;
		struct qb_error e = {0};
		char line[1000];
		enum qb_status st = source_parse(bad[i].text, strlen(bad[i].text), "bad.yaml", &s, &e);
		qb_error_line(&e, line, sizeof line);
		if (st != (enum qb_status)bad[i].status)
			print_error("case %zu: %s\n", i, line);
		/* a number outside its range may be called a format or a range error by the walker, never accepted */
		assert_true(st == (enum qb_status)bad[i].status);
		assert_null(strchr(line, '\n'));
		for (int k = 0; k < 3; k++) {
			if (strstr(line, bad[i].line[k]) == NULL)
				fail_msg("case %zu: '%s' lacks '%s'", i, line, bad[i].line[k]);
		}
	}
}

static void table_is_consistent(void **state)
{
	(void)state;
	for (int f = 0; f < WAVE_FAMILIES; f++) {
		const struct wave_family_info *info = wave_family_info((enum wave_family)f);
		enum wave_family found;
		assert_true(wave_family_find(info->name, &found) && (int)found == f);
		assert_true(info->n_parameters <= WAVE_MAX_PARAMETERS);
		assert_true(wave_parameter_find(found, info->scale) >= 0);
		for (int i = 0; i < info->n_parameters; i++) {
			const struct wave_parameter *p = &info->parameters[i];
			assert_int_equal(wave_parameter_find(found, p->key), i);
			assert_true(p->least < p->largest);
			assert_true(strlen(p->prose) > 0);
			if (!isnan(p->fallback))
				assert_true(p->fallback >= p->least && p->fallback <= p->largest);
		}
	}
	enum wave_family none;
	assert_false(wave_family_find("pulsar", &none));
	assert_int_equal(wave_parameter_find(WAVE_SINE_GAUSSIAN, "distance_mpc"), -1);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(reads_a_pair),
	    cmocka_unit_test(lighter_first_is_turned_round),
	    cmocka_unit_test(refuses_one_line_each),
	    cmocka_unit_test(table_is_consistent),
	};
	return cmocka_run_group_tests(tests, NULL, NULL);
}
