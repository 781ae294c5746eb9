/* Plans: the demo plans as they are, then every kind of error one by one, by its line and its words. */
#include <math.h>

#include "server/base/clock.h"
#include "tests/unit/drill/demo.h"

static void demo_is_read(void **state)
{
	(void)state;
	struct drill_plan *p = demo_plan(DEMO_PLAN);
	assert_string_equal(p->campaign, "fells-rehearsal");
	assert_int_equal(p->phase, PLAN_REHEARSAL);
	assert_int_equal(slots_count(&p->slots), 40);
	assert_int_equal(p->slots.slot_ns, 64 * NS_PER_S);
	assert_int_equal(p->slots.guard_ns, 12 * NS_PER_S);
	assert_int_equal(p->slots.lead_ns, 16 * NS_PER_S);
	assert_int_equal(p->network->n_stations, 3);
	assert_int_equal(p->custodians, 3);
	assert_string_equal(plan_person(p, DUTY_CUSTODIAN, 2)->name, "marchetti");
	assert_null(plan_person(p, DUTY_CUSTODIAN, 3));
	assert_string_equal(plan_person_named(p, "diego")->of, "birch");
	assert_int_equal(plan_person_named(p, "diego")->duty, DUTY_ANALYST);
	assert_null(plan_person_named(p, "nobody"));
	assert_string_equal(plan_person_named(p, "hostc")->of, "skerry");
	assert_int_equal(plan_station(p, "skerry"), 2);
	assert_int_equal(plan_station(p, "reef"), -1);
	assert_int_equal(p->n_families, 2);
	const struct plan_family *f = &p->family[0];
	assert_true(f->source_frame && f->loudness == LOUD_BY_SNR);
	assert_string_equal(f->scale, "distance_mpc");
	assert_int_equal(f->parameters.n, 4);
	assert_int_equal(f->parameters.p[1].dist.to.parameter, 0);
	assert_string_equal(p->family[1].scale, "hrss_per_sqrt_hz");
	near_rel(plan_live_chance(p), 0.3, 1e-15);
	near_rel(plan_chance_of_none(p), pow(0.7, 40), 1e-12);
	plan_free(&p);
	assert_null(p);
}

static void defaults(void **state)
{
	(void)state;
	struct drill_plan *p = demo_plan(SHORT_PLAN);
	assert_int_equal(p->redraws, 100);
	near_abs(p->hubble_km_per_s_per_mpc, 67.74, 0);
	near_abs(p->matter_density, 0.3075, 0);
	near_abs(p->largest_drive, 0.8, 0);
	near_abs(p->delivery_amplitude, 0.05, 0);
	near_abs(p->audit.match_sigma_factor, 3, 0);
	near_abs(p->audit.match_max_s, 0.25, 0);
	assert_int_equal(p->audit.parameters.n, 4);
	assert_int_equal(p->audit.latency_marks_s.n, 4);
	assert_int_equal(p->acceptance_ns, 30 * 86400 * NS_PER_S);
	assert_true(isnan(p->audit.band_at_network_snr));
	assert_false(p->alerts.given);
	near_abs(p->family[0].weight, 1, 0);
	near_abs(p->family[0].place.p[5].dist.from.value, 20, 0);
	plan_free(&p);
}

/* The example of interfaces.md with its own chances: (1 - q)^n by hand. */
static void chance_of_none(void **state)
{
	(void)state;
	struct drill_plan *p = demo_plan(DEMO_PLAN);
	p->expected_live = 2;
	p->slots.end_gps_ns = p->slots.start_gps_ns + 10 * p->slots.slot_ns;
	near_abs(plan_chance_of_none(p), 0.107, 5e-4); /* audit J4: n = 10, q = 0.2 */
	p->expected_live = 3;
	p->slots.end_gps_ns = p->slots.start_gps_ns + 20 * p->slots.slot_ns;
	near_abs(plan_chance_of_none(p), 0.039, 5e-4); /* n = 20, q = 0.15 */
	p->empty_chance = 0.1;
	near_abs(plan_chance_of_none(p), 0.1 + 0.9 * pow(0.85, 20), 1e-12);
	plan_free(&p);
}

/* --- what is wrong with the file: exit status 3 --- */

static void wrong(const char *from, const char *to, enum qb_status want, const char *where, const char *word)
{
	struct drill_plan *p = NULL;
	struct qb_error e = {0};
	char line[900];
	enum qb_status st = demo_parse(DEMO_PLAN, from, to, &p, &e);
	qb_error_line(&e, line, sizeof line);
	if (st != want || strstr(line, where) == NULL || strstr(line, word) == NULL || strchr(line, '\n') != NULL)
		fail_msg("'%s': status %d, '%s'; expected %d, '%s', '%s'", to, st, line, want, where, word);
	assert_null(p);
	assert_int_equal(qb_exit_status(st), 3);
}

static void wrong_files(void **state)
{
	(void)state;
	wrong("redraws: 100", "redrawz: 100", QB_FORMAT, "plan.yaml:46: redrawz", "unknown key");
	wrong("index: 2, from: 8", "indes: 2, from: 8", QB_FORMAT, "network_snr", "'index' is missing");
	wrong("quality: ", "qualitat: ", QB_FORMAT, "drills.families[1]", "quality");
	wrong("stations_needed: 2\n", "", QB_FORMAT, "plan.yaml", "'stations_needed' is missing");
	wrong("campaign: fells-rehearsal\n", "", QB_FORMAT, "plan.yaml", "'campaign' is missing");
	wrong("phase: rehearsal", "phase: holiday", QB_FORMAT, "plan.yaml:3: phase",
	      "observing, engineering, rehearsal");
	wrong("slot: 64 s", "slot: 64", QB_FORMAT, "plan.yaml:6: slot", "a duration");
	wrong("slot: 64 s", "slot: 64 parsec", QB_FORMAT, "slot", "64 parsec");
	wrong("slot: 64 s", "slot: 0 s", QB_RANGE, "slot", "0.1 s to 604800 s");
	wrong("starts: 2027-03-01T00:00:00Z", "starts: yesterday", QB_FORMAT, "plan.yaml:4: starts", "yesterday");
	wrong("custodians_needed: 2", "custodians_needed: two", QB_FORMAT, "parties.custodians_needed", "two");
	wrong("custodians_needed: 2", "custodians_needed: 0", QB_RANGE, "parties.custodians_needed", "'0'");
	wrong("[ines, okoro, marchetti]", "[ines, Okoro, marchetti]", QB_FORMAT, "parties.custodians[1]", "Okoro");
	wrong("[ines, okoro, marchetti]", "ines", QB_FORMAT, "parties.custodians", "a list");
	wrong("[asha]", "[]", QB_RANGE, "parties.reviewers", "1 to 64");
	wrong("expected_live: 12", "expected_live: -1", QB_RANGE, "drills.expected_live", "-1");
	wrong("expected_live: 12", "expected_live: '12'", QB_FORMAT, "drills.expected_live", "a number");
	wrong("empty_chance: 0 ", "empty_chance: 1.5 ", QB_RANGE, "drills.empty_chance", "1.5");
	wrong("guard: 12 s", "guard: 2 d", QB_RANGE, "drills.guard", "86400");
	wrong("family: sine-gaussian", "family: whistle", QB_FORMAT, "drills.families[1].family", "compact-binary");
	wrong("model: IMRPhenomD", "model: magic", QB_FORMAT, "drills.families[0].model", "IMRPhenomD");
	wrong("frame: source", "frame: moving", QB_FORMAT, "drills.families[0].frame", "station, source");
	wrong("{power-law: {index: -2.35, from: 25, to: 50}}", "-3", QB_RANGE, "families[0].primary_mass_msun", "-3");
	wrong("{power-law: {index: -2.35, from: 25, to: 50}}", "{uniform: {from: -3, to: 50}}", QB_RANGE,
	      "families[0].primary_mass_msun", "-3");
	wrong("from: -0.9, to: 0.9", "from: -1.9, to: 0.9", QB_RANGE, "families[0].primary_spin", "-1.9");
	wrong("to: primary_mass_msun", "to: tertiary_mass_msun", QB_FORMAT, "secondary_mass_msun", "stands above");
	wrong("orientation: isotropic", "orientation: sideways", QB_FORMAT, "orientation", "isotropic");
	wrong("weight: 3", "weight: 0", QB_RANGE, "families[0].weight", "'0'");
	wrong("      network_snr:         {inverse-power: {index: 2, from: 8, to: 40}}\n", "", QB_FORMAT, "families[0]",
	      "network_snr");
	wrong("weight: 3\n", "weight: 3\n      distance_mpc: 500\n", QB_FORMAT, "families[0]", "network_snr");
	wrong("      primary_mass_msun:   {power-law: {index: -2.35, from: 25, to: 50}}\n      secondary_mass_msun: "
	      "{uniform: "
	      "{from: 20, to: primary_mass_msun}}\n",
	      "", QB_FORMAT, "families[0]", "primary_mass_msun");
	wrong("lowest_frequency_hz: 20", "lowest_frequency_hz: 0.1", QB_RANGE, "lowest_frequency_hz", "0.1");
	wrong("lowest_frequency_hz: 20", "lowest_frequency_hz: {uniform: {from: 20, to: 30}}", QB_RANGE,
	      "lowest_frequency_hz", "one number");
	wrong("stations_needed: 2", "stations_needed: 9", QB_RANGE, "stations_needed", "9");
	wrong("largest_drive: 0.8", "largest_drive: 1.2", QB_RANGE, "limits.largest_drive", "1.2");
	wrong("largest_drive: 0.8", "excluded_bands_hz: [[515, 495]]", QB_RANGE, "limits.excluded_bands_hz[0][1]",
	      "495");
	wrong("largest_drive: 0.8", "excluded_bands_hz: [495]", QB_FORMAT, "limits.excluded_bands_hz[0]", "a pair");
	wrong("masked: true", "masked: yes", QB_FORMAT, "witness_channels[0].masked", "true or false");
	wrong("at_least: 0.5", "at_least: 50", QB_RANGE, "questions[0].at_least", "50");
	wrong("confidence: 0.95", "confidence: 95", QB_RANGE, "audit.confidence", "95");
	wrong("[1, 12, 100]", "[1, 12, many]", QB_FORMAT, "audit.far_thresholds_per_year[2]", "many");
	wrong("matter_density: 0.3075", "matter_density: 0.3075, dark: 1", QB_FORMAT, "cosmology.dark", "unknown key");
	wrong("network: network.yaml", "network: nowhere.yaml", QB_IO, "nowhere.yaml", "");
	wrong("# A rehearsal", "\t- [", QB_FORMAT, "plan.yaml:1", "");
}

static void parsing_never_ends_badly(void **state)
{
	(void)state;
	struct buf b = {0};
	struct qb_error e = {0};
	assert_int_equal(demo_fetch(NULL, DEMO_PLAN, &b, &e), QB_OK);
	for (size_t n = 0; n < b.len; n += 7) { /* cut short: refused or (hardly) complete, never a crash or a leak */
		struct drill_plan *p = NULL;
		struct qb_error cut = {0};
		if (plan_parse((char *)b.data, n, DEMO_PLAN, demo_fetch, NULL, &p, &cut) == QB_OK)
			plan_free(&p);
		else
			assert_null(p);
	}
	buf_free(&b);
}

/* --- what breaks a rule: exit status 1, all findings at once --- */

static const struct plan_finding *find(const struct plan_findings *f, const char *rule)
{
	for (int i = 0; i < f->n; i++) {
		if (strcmp(f->finding[i].rule, rule) == 0)
			return &f->finding[i];
	}
	return NULL;
}

static void breaks_in(const char *plan_name, const char *from, const char *to, enum plan_severity severity,
                      const char *rule, const char *word)
{
	struct drill_plan *p = NULL;
	struct qb_error e = {0};
	struct plan_findings f;
	char line[1000];
	if (demo_parse(plan_name, from, to, &p, &e) != QB_OK)
		fail_msg("'%s': %s", to, qb_error_line(&e, line, sizeof line));
	enum qb_status st = plan_check(p, &f, &e);
	const struct plan_finding *x = find(&f, rule);
	if (x == NULL)
		fail_msg("'%s': no finding '%s'; %s", to, rule, qb_error_line(&e, line, sizeof line));
	plan_finding_line(x, line, sizeof line);
	if (x->severity != severity || strstr(line, word) == NULL || strchr(line, '\n') != NULL || x->mend[0] == '\0' ||
	    strstr(x->where, ".yaml:") == NULL)
		fail_msg("'%s': '%s' lacks '%s'", to, line, word);
	assert_int_equal(st, f.n_refusals > 0 ? QB_NO : QB_OK);
	if (severity == PLAN_REFUSAL) {
		assert_int_equal(st, QB_NO);
		assert_int_equal(qb_exit_status(st), 1);
	}
	plan_findings_free(&f);
	plan_free(&p);
}

static void refused(const char *from, const char *to, const char *rule, const char *word)
{
	breaks_in(DEMO_PLAN, from, to, PLAN_REFUSAL, rule, word);
}
static void warned(const char *from, const char *to, const char *rule, const char *word)
{
	breaks_in(DEMO_PLAN, from, to, PLAN_WARNING, rule, word);
}

static void demo_plans_pass(void **state)
{
	(void)state;
	const char *const names[] = {DEMO_PLAN, SHORT_PLAN};
	for (int i = 0; i < 2; i++) {
		struct drill_plan *p = demo_plan(names[i]);
		struct plan_findings f;
		struct qb_error e = {0};
		char line[1000];
		enum qb_status st = plan_check(p, &f, &e);
		for (int j = 0; j < f.n; j++) {
			if (strcmp(f.finding[j].rule, "chance-of-none") != 0)
				fail_msg("%s", plan_finding_line(&f.finding[j], line, sizeof line));
		}
		assert_int_equal(st, QB_OK);
		assert_int_equal(f.n_refusals, 0);
		plan_findings_free(&f);
		plan_free(&p);
	}
}

static void broken_rules(void **state)
{
	(void)state;
	refused("00:42:40Z", "00:42:41Z", "slot-tiling", "64 s do not divide the stretch of 2561 s");
	refused("00:42:40Z", "00:00:00Z", "stretch-order", "ends before it starts");
	refused("slot: 64 s", "slot: 63 s", "slot-tiling", "plan.yaml:6: slot");
	refused("ends: 2027-03-01T00:42:40Z", "ends: 2031-03-01T00:42:40Z", "slot-count", "at most 1000000");
	refused("guard: 12 s", "guard: 32 s", "guard-room", "fill the whole slot");
	refused("guard: 12 s", "guard: 9 s", "guard-matching", "less than 4 x match_max_s = 20 s");
	refused("lead: 16 s", "lead: 0 s", "lead-zero", "no time");
	refused("match_base_s: 0.5", "match_base_s: 5.5", "match-window", "5.5 exceeds");
	refused("log_parameters: [chirp_mass_msun, distance_mpc]", "log_parameters: [inclination_rad]",
	        "log-parameters", "inclination_rad");
	refused("operators: [lund, petrov]", "operators: [lund, ines]", "one-side", "'ines' is custodian and operator");
	refused("cedar: wei", "cedar: noor", "one-side", "'noor' is analyst and analyst");
	refused("heron: hostb", "heron: hosta", "one-side", "'hosta' is driver and driver");
	refused("amber: noor", "amber: okoro", "one-side", "'okoro' is custodian and analyst");
	refused("reviewers: [asha]", "reviewers: [mbeki]", "one-side", "reviewer and liaison");
	refused("custodians_needed: 2", "custodians_needed: 3", "custodians-needed", "3 of 3");
	refused("custodians_needed: 2", "custodians_needed: 1", "custodians-needed", "alone");
	refused(", skerry: hostc", "", "driver-missing", "station 'skerry'");
	refused("skerry: hostc", "reef: hostc", "driver-station", "'reef' is not in network.yaml");
	refused("stations_needed: 2", "stations_needed: 4", "stations-needed", "4 stations are needed");
	refused("{station: heron, channel", "{station: reef, channel", "witness-station", "reef");
	refused("2027-03-01T00:00:00Z", "2026-12-31T00:00:00Z", "calibration-valid",
	        "not valid over the whole campaign");
	refused("expected_live: 12", "expected_live: 41", "expected-live", "41 live slots are expected of 40");
	refused("phase: rehearsal", "phase: observing", "chance-of-none", "everybody knows");
	refused("phase: rehearsal", "phase: observing", "alerts", "missing");
	refused("batch: 10 min", "batch: 10 min\nalerts: {recipients: [nobody]}", "recipients", "nobody");
	refused("{pipeline: any", "{pipeline: rowan", "question-pipeline", "rowan");
	refused("name: glints", "name: heavy-pairs", "family-name", "heavy-pairs");
	refused("{uniform: {from: 20, to: primary_mass_msun}}", "{uniform: {from: 30, to: primary_mass_msun}}",
	        "conditional-bound", "from 30, to 25");
	refused("guard: 12 s", "guard: 31.9 s", "family-fits", "'heavy-pairs'");
	refused("from: 25, to: 50}}\n      secondary_mass_msun: {uniform: {from: 20",
	        "from: 1.4, to: 50}}\n      "
	        "secondary_mass_msun: {uniform: {from: 1.2",
	        "family-fits", "a slot less its guards has 40 s");
	refused("population:\n    primary_mass_msun", "population:\n    total_mass_msun", "target-population",
	        "no family");
}

static void warnings(void **state)
{
	(void)state;
	warned("campaign", "campaign", "chance-of-none", "everybody knows");
	warned("phase: rehearsal", "phase: engineering", "chance-of-none", "0.02");
	warned("lead: 16 s", "lead: 65 s", "lead-long", "more than the next slot");
	warned("batch: 10 min", "batch: 1 h", "batch-long", "3600");
	warned("expected_live: 12", "expected_live: 0", "no-drills", "ever");
	warned("readers: [drivers], masked: true", "readers: [drivers]", "witness-masked", "tarn");
	warned("batch: 10 min", "batch: 10 min\nalerts: {recipients: [noor]}", "recipients", "set aside");
	warned("from: 25, to: 50}}\n  recog", "from: 5, to: 100}}\n  recog", "target-covered", "only from 25 to 50");
	warned("ines, okoro, marchetti]\n  custodians_needed: 2",
	       "ines, okoro, marchetti, sato, weiss]\n  "
	       "custodians_needed: 4",
	       "custodians-margin", "4 of 5");
}

static void slots_above_an_hour_warn(void **state)
{
	(void)state;
	struct drill_plan *p = demo_plan(DEMO_PLAN);
	struct plan_findings f;
	struct qb_error e = {0};
	p->slots.slot_ns = 7200 * NS_PER_S;
	p->slots.end_gps_ns = p->slots.start_gps_ns + 40 * p->slots.slot_ns;
	assert_int_equal(plan_check(p, &f, &e), QB_OK);
	assert_non_null(find(&f, "slot-long"));
	plan_findings_free(&f);
	plan_free(&p);
}

/* Several broken rules come out together, and the error says that there is more than one. */
static void all_at_once(void **state)
{
	(void)state;
	struct drill_plan *p = demo_plan(DEMO_PLAN);
	struct plan_findings f;
	struct qb_error e = {0};
	p->slots.end_gps_ns += 1;
	p->slots.lead_ns = 0;
	p->expected_live = 1000;
	p->stations_needed = 5;
	assert_int_equal(plan_check(p, &f, &e), QB_NO);
	assert_non_null(find(&f, "slot-tiling"));
	assert_non_null(find(&f, "lead-zero"));
	assert_non_null(find(&f, "expected-live"));
	assert_non_null(find(&f, "stations-needed"));
	assert_int_equal(f.n_refusals, 4);
	assert_non_null(strstr(e.what, "other rules"));
	plan_findings_free(&f);
	plan_free(&p);
}

/* An observing plan with everything that it needs passes without a word. */
static void observing_plan(void **state)
{
	(void)state;
	struct drill_plan *p = NULL;
	struct plan_findings f;
	struct qb_error e = {0};
	assert_int_equal(
	    demo_parse(
	        DEMO_PLAN, "phase: rehearsal",
	        "phase: observing\nsealer_host: 00112233445566778899aabbccddeeff00112233445566778899aabbccddeeff\n"
	        "alerts:\n  held_for_answer: [public-alerts]\n  partners_told: true\n"
	        "  no_answer_after: 15 min\n  then: release-with-warning\n  spot_quota: 5\n"
	        "  recipients: [mbeki]",
	        &p, &e),
	    QB_OK);
	p->empty_chance = 0.1;
	assert_int_equal(p->alerts.no_answer_after_ns, 900 * NS_PER_S);
	assert_int_equal(plan_check(p, &f, &e), QB_OK);
	assert_int_equal(f.n, 0);
	plan_findings_free(&f);
	plan_free(&p);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(demo_is_read),
	    cmocka_unit_test(defaults),
	    cmocka_unit_test(chance_of_none),
	    cmocka_unit_test(wrong_files),
	    cmocka_unit_test(parsing_never_ends_badly),
	    cmocka_unit_test(demo_plans_pass),
	    cmocka_unit_test(broken_rules),
	    cmocka_unit_test(warnings),
	    cmocka_unit_test(slots_above_an_hour_warn),
	    cmocka_unit_test(all_at_once),
	    cmocka_unit_test(observing_plan),
	};
	return cmocka_run_group_tests_name("drill/plan", tests, NULL, NULL);
}
