/* Horizon, range and Monte Carlo volume. Every sample has a random stream of its own, so that threads don't matter. */
#include "server/wave/reach.h"

#include <math.h>

#include "server/base/text.h"
#include "server/wave/constants.h"
#include "server/wave/response.h"
#include "server/wave/snr.h"

#define HIGHEST_HZ 8192.0

static double uniform(uint64_t seed, uint64_t sample, uint64_t which)
{
	return uniform_from_u64(splitmix64(splitmix64(seed ^ splitmix64(sample)) + which));
}

/* w^2 of Finn & Chernoff: the share of the best SNR^2 at this sky position and orientation. */
static double orientation(const struct wave_station *s, const struct wave_earth *earth, double ra, double dec,
                          double psi, double cos_iota)
{
	struct wave_response r;
	double a = (1 + cos_iota * cos_iota) / 2;
	response_at(s, earth, ra, dec, psi, &r);
	return r.f_plus * r.f_plus * a * a + r.f_cross * r.f_cross * cos_iota * cos_iota;
}

enum qb_status reach_of(const struct wave_network *network, const struct wave_source *s, double threshold, long samples,
                        uint64_t seed, struct reach *out, struct qb_error *e)
{
	struct wave_earth earth;
	double best[WAVE_MAX_STATIONS], sum = 0, squares = 0;
	*out = (struct reach){.samples = samples};
	if (s->family != WAVE_COMPACT_BINARY)
		return qb_fail(e, QB_RANGE, "reach", "use a compact binary",
		               "a family without a distance has no horizon");
	if (!(threshold > 0) || samples < 100)
		return qb_fail(e, QB_RANGE, "reach", NULL, "the threshold must be positive and samples at least 100");
	for (int i = 0; i < network->n_stations; i++) {
		enum qb_status st = snr_best(&network->stations[i], s, HIGHEST_HZ, &best[i], e);
		if (st != QB_OK)
			return st;
		best[i] *= s->p[CB_DISTANCE]; /* SNR at 1 Mpc */
		out->horizon_mpc[i] = best[i] / threshold;
		out->range_mpc[i] = out->horizon_mpc[i] / WAVE_RANGE_FACTOR;
	}
	earth_at(s->arrival_gps_ns, 0, WAVE_SIMPLE, &earth);
	for (long k = 0; k < samples; k++) {
		uint64_t id = (uint64_t)k;
		double ra = 2 * WAVE_PI * uniform(seed, id, 0), dec = asin(2 * uniform(seed, id, 1) - 1);
		double psi = WAVE_PI * uniform(seed, id, 2), c = 2 * uniform(seed, id, 3) - 1, square = 0;
		for (int i = 0; i < network->n_stations; i++)
			square += best[i] * best[i] * orientation(&network->stations[i], &earth, ra, dec, psi, c);
		double d = sqrt(square) / threshold, v = 4 * WAVE_PI / 3 * d * d * d;
		sum += v;
		squares += v * v;
	}
	double n = (double)samples, mean = sum / n;
	out->volume_mpc3 = mean;
	out->volume_mpc3_standard_error = sqrt(fmax(0, squares / n - mean * mean) / n);
	return QB_OK;
}
