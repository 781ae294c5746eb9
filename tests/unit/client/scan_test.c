/*
 * The matched-filter search: signals put into noise are found at the right time with the right loudness, noise alone
 * gives nothing to speak of, and the background's rate is what chance gives.
 */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "client/cli/claim_file.h"
#include "client/cli/npy.h"
#include "client/cli/rig.h"
#include "client/cli/scan.h"
#include "server/base/alloc.h"
#include "server/base/clock.h"
#include "server/base/text.h"
#include "server/wave/render.h"
#include "server/wave/snr.h"
#include "tests/unit/wave/wave_fixture.h"

#define START   INT64_C(1488789000000000000)
#define RATE_HZ 2048.0
#define SECONDS 512.0
#define N       ((size_t)(SECONDS * RATE_HZ))
#define SIGNALS 7
#define LOUD    12.0 /* network SNR of every signal */
#define YEAR_S  (365.25 * 86400)

static const char bank_text[] =
    "- {family: compact-binary, primary_mass_msun: 30, secondary_mass_msun: 24, lowest_frequency_hz: 20}\n"
    "- {family: compact-binary, primary_mass_msun: 36, secondary_mass_msun: 29, primary_spin: 0.2}\n"
    "- {family: compact-binary, primary_mass_msun: 43, secondary_mass_msun: 35}\n"
    "- {family: sine-gaussian, frequency_hz: 150, quality: 9}\n";

static struct wave_network *network;
static struct scan_bank bank;

static int open_all(void **state)
{
	(void)state;
	struct qb_error e = {0};
	network = fixture_open();
	return scan_bank_parse(bank_text, strlen(bank_text), "bank.yaml", &bank, &e) != QB_OK;
}

static int close_all(void **state)
{
	(void)state;
	scan_bank_free(&bank);
	wave_network_free(&network);
	return 0;
}

/* ---- strain ---- */

static double *noise_of(int station, uint64_t seed)
{
	char dir[] = "/tmp/scan-XXXXXX";
	struct qb_error e = {0};
	struct npy_in in;
	const struct rig_run run = {START, SECONDS, RATE_HZ, seed, true};
	assert_non_null(mkdtemp(dir));
	char *path = text_printf("%s/out.npy", dir), *side = text_printf("%s/out.json", dir);
	assert_int_equal(rig_station(&network->stations[station], &run, NULL, path, NULL, &e), QB_OK);
	assert_int_equal(npy_map(path, &in, &e), QB_OK);
	double *x = QB_NEW_ARRAY(double, N);
	assert_int_equal(in.n, N);
	memcpy(x, in.values, N * sizeof *x);
	npy_unmap(&in);
	assert_int_equal(unlink(path) | unlink(side) | rmdir(dir), 0);
	qb_free(path);
	qb_free(side);
	return x;
}

/* Signal k: pairs and bursts in turn from all over the sky, each scaled to the same network SNR. */
static struct wave_source signal(int k)
{
	struct wave_source s = fixture_source(k % 3 == 2 ? fixture_burst : fixture_pair);
	struct qb_error e = {0};
	double snr;
	s.arrival_gps_ns = START + 60 * INT64_C(1000000000) * (k + 1) + 123456789;
	s.right_ascension_rad = fmod(1 + 2.4 * k, 2 * M_PI);
	s.declination_rad = asin(-0.9 + 1.8 * k / (SIGNALS - 1));
	assert_int_equal(snr_network(network, &s, RATE_HZ / 2, NULL, &snr, &e), QB_OK);
	if (s.family == WAVE_COMPACT_BINARY)
		s.p[CB_DISTANCE] *= snr / LOUD;
	else
		s.p[SG_HRSS] *= LOUD / snr;
	return s;
}

static void put(const struct wave_source *s, int station, double *strain)
{
	double *h = QB_NEW_ARRAY(double, N);
	struct qb_error e = {0};
	assert_int_equal(render_strain(&network->stations[station], s, RATE_HZ, START, N, true, h, &e), QB_OK);
	for (size_t i = 0; i < N; i++)
		strain[i] += h[i];
	qb_free(h);
}

static void search(const struct scan_settings *settings, uint64_t seed, bool signals, struct scan_list *lists)
{
	for (int i = 0; i < network->n_stations; i++) {
		struct qb_error e = {0};
		double *x = noise_of(i, seed);
		for (int k = 0; signals && k < SIGNALS; k++) {
			struct wave_source s = signal(k);
			put(&s, i, x);
		}
		assert_int_equal(scan_station(&network->stations[i], &bank, settings, x, N, RATE_HZ, &lists[i], &e),
		                 QB_OK);
		qb_free(x);
	}
}

static void drop_lists(struct scan_list *lists)
{
	for (int i = 0; i < WAVE_MAX_STATIONS; i++)
		qb_free(lists[i].trigger);
}

/* The candidate within 0.2 s of a signal, or NULL. */
static const struct scan_candidate *found(const struct scan_result *r, const struct scan_list *lists,
                                          const struct wave_source *s)
{
	for (int c = 0; c < r->n; c++) {
		for (int i = 0; i < network->n_stations; i++) {
			int t = r->candidate[c].trigger[i];
			if (t != SCAN_NONE &&
			    fabs(lists[i].trigger[t].t_s - (double)(s->arrival_gps_ns - START) / 1e9) < 0.2)
				return &r->candidate[c];
		}
	}
	return NULL;
}

/* ---- signals and noise ---- */

static void check_signal(const struct wave_source *s, const struct scan_candidate *c, const struct scan_list *lists)
{
	double station_snr[WAVE_MAX_STATIONS], snr;
	struct qb_error e = {0};
	assert_non_null(c);
	assert_int_equal(snr_network(network, s, RATE_HZ / 2, station_snr, &snr, &e), QB_OK);
	near_rel(c->network_snr, LOUD, 0.15);
	assert_int_equal(bank.templates[c->template].family, s->family);
	for (int i = 0; i < network->n_stations; i++) {
		if (c->trigger[i] == SCAN_NONE) {
			assert_true(station_snr[i] < 5.5);
			continue;
		}
		double want = (double)(wave_arrival_gps_ns(&network->stations[i], s) - START) / 1e9;
		if (station_snr[i] > 4)
			near_abs(lists[i].trigger[c->trigger[i]].t_s, want, 0.005);
	}
}

static void signals_are_found(bool design)
{
	struct scan_settings settings = scan_defaults;
	struct scan_list lists[WAVE_MAX_STATIONS] = {{0}};
	struct scan_result r;
	double mean = 0;
	settings.design_noise = design;
	settings.threshold = 4;
	settings.network_threshold = 9;
	settings.shifts = 200;
	search(&settings, 2, true, lists);
	scan_coincide(network, &settings, lists, SECONDS, &r);
	for (int k = 0; k < SIGNALS; k++) {
		struct wave_source s = signal(k);
		const struct scan_candidate *c = found(&r, lists, &s);
		check_signal(&s, c, lists);
		mean += c->network_snr / SIGNALS;
	}
	near_rel(mean, LOUD, 0.1);
	assert_int_equal(r.n, SIGNALS);
	scan_result_free(&r);
	drop_lists(lists);
}

static void signals_are_found_with_the_stated_noise(void **state)
{
	(void)state;
	signals_are_found(true);
}
static void signals_are_found_with_estimated_noise(void **state)
{
	(void)state;
	signals_are_found(false);
}

static void noise_alone_makes_few_claims(void **state)
{
	(void)state;
	struct scan_settings settings = scan_defaults;
	int candidates = 0;
	settings.shifts = 1000;
	for (uint64_t seed = 20; seed < 24; seed++) {
		struct scan_list lists[WAVE_MAX_STATIONS] = {{0}};
		struct scan_result r;
		search(&settings, seed, false, lists);
		scan_coincide(network, &settings, lists, SECONDS, &r);
		candidates += r.n;
		scan_result_free(&r);
		drop_lists(lists);
	}
	assert_in_range(candidates, 0, 1);
}

/* |z| / sigma of noise: exp(-x^2 / 2) is the share above x, so the number of maxima falls by this ratio. */
static void noise_is_measured_in_its_own_deviations(void **state)
{
	(void)state;
	struct scan_settings settings = scan_defaults;
	struct scan_list list = {0};
	struct qb_error e = {0};
	size_t above = 0;
	double *x = noise_of(0, 31);
	settings.threshold = 3.5;
	assert_int_equal(scan_station(&network->stations[0], &bank, &settings, x, N, RATE_HZ, &list, &e), QB_OK);
	for (size_t k = 0; k < list.n; k++) {
		assert_true(list.trigger[k].snr >= settings.threshold);
		above += list.trigger[k].snr >= 4.25;
	}
	assert_true(list.n > 500);
	/* the rate of maxima goes with x exp(-x^2 / 2) (Rice 1945), a little fewer where they crowd */
	near_rel((double)above / (double)list.n, 4.25 / 3.5 * exp((3.5 * 3.5 - 4.25 * 4.25) / 2), 0.25);
	qb_free(list.trigger);
	qb_free(x);
}

static void threads_do_not_matter(void **state)
{
	(void)state;
	struct scan_settings settings = scan_defaults;
	struct scan_list one = {0}, three = {0};
	struct qb_error e = {0};
	double *x = noise_of(0, 40);
	settings.threshold = 4;
	settings.threads = 1;
	assert_int_equal(scan_station(&network->stations[0], &bank, &settings, x, N, RATE_HZ, &one, &e), QB_OK);
	settings.threads = 3;
	assert_int_equal(scan_station(&network->stations[0], &bank, &settings, x, N, RATE_HZ, &three, &e), QB_OK);
	assert_true(one.n > 10);
	assert_int_equal(one.n, three.n);
	for (size_t k = 0; k < one.n; k++) {
		assert_int_equal(one.trigger[k].template, three.trigger[k].template);
		near_abs(one.trigger[k].t_s, three.trigger[k].t_s, 0);
		near_abs(one.trigger[k].snr, three.trigger[k].snr, 0);
	}
	qb_free(one.trigger);
	qb_free(three.trigger);
	qb_free(x);
}

/* ---- coincidence and background, on lists made by hand ---- */

static int by_time(const void *a, const void *b)
{
	const struct scan_trigger *x = a, *y = b;
	return (x->t_s > y->t_s) - (x->t_s < y->t_s);
}

/* n triggers at random times, SNR with the tail exp(-(x^2 - least^2) / 2). */
static struct scan_list chance(uint64_t key, size_t n, double least, double seconds)
{
	struct scan_list l = {n, n, QB_NEW_ARRAY(struct scan_trigger, n)};
	for (size_t k = 0; k < n; k++)
		l.trigger[k] = (struct scan_trigger){
		    .t_s = seconds * uniform_from_u64(splitmix64(key + 2 * k)),
		    .snr = sqrt(least * least - 2 * log(uniform_from_u64(splitmix64(key + 2 * k + 1))))};
	qsort(l.trigger, n, sizeof *l.trigger, by_time);
	return l;
}

static void background_is_what_chance_gives(void **state)
{
	(void)state;
	struct scan_settings settings = scan_defaults;
	struct scan_list lists[WAVE_MAX_STATIONS] = {chance(1000000, 400, 5, 4000), chance(2000000, 500, 5, 4000)};
	struct scan_result r;
	network->n_stations = 2;
	settings.network_threshold = 3;
	settings.shifts = 2000;
	scan_coincide(network, &settings, lists, 4000, &r);
	double window = 2 * (station_light_time_s(&network->stations[0], &network->stations[1]) + settings.slack_s);
	near_abs(r.background_s, 2000 * 4000.0, 1e-3);
	near_rel((double)r.background_events / r.background_s, 400 / 4000.0 * (500 / 4000.0) * window, 0.05);
	scan_result_free(&r);
	drop_lists(lists);
	network->n_stations = 3;
}

static void rate_falls_with_ranking(void **state)
{
	(void)state;
	struct scan_settings settings = scan_defaults;
	struct scan_list lists[WAVE_MAX_STATIONS] = {chance(3, 4000, 5, 4000), chance(50003, 4000, 5, 4000),
	                                             chance(90003, 4000, 5, 4000)};
	struct scan_result r;
	int rates = 0;
	settings.shifts = 50;
	scan_coincide(network, &settings, lists, 4000, &r);
	assert_true(r.n > 20);
	for (int c = 0; c < r.n; c++) {
		const struct scan_candidate *x = &r.candidate[c];
		assert_true(x->network_snr >= settings.network_threshold);
		assert_true(x->far_per_year >= YEAR_S / r.background_s * (1 - 1e-12));
		if (c > 0) {
			assert_true(x->network_snr <= x[-1].network_snr);
			assert_true(x->far_per_year >= x[-1].far_per_year);
			rates += x->far_per_year > x[-1].far_per_year;
		}
	}
	assert_true(rates > 10);
	/* all are chance: the weakest has as many beside it per time as the background says */
	near_rel(r.candidate[r.n - 1].far_per_year, r.n / 4000.0 * YEAR_S, 0.5);
	scan_result_free(&r);
	drop_lists(lists);
}

/* One trigger in each of two stations, `apart_s` from each other; the number of candidates. */
static int pair(double apart_s, int template_b, struct scan_candidate *out)
{
	struct scan_settings settings = scan_defaults;
	struct scan_list lists[WAVE_MAX_STATIONS] = {{1, 1, QB_NEW_ARRAY(struct scan_trigger, 1)},
	                                             {1, 1, QB_NEW_ARRAY(struct scan_trigger, 1)}};
	struct scan_result r;
	lists[0].trigger[0] = (struct scan_trigger){.t_s = 500, .snr = 8};
	lists[1].trigger[0] = (struct scan_trigger){.t_s = 500 + apart_s, .snr = 6, .template = template_b};
	settings.shifts = 100;
	scan_coincide(network, &settings, lists, 1000, &r);
	int n = r.n;
	if (n > 0 && out != NULL) {
		*out = r.candidate[0];
		near_rel(out->far_per_year, YEAR_S / r.background_s, 1e-12);
	}
	scan_result_free(&r);
	drop_lists(lists);
	return n;
}

static void coincidence_ends_at_the_light_time(void **state)
{
	(void)state;
	struct scan_candidate c = {0};
	double reach = station_light_time_s(&network->stations[0], &network->stations[1]) + scan_defaults.slack_s;
	assert_int_equal(pair(0, 0, &c), 1);
	near_abs(c.network_snr, 10, 1e-12);
	assert_true(c.far_is_limit);
	assert_int_equal(c.trigger[2], SCAN_NONE);
	assert_int_equal(pair(reach - 1e-4, 0, NULL), 1);
	assert_int_equal(pair(-reach + 1e-4, 0, NULL), 1);
	assert_int_equal(pair(reach + 1e-4, 0, NULL), 0);
	assert_int_equal(pair(-reach - 1e-4, 0, NULL), 0);
	assert_int_equal(pair(0, 1, NULL), 0); /* another template */
}

/* ---- claims ---- */

static double quantile(const json_t *claim, const char *key, size_t k)
{
	const json_t *list = json_object_get(json_object_get(claim, "quantiles_05_25_50_75_95"), key);
	assert_int_equal(json_array_size(list), 5);
	return json_number_value(json_array_get(list, k));
}

static void claims_are_claims(void **state)
{
	(void)state;
	struct scan_settings settings = scan_defaults;
	struct scan_claim_settings claim = {.pipeline = "amber", .far_ceiling_per_year = 1e12};
	struct scan_list lists[WAVE_MAX_STATIONS] = {{0}};
	struct scan_result r;
	struct qb_error e = {0};
	int pairs = 0;
	settings.shifts = 200;
	search(&settings, 2, true, lists);
	scan_coincide(network, &settings, lists, SECONDS, &r);
	json_t *list = scan_claims(network, &bank, lists, &r, &claim, START);
	assert_true(r.n >= SIGNALS - 2); /* some are loud in one station alone */
	assert_int_equal(json_array_size(list), r.n);
	for (int c = 0; c < r.n; c++) {
		const json_t *one = json_array_get(list, (size_t)c);
		char id[64];
		double off = INFINITY, sigma = json_number_value(json_object_get(one, "arrival_gps_sigma_s"));
		snprintf(id, sizeof id, "amber-%06d", c + 1);
		assert_string_equal(json_string_value(json_object_get(one, "claim_id")), id);
		assert_int_equal(claim_check(one, "claims.jsonl:1", &e), QB_OK);
		for (int k = 0; k < SIGNALS; k++)
			off = fmin(off, fabs(quantile(one, "arrival_gps", 2) - (double)signal(k).arrival_gps_ns / 1e9));
		assert_true(sigma > 0.001 && sigma < 0.022);
		assert_true(off < 3 * sigma);
		if (r.candidate[c].template == 3)
			continue;
		/* 36 and 29 solar masses */
		assert_true(quantile(one, "chirp_mass_msun", 0) < source_chirp_mass_msun(&bank.templates[1]));
		assert_true(quantile(one, "chirp_mass_msun", 4) > source_chirp_mass_msun(&bank.templates[1]));
		pairs++;
	}
	assert_true(pairs > 1);
	json_decref(list);
	claim.far_ceiling_per_year = 0; /* every rate is above */
	list = scan_claims(network, &bank, lists, &r, &claim, START);
	assert_int_equal(json_array_size(list), 0);
	json_decref(list);
	scan_result_free(&r);
	drop_lists(lists);
}

/*
 * SNR^2 falls as a parabola of width 0.3 in ln(mass) around a point between templates: middle and width of the
 * quantiles are the parabola's, with the bank's spacing (uniform between templates) and 10 % for what the bank lacks.
 */
static void mass_follows_the_loudness_of_the_templates(void **state)
{
	(void)state;
	enum { TEMPLATES = 7 };
	const double step = 0.1, width = 0.3, off = 0.03, top = 400;
	struct wave_source templates[TEMPLATES];
	const struct scan_bank row = {TEMPLATES, templates};
	struct scan_list lists[WAVE_MAX_STATIONS] = {{0}};
	struct scan_candidate c = {.template = TEMPLATES / 2, .trigger = {3, 3, SCAN_NONE}};
	struct scan_result r = {.n = 1, .candidate = &c};
	const struct scan_claim_settings claim = {.pipeline = "amber", .far_ceiling_per_year = 1e12};
	for (int i = 0; i < 2; i++)
		lists[i] = (struct scan_list){TEMPLATES, TEMPLATES, QB_NEW_ARRAY(struct scan_trigger, TEMPLATES)};
	for (int k = 0; k < TEMPLATES; k++) {
		double x = (k - TEMPLATES / 2) * step, square = top - (x - off) * (x - off) / (width * width);
		templates[k] = bank.templates[2];
		templates[k].p[CB_PRIMARY_MASS] = 30 * exp(x);
		templates[k].p[CB_SECONDARY_MASS] = 30 * exp(x);
		for (int i = 0; i < 2; i++)
			lists[i].trigger[k] = (struct scan_trigger){
			    .t_s = 100 + 0.01 * i, .snr = sqrt(square * (i == 0 ? 0.64 : 0.36)), .template = k};
		if (k == c.template)
			c.network_snr = sqrt(square);
	}
	json_t *list = scan_claims(network, &row, lists, &r, &claim, START);
	const json_t *one = json_array_get(list, 0);
	double middle = source_chirp_mass_msun(&templates[TEMPLATES / 2]) * exp(off);
	double sigma = sqrt(width * width + step * step / 12 + 0.1 * 0.1);
	near_rel(quantile(one, "chirp_mass_msun", 2), middle, 1e-6);
	near_rel(quantile(one, "chirp_mass_msun", 0), middle * exp(-1.6448536269514722 * sigma), 1e-6);
	near_rel(quantile(one, "chirp_mass_msun", 4), middle * exp(1.6448536269514722 * sigma), 1e-6);
	near_abs(quantile(one, "arrival_gps", 2), (double)START / 1e9 + 100.005, 2e-6);
	json_decref(list);
	drop_lists(lists);
}

/* ---- refusals ---- */

static void bad_banks_are_refused_in_one_line(void **state)
{
	(void)state;
	static const struct {
		const char *text, *word;
	} cases[] = {
	    {"", "bank.yaml"},
	    {"[]", "bank.yaml:1"},
	    {"family: sine-gaussian\n", "bank.yaml:1"},
	    {"- {family: sine-gaussian, frequency_hz: 150, quality: 9}\n- 7\n", "bank.yaml:2"},
	    {"- {family: sine-gaussian, frequency_hz: 150, quality: 9, colour: red}\n", "colour"},
	    {"- {family: sine-gaussian, frequency_hz: 150}\n", "quality"},
	    {"- {family: sine-gaussian, frequency_hz: 150, quality: 9, declination_rad: 0}\n", "declination_rad"},
	    {"- {family: compact-binary, primary_mass_msun: -3, secondary_mass_msun: 2}\n", "primary_mass_msun"},
	    {"- {family: teapot}\n", "teapot"},
	    {"- {family: [\n", "bank.yaml"}};
	for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
		struct scan_bank b;
		struct qb_error e = {0};
		char line[900];
		enum qb_status st = scan_bank_parse(cases[i].text, strlen(cases[i].text), "bank.yaml", &b, &e);
		assert_true(st == QB_FORMAT || st == QB_RANGE);
		assert_non_null(strstr(qb_error_line(&e, line, sizeof line), cases[i].word));
		assert_null(strchr(line, '\n'));
		assert_null(b.templates);
	}
}

static void strain_that_does_not_suit_is_refused(void **state)
{
	(void)state;
	struct scan_settings settings = scan_defaults;
	struct scan_list list = {0};
	struct qb_error e = {0};
	double *x = QB_NEW_ARRAY(double, N);
	const struct {
		size_t n;
		double rate_hz;
	} cases[] = {{N, 1024}, {N, 3000}, {N, NAN}, {0, RATE_HZ}, {63 * 2048, RATE_HZ}};
	for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
		e = (struct qb_error){0};
		assert_int_equal(
		    scan_station(&network->stations[0], &bank, &settings, x, cases[i].n, cases[i].rate_hz, &list, &e),
		    QB_RANGE);
		assert_string_equal(e.where, "tarn");
		assert_null(list.trigger);
	}
	qb_free(x);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(signals_are_found_with_the_stated_noise),
	    cmocka_unit_test(signals_are_found_with_estimated_noise),
	    cmocka_unit_test(noise_alone_makes_few_claims),
	    cmocka_unit_test(noise_is_measured_in_its_own_deviations),
	    cmocka_unit_test(threads_do_not_matter),
	    cmocka_unit_test(background_is_what_chance_gives),
	    cmocka_unit_test(rate_falls_with_ranking),
	    cmocka_unit_test(coincidence_ends_at_the_light_time),
	    cmocka_unit_test(claims_are_claims),
	    cmocka_unit_test(mass_follows_the_loudness_of_the_templates),
	    cmocka_unit_test(bad_banks_are_refused_in_one_line),
	    cmocka_unit_test(strain_that_does_not_suit_is_refused),
	};
	return cmocka_run_group_tests(tests, open_all, close_all);
}
