/* The draw: order, nulls, guards, loudness and redshift, redraws, weights. */
#include <math.h>

#include "server/base/clock.h"
#include "server/drill/signal.h"
#include "tests/unit/drill/demo.h"

#define SLOTS 16

static struct buf encoded(const struct drill_truth *t)
{
	struct buf b = {0};
	struct qb_error e = {0};
	assert_int_equal(truth_encode(t, &b, &e), QB_OK);
	return b;
}

static void order_does_not_matter(void **state)
{
	(void)state;
	struct drill_plan *p = demo_plan(DEMO_PLAN);
	struct buf forward[SLOTS];
	struct drill_truth t;
	for (int i = 0; i < SLOTS; i++) {
		demo_draw(p, false, i, &t);
		forward[i] = encoded(&t);
	}
	for (int i = SLOTS - 1; i >= 0; i--) {
		demo_draw(p, false, i, &t);
		struct buf b = encoded(&t);
		assert_int_equal(b.len, forward[i].len);
		assert_memory_equal(b.data, forward[i].data, b.len);
		buf_free(&b);
	}
	for (int i = 0; i < SLOTS; i++)
		buf_free(&forward[i]);
	plan_free(&p);
}

/* The same slot in an empty campaign: every number the same, as many variates taken, gain 0. */
static void null_is_a_full_draw(void **state)
{
	(void)state;
	struct drill_plan *p = demo_plan(DEMO_PLAN);
	int live = 0;
	for (int i = 0; i < SLOTS; i++) {
		struct drill_truth a, b;
		struct qb_error e = {0};
		struct demo_seed seed[2] = {{(uint64_t)i, 0, 0}, {(uint64_t)i, 0, 0}};
		struct draw_uniforms u[2] = {{demo_uniform, &seed[0]}, {demo_uniform, &seed[1]}};
		assert_int_equal(draw_slot(p, false, i, &u[0], &a, &e), QB_OK);
		assert_int_equal(draw_slot(p, true, i, &u[1], &b, &e), QB_OK);
		live += a.live;
		assert_false(b.live);
		near_abs(b.gain, 0, 0);
		near_abs(a.gain, a.live, 0);
		assert_int_equal(seed[0].calls, seed[1].calls);
		assert_int_equal(seed[0].largest, seed[1].largest);
		b.live = a.live;
		b.gain = a.gain;
		assert_int_equal(truth_compare(&a, &b, 0, &e), QB_OK);
	}
	assert_true(live > 0 && live < SLOTS);
	plan_free(&p);
}

static void live_chance_and_family(void **state)
{
	(void)state;
	struct drill_plan *p = demo_plan(DEMO_PLAN);
	for (int i = 0; i < SLOTS; i++) {
		struct demo_seed seed = {(uint64_t)i, 0, 0};
		struct drill_truth t;
		demo_draw(p, false, i, &t);
		assert_int_equal(t.live, demo_uniform(&seed, 0) < 12.0 / 40);
		assert_string_equal(t.name, demo_uniform(&seed, 1) < 0.75 ? "heavy-pairs" : "glints");
		assert_int_equal(t.source_frame, t.name[0] == 'h');
		assert_int_equal(t.slot, i);
		assert_int_equal(t.slot_start_ns, slots_start(&p->slots, i));
	}
	plan_free(&p);
}

static void campaign_draw(void **state)
{
	(void)state;
	struct drill_plan *p = demo_plan(DEMO_PLAN);
	int empty = 0;
	for (uint64_t i = 0; i < 4000; i++) {
		struct demo_seed seed = {i, 0, 0};
		struct draw_uniforms u = {demo_uniform, &seed};
		p->empty_chance = 0;
		assert_false(draw_campaign_empty(p, &u));
		p->empty_chance = 1;
		assert_true(draw_campaign_empty(p, &u));
		p->empty_chance = 0.1;
		empty += draw_campaign_empty(p, &u);
		assert_int_equal(seed.largest, 0);
	}
	near_abs(empty / 4000.0, 0.1, 4 * sqrt(0.09 / 4000));
	plan_free(&p);
}

/* The whole drive of every station keeps the guard from both ends, in both demo plans, also for extreme variates. */
static double at_edge(void *state, uint64_t m)
{
	return (m ^ *(uint64_t *)state) & 1 ? 0x1p-54 : 1 - 0x1p-53;
}

static void keeps_the_guards(const struct drill_plan *p, const struct drill_truth *t)
{
	int64_t from, to;
	assert_true(slots_window(&p->slots, t->slot, &from, &to));
	for (int s = 0; s < t->n_stations; s++) {
		assert_true(t->station[s].drive_from_ns >= from);
		assert_true(t->station[s].drive_to_ns <= to);
		assert_true(t->station[s].drive_from_ns < t->source.arrival_gps_ns);
		assert_true(t->station[s].drive_to_ns > t->source.arrival_gps_ns);
	}
}

static void guards(void **state)
{
	(void)state;
	const char *const names[] = {DEMO_PLAN, SHORT_PLAN};
	for (int i = 0; i < 2; i++) {
		struct drill_plan *p = demo_plan(names[i]);
		struct drill_truth t;
		for (int slot = 0; slot < 6; slot++) {
			demo_draw(p, false, slot, &t);
			keeps_the_guards(p, &t);
		}
		for (uint64_t parity = 0; parity < 2; parity++) {
			struct draw_uniforms u = {at_edge, &parity};
			struct qb_error e = {0};
			p->redraws = 0;
			enum qb_status st = draw_slot(p, false, 0, &u, &t, &e);
			char line[900];
			if (st != QB_OK)
				fail_msg("%s", qb_error_line(&e, line, sizeof line));
			keeps_the_guards(p, &t);
		}
		plan_free(&p);
	}
}

/* Luminosity distance by Simpson's rule, written out here. */
static double luminosity_distance_mpc(double z)
{
	double sum = 0;
	int n = 2000;
	for (int i = 0; i <= n; i++) {
		double x = z * i / n, f = 1 / sqrt(0.3075 * pow(1 + x, 3) + 0.6925);
		sum += f * (i == 0 || i == n ? 1 : i % 2 == 1 ? 4 : 2);
	}
	return (1 + z) * sum * z / n / 3 * 299792.458 / 67.74;
}

/* The SNR is the drawn one, the distance goes with the redshift, and the masses are redshifted by it. */
static void loudness_and_redshift(void **state)
{
	(void)state;
	struct drill_plan *p = demo_plan(DEMO_PLAN);
	int pairs = 0, glints = 0;
	for (int i = 0; i < SLOTS; i++) {
		struct demo_seed seed = {(uint64_t)i, 0, 0};
		struct drill_truth t;
		demo_draw(p, false, i, &t);
		uint64_t base = 64 * (uint64_t)t.redraws;
		double u = demo_uniform(&seed, base + 8), sum = 0, v = 0;
		double wanted = 1 / (1.0 / 8 - u * (1.0 / 8 - 1.0 / 40)); /* p ~ x^-2 from 8 to 40 */
		near_rel(t.network_snr, wanted, 1e-9);
		for (int s = 0; s < t.n_stations; s++)
			sum += t.station[s].snr * t.station[s].snr;
		near_rel(sqrt(sum), t.network_snr, 1e-9);
		near_rel(t.source.right_ascension_rad, 2 * M_PI * demo_uniform(&seed, base + 3), 1e-12);
		near_abs(sin(t.source.declination_rad), 2 * demo_uniform(&seed, base + 4) - 1, 1e-12);
		if (!t.source_frame) {
			glints++;
			near_abs(t.redshift, 0, 0);
			assert_false(t.has_weight);
			assert_true(signal_get(&t.source, "ellipticity_rad", &v));
			double c = 1 - 2 * demo_uniform(&seed, base + 5);
			near_abs(tan(v), 2 * c / (1 + c * c), 1e-12);
			continue;
		}
		pairs++;
		double k = 1 - pow(2, -1.35), mass = 25 * pow(1 - demo_uniform(&seed, base + 9) * k, -1 / 1.35), d = 0;
		assert_true(t.redshift > 0);
		assert_true(signal_get(&t.source, "distance_mpc", &d));
		near_rel(d, luminosity_distance_mpc(t.redshift), 1e-8);
		assert_true(signal_get(&t.source, "primary_mass_msun", &v));
		near_rel(v, mass * (1 + t.redshift), 1e-10);
		assert_true(signal_get(&t.source, "inclination_rad", &v));
		near_abs(cos(v), 1 - 2 * demo_uniform(&seed, base + 5), 1e-12);
	}
	assert_true(pairs > 0 && glints > 0);
	plan_free(&p);
}

static void limits_and_redraws(void **state)
{
	(void)state;
	struct drill_plan *p = demo_plan(DEMO_PLAN);
	struct drill_truth t;
	struct qb_error e = {0};
	/* Comfortable as it stands. */
	double largest = 0;
	for (int i = 0; i < SLOTS; i++) {
		demo_draw(p, false, i, &t);
		assert_int_equal(t.redraws, 0);
		for (int s = 0; s < t.n_stations; s++)
			largest = fmax(largest, t.station[s].peak_drive_counts);
	}
	/* With the limit inside the drawn range some slots are drawn again, in strides of 64, and all end below it. */
	double range = 131072;
	int redrawn = 0;
	p->largest_drive = largest / 2 / range;
	for (int i = 0; i < SLOTS; i++) {
		struct demo_seed seed = {(uint64_t)i, 0, 0};
		struct draw_uniforms u = {demo_uniform, &seed};
		assert_int_equal(draw_slot(p, false, i, &u, &t, &e), QB_OK);
		redrawn += t.redraws > 0;
		assert_true(seed.largest >= 64 * (uint64_t)t.redraws && seed.largest < 64 * ((uint64_t)t.redraws + 1));
		for (int s = 0; s < t.n_stations; s++)
			assert_true(t.station[s].peak_drive_counts <= largest / 2);
	}
	assert_true(redrawn > 0);
	/* With no room at all the draw ends after the plan's redraws, and says why. */
	p->largest_drive = 1e-9;
	p->redraws = 3;
	struct demo_seed seed = {5, 0, 0};
	struct draw_uniforms u = {demo_uniform, &seed};
	assert_int_equal(draw_slot(p, false, 5, &u, &t, &e), QB_RANGE);
	assert_non_null(strstr(e.what, "3 redraws"));
	assert_true(seed.largest < 64 * 4 && seed.largest >= 64 * 3);
	plan_free(&p);
}

/* Station frame: SNR goes as 1/D, so the weight can be written out: p/q(m) x 4 pi D^2 / (q(rho) rho / D). */
static void weight_in_the_station_frame(void **state)
{
	(void)state;
	struct drill_plan *p = NULL;
	struct qb_error e = {0};
	struct drill_truth t;
	int n = 0;
	assert_int_equal(demo_parse(DEMO_PLAN, "frame: source", "frame: station", &p, &e), QB_OK);
	p->audit.population.p[0].dist.index = -1; /* target p ~ 1/m on [25, 50], drawn p ~ m^-2.35 on the same */
	for (int i = 0; i < SLOTS; i++) {
		double m = 0, d = 0;
		demo_draw(p, false, i, &t);
		if (t.name[0] != 'h')
			continue;
		assert_true(t.has_weight);
		assert_true(signal_get(&t.source, "primary_mass_msun", &m) &&
		            signal_get(&t.source, "distance_mpc", &d));
		near_abs(t.redshift, 0, 0);
		double rho = t.network_snr, q_rho = pow(rho, -2) / (1.0 / 8 - 1.0 / 40);
		double q_m = 1.35 / (pow(25, -1.35) - pow(50, -1.35)) * pow(m, -2.35);
		near_rel(t.weight_mpc3, 1 / (m * M_LN2) / q_m * 4 * M_PI * d * d / (q_rho * rho / d), 1e-8);
		n++;
	}
	assert_true(n > 0);
	plan_free(&p);
}

/* Source frame: the volume element by differences of comoving volume over time dilation, the slope from two draws. */
static void weight_in_the_source_frame(void **state)
{
	(void)state;
	struct drill_plan *p = demo_plan(DEMO_PLAN);
	struct drill_truth t;
	int n = 0;
	for (int i = 0; i < SLOTS && n < 3; i++) {
		demo_draw(p, false, i, &t);
		if (t.name[0] != 'h')
			continue;
		struct drill_plan *q = demo_plan(DEMO_PLAN);
		double z = t.redshift, h = 1e-4 * z, d = 0;
		assert_true(signal_get(&t.source, "distance_mpc", &d));
		/* The same draw with the distance fixed a little nearer and farther gives the slope of the SNR. */
		struct drill_truth near, far;
		q->family[0].loudness = LOUD_BY_SCALE;
		q->family[0].loud = (struct dist){.kind = DIST_FIXED, .from = {d * 0.999, -1}, .to = {d * 0.999, -1}};
		demo_draw(q, false, i, &near);
		q->family[0].loud.from.value = d * 1.001;
		demo_draw(q, false, i, &far);
		double slope = (near.network_snr - far.network_snr) / (0.002 * d);
		double d1 = luminosity_distance_mpc(z - h), d2 = luminosity_distance_mpc(z + h);
		double v1 = pow(d1 / (1 + z - h), 3), v2 = pow(d2 / (1 + z + h), 3);
		double volume = 4 * M_PI / 3 * (v2 - v1) / (d2 - d1) / (1 + z);
		double q_rho = pow(t.network_snr, -2) / (1.0 / 8 - 1.0 / 40);
		/* Target and draw have the same mass distribution: they cancel. */
		near_rel(t.weight_mpc3, volume / (q_rho * slope), 1e-4);
		plan_free(&q);
		n++;
	}
	assert_int_equal(n, 3);
	plan_free(&p);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(order_does_not_matter),
	    cmocka_unit_test(null_is_a_full_draw),
	    cmocka_unit_test(live_chance_and_family),
	    cmocka_unit_test(campaign_draw),
	    cmocka_unit_test(guards),
	    cmocka_unit_test(loudness_and_redshift),
	    cmocka_unit_test(limits_and_redraws),
	    cmocka_unit_test(weight_in_the_station_frame),
	    cmocka_unit_test(weight_in_the_source_frame),
	};
	return cmocka_run_group_tests_name("drill/draw", tests, NULL, NULL);
}
