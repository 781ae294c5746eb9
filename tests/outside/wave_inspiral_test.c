/* Inspirals with tides and bursts, held to an independent implementation and to closed forms. */
#include <complex.h>

#include "server/base/alloc.h"
#include "server/wave/constants.h"
#include "server/wave/imr.h"
#include "server/wave/render.h"
#include "server/wave/spectrum.h"
#include "tests/near.h"
#include "tests/vectors/wave_inspiral.h"

#define COUNT(a) (sizeof(a) / sizeof(a)[0])
#define ARRIVAL  INT64_C(1488789012250000000)

static struct wave_source source(const char *family, const char *model)
{
	struct wave_source s;
	struct qb_error e = {0};
	assert_int_equal(source_init(&s, family, model, "test", &e), QB_OK);
	s.arrival_gps_ns = ARRIVAL;
	return s;
}

static void inspiral_phase_and_amplitude(void **state)
{
	(void)state;
	for (size_t i = 0; i < COUNT(inspiral_cases); i++) {
		const struct inspiral_case *c = &inspiral_cases[i];
		struct wave_source s = source("compact-binary", "TaylorF2"), bare;
		struct qb_error e = {0};
		double complex plus[7], cross[7], point[7], ignore[7];
		s.p[CB_PRIMARY_MASS] = c->m1;
		s.p[CB_SECONDARY_MASS] = c->m2;
		s.p[CB_PRIMARY_SPIN] = c->chi1;
		s.p[CB_SECONDARY_SPIN] = c->chi2;
		s.p[CB_PRIMARY_TIDE] = c->tide1;
		s.p[CB_SECONDARY_TIDE] = c->tide2;
		s.p[CB_DISTANCE] = 1;
		bare = s;
		bare.p[CB_PRIMARY_TIDE] = bare.p[CB_SECONDARY_TIDE] = 0;
		assert_int_equal(spectrum_at(&s, c->f_hz, 7, false, plus, cross, &e), QB_OK);
		assert_int_equal(spectrum_at(&bare, c->f_hz, 7, false, point, ignore, &e), QB_OK);
		near_rel(spectrum_end_hz(&s), c->isco_hz, 1e-10);
		near_rel(source_chirp_mass_msun(&s), c->chirp_mass, 1e-12);
		for (int k = 0; k < 7; k++) {
			near_rel(newtonian_time_s(c->chirp_mass, c->f_hz[k]), c->time_s[k], 1e-10);
			if (c->f_hz[k] > c->isco_hz) {
				assert_true(plus[k] == 0 && cross[k] == 0);
				continue;
			}
			near_rel(cabs(plus[k]), c->amplitude[k], 1e-10);
			/* e^(-i psi): the angle to the reference's phase, whole turns apart */
			near_abs(carg(plus[k] * cexp(I * fmod(c->psi[k], 2 * WAVE_PI))), 0,
			         1e-9 * fmax(1, fabs(c->psi[k])));
			near_abs(carg(point[k] / plus[k] * cexp(-I * fmod(c->psi_tidal[k], 2 * WAVE_PI))), 0,
			         1e-9 * fmax(1, fabs(c->psi_tidal[k])));
			near_abs(cabs(cross[k] + I * plus[k]), 0, 1e-12 * cabs(plus[k])); /* face-on: circular */
		}
	}
}

static void post_newtonian_coefficients(void **state)
{
	(void)state;
	for (size_t i = 0; i < COUNT(inspiral_cases); i++) {
		const struct inspiral_case *c = &inspiral_cases[i];
		double x1 = c->m1 / (c->m1 + c->m2), x2 = 1 - x1, got[8];
		taylor_coefficients(x1 * x2, x1 - x2, (c->chi1 + c->chi2) / 2, (c->chi1 - c->chi2) / 2, got);
		for (int k = 0; k < 8; k++)
			near_abs(got[k], c->phi[k], 1e-10 * fmax(1, fabs(c->phi[k])));
		/* the slope is the derivative of the phase */
		for (double mf = 1e-3; mf < 0.02; mf *= 1.7) {
			double h = mf * 1e-5;
			near_rel(taylor_slope(got, x1 * x2, mf),
			         (taylor_phase(got, x1 * x2, mf + h) - taylor_phase(got, x1 * x2, mf - h)) / (2 * h),
			         1e-7);
		}
	}
}

/* Samples at the centre and one millisecond later, rendered at a rate that has both on its grid. */
static void centre_and_later(const struct wave_source *s, double later_s, double plus[2], double cross[2])
{
	struct qb_error e = {0};
	double before, after, rate = 256000;
	wave_extent(s, &before, &after);
	size_t lead = (size_t)ceil(before * rate), n = 2 * lead + 1, later = (size_t)llround(later_s * rate);
	int64_t start = ARRIVAL - (int64_t)llround((double)lead / rate * 1e9);
	double *p = QB_NEW_ARRAY(double, n), *c = QB_NEW_ARRAY(double, n);
	/* the start is a whole number of nanoseconds: 256 kHz has 3906.25 ns a sample, so lead must divide by four */
	assert_true(lead % 4 == 0);
	assert_int_equal(render_polarizations(s, rate, start, n, p, c, &e), QB_OK);
	plus[0] = p[lead];
	plus[1] = p[lead + later];
	cross[0] = c[lead];
	cross[1] = c[lead + later];
	qb_free(p);
	qb_free(c);
}

static void bursts_in_time(void **state)
{
	(void)state;
	for (size_t i = 0; i < COUNT(sine_gaussian_cases); i++) {
		const struct sine_gaussian_case *c = &sine_gaussian_cases[i];
		struct wave_source s = source("sine-gaussian", NULL);
		s.p[SG_FREQUENCY] = c->f0;
		s.p[SG_QUALITY] = c->q;
		s.p[SG_ELLIPTICITY] = c->alpha;
		s.p[SG_PHASE] = c->delta;
		s.p[SG_HRSS] = c->hrss;
		double before, after, tau = c->q / (sqrt(2) * WAVE_PI * c->f0), plus[2], cross[2];
		near_rel(tau, c->tau, 1e-12);
		wave_extent(&s, &before, &after);
		/* choose a rate by hand so that the lead divides by four */
		struct qb_error e = {0};
		double rate = 64000;
		size_t lead = (size_t)ceil(before * rate / 64) * 64, n = 2 * lead + 1;
		double *p = QB_NEW_ARRAY(double, n), *x = QB_NEW_ARRAY(double, n);
		assert_int_equal(render_polarizations(&s, rate, ARRIVAL - (int64_t)(lead / 64) * 1000000, n, p, x, &e),
		                 QB_OK);
		plus[0] = p[lead];
		plus[1] = p[lead + 64];
		cross[0] = x[lead];
		cross[1] = x[lead + 64];
		/* the tails are followed to exp(-25) of the peak: that, and not the reference's 1e-10, is the bound */
		near_abs(plus[0], c->plus_t0, 1e-10 * c->k);
		near_abs(plus[1], c->plus_t1ms, 1e-10 * c->k);
		near_abs(cross[0], c->k * sin(c->alpha) * sin(c->delta), 1e-10 * c->k);
		near_abs(cross[1], c->cross_t1ms, 1e-10 * c->k);
		double sum = 0;
		for (size_t k = 0; k < n; k++)
			sum += p[k] * p[k] + x[k] * x[k];
		near_rel(sqrt(sum / rate), c->hrss, 1e-9);
		qb_free(p);
		qb_free(x);
	}
	(void)centre_and_later;
}

static void pulses_in_time(void **state)
{
	(void)state;
	for (size_t i = 0; i < COUNT(pulse_cases); i++) {
		const struct pulse_case *c = &pulse_cases[i];
		struct wave_source s = source("gaussian-pulse", NULL);
		double plus[2], cross[2];
		s.p[GP_WIDTH] = c->tau;
		s.p[GP_HRSS] = c->hrss;
		centre_and_later(&s, c->tau, plus, cross);
		near_rel(plus[0], c->peak, 1e-10);
		near_abs(plus[1], c->at_tau * exp(1 - pow(round(c->tau * 256000) / 256000 / c->tau, 2)),
		         1e-10 * c->peak);
		near_abs(cross[0], 0, 0);
	}
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(inspiral_phase_and_amplitude),
	    cmocka_unit_test(post_newtonian_coefficients),
	    cmocka_unit_test(bursts_in_time),
	    cmocka_unit_test(pulses_in_time),
	};
	return cmocka_run_group_tests(tests, NULL, NULL);
}
