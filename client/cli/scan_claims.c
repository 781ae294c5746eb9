/*
 * From candidates to claims: when the signal passed Earth's centre, how heavy the pair was, and how sure that is. The
 * widths are meant honestly: a scan without sky position does not know the delay from Earth's centre, and a bank
 * without spins does not know the chirp mass better than its spacing and its own bias.
 */
#include <math.h>
#include <stdio.h>

#include "client/cli/scan.h"
#include "server/base/clock.h"
#include "server/base/json.h"
#include "server/wave/constants.h"

#define TIMING_S  0.004 /* RMS: templates that fit imperfectly are early or late by milliseconds */
#define NEAR_S    0.05  /* triggers of one signal in the bank's other templates */
#define MASS_BIAS 0.10  /* RMS of ln(chirp mass) from spins and mass ratios that the bank does not have */
#define FIT_SHARE 0.6   /* templates with this share of the largest SNR^2 take part in the fit */

/* Mean of the stations' arrivals, and the mean position whose delay is unknown. */
static double mean_arrival_s(const struct wave_network *network, const struct scan_list lists[],
                             const struct scan_candidate *c, double *reach_s)
{
	double sum = 0, mean[3] = {0};
	int members = 0;
	for (int i = 0; i < network->n_stations; i++) {
		if (c->trigger[i] == SCAN_NONE)
			continue;
		sum += lists[i].trigger[c->trigger[i]].t_s;
		for (int k = 0; k < 3; k++)
			mean[k] += network->stations[i].position_m[k];
		members++;
	}
	*reach_s = sqrt(mean[0] * mean[0] + mean[1] * mean[1] + mean[2] * mean[2]) / members / WAVE_C_M_PER_S;
	return sum / members;
}

/* Network SNR^2 of this signal in another template. */
static double square_in(const struct wave_network *network, const struct scan_list lists[],
                        const struct scan_candidate *c, int template)
{
	double sum = 0;
	for (int i = 0; i < network->n_stations; i++) {
		double best = 0;
		if (c->trigger[i] == SCAN_NONE)
			continue;
		double t = lists[i].trigger[c->trigger[i]].t_s;
		for (size_t k = 0; k < lists[i].n; k++) {
			const struct scan_trigger *x = &lists[i].trigger[k];
			if (x->template == template && fabs(x->t_s - t) <= NEAR_S)
				best = fmax(best, x->snr);
		}
		sum += best * best;
	}
	return sum;
}

static double log_mass(const struct scan_bank *bank, int i)
{
	return log(source_chirp_mass_msun(&bank->templates[i]));
}

/* Distance in ln(chirp mass) to the nearest other pair of the bank. */
static double spacing(const struct scan_bank *bank, int template)
{
	double least = INFINITY;
	for (int i = 0; i < bank->n; i++) {
		double d = fabs(log_mass(bank, i) - log_mass(bank, template));
		if (bank->templates[i].family == WAVE_COMPACT_BINARY && d > 1e-6)
			least = fmin(least, d);
	}
	return isfinite(least) ? least : 1;
}

/*
 * ln(chirp mass) and its standard deviation: the likelihood exp(rho^2 / 2) over the bank is a Gaussian where rho^2 is a
 * parabola. Without enough templates for a parabola it is the loudest template and the bank's spacing.
 */
static void estimate_mass(const struct wave_network *network, const struct scan_bank *bank,
                          const struct scan_list lists[], const struct scan_candidate *c, double *mean, double *sigma)
{
	double m[5] = {0}, v[3] = {0}, at = log_mass(bank, c->template), step = spacing(bank, c->template);
	double top = c->network_snr * c->network_snr;
	int n = 0;
	*mean = at;
	*sigma = step;
	for (int i = 0; i < bank->n; i++) {
		double y = bank->templates[i].family == WAVE_COMPACT_BINARY ? square_in(network, lists, c, i) : 0;
		if (y < FIT_SHARE * top)
			continue;
		double x = log_mass(bank, i) - at, p = 1;
		for (int k = 0; k < 5; k++, p *= x) {
			m[k] += p;
			if (k < 3)
				v[k] += p * y;
		}
		n++;
	}
	/* normal equations of y = a + b x + d x^2, by Cramer's rule */
	double det = m[0] * (m[2] * m[4] - m[3] * m[3]) - m[1] * (m[1] * m[4] - m[2] * m[3]) +
	             m[2] * (m[1] * m[3] - m[2] * m[2]);
	double b = m[0] * (v[1] * m[4] - v[2] * m[3]) - v[0] * (m[1] * m[4] - m[3] * m[2]) +
	           m[2] * (m[1] * v[2] - m[2] * v[1]);
	double d = m[0] * (m[2] * v[2] - m[3] * v[1]) - m[1] * (m[1] * v[2] - m[2] * v[1]) +
	           v[0] * (m[1] * m[3] - m[2] * m[2]);
	if (n >= 3 && fabs(det) > 1e-15 && d / det < 0 && fabs(-b / (2 * d)) < 2 * step) {
		*mean = at - b / (2 * d);
		*sigma = sqrt(-det / d + step * step / 12);
	}
	*sigma = sqrt(*sigma * *sigma + MASS_BIAS * MASS_BIAS);
}

static const double normal_quantile[5] = {-1.6448536269514722, -0.6744897501960817, 0, 0.6744897501960817,
                                          1.6448536269514722};
/* The delay -n.r/c is uniform for an isotropic sky. */
static const double uniform_quantile[5] = {-0.9, -0.5, 0, 0.5, 0.9};

static json_t *five(double middle, double width, const double *q, bool logs)
{
	json_t *list = json_array();
	for (int k = 0; k < 5; k++)
		json_array_append_new(list, json_real(logs ? exp(middle + width * q[k]) : middle + width * q[k]));
	return list;
}

static json_t *claim(const struct wave_network *network, const struct scan_bank *bank, const struct scan_list lists[],
                     const struct scan_candidate *c, const struct scan_claim_settings *settings, int64_t start_gps_ns,
                     int number)
{
	char id[100];
	double reach, mean, sigma, t = mean_arrival_s(network, lists, c, &reach) + settings->time_offset_s;
	const struct wave_source *s = &bank->templates[c->template];
	json_t *doc = json_object(), *stations = json_array(), *q = json_object();
	int64_t gps_ns = start_gps_ns + (int64_t)llround(t * 1e6) * 1000;
	(void)snprintf(id, sizeof id, "%.60s-%06d", settings->pipeline, number);
	json_object_set_new(doc, "claim_id", json_string(id));
	json_object_set_new(doc, "pipeline", json_string(settings->pipeline));
	json_object_set_new(doc, "arrival_gps", json_gps_new(gps_ns));
	json_object_set_new(doc, "arrival_gps_sigma_s", json_real(sqrt(reach * reach / 3 + TIMING_S * TIMING_S)));
	json_object_set_new(doc, "false_alarm_rate_per_year", json_real(c->far_per_year));
	json_object_set_new(doc, "ranking", json_real(c->network_snr));
	json_object_set_new(doc, "network_snr", json_real(c->network_snr));
	json_object_set_new(doc, "family", json_string(wave_family_info(s->family)->name));
	for (int i = 0; i < network->n_stations; i++) {
		if (c->trigger[i] != SCAN_NONE)
			json_array_append_new(stations, json_string(network->stations[i].name));
	}
	json_object_set_new(doc, "stations", stations);
	json_object_set_new(
	    q, "arrival_gps",
	    five((double)gps_ns / 1e9, sqrt(reach * reach + 3 * TIMING_S * TIMING_S), uniform_quantile, false));
	if (s->family == WAVE_COMPACT_BINARY) {
		estimate_mass(network, bank, lists, c, &mean, &sigma);
		json_object_set_new(q, "chirp_mass_msun", five(mean, sigma, normal_quantile, true));
	}
	json_object_set_new(doc, "quantiles_05_25_50_75_95", q);
	return doc;
}

json_t *scan_claims(const struct wave_network *network, const struct scan_bank *bank, const struct scan_list lists[],
                    const struct scan_result *result, const struct scan_claim_settings *settings, int64_t start_gps_ns)
{
	json_t *list = json_array();
	for (int k = 0; k < result->n; k++) {
		if (result->candidate[k].far_per_year <= settings->far_ceiling_per_year)
			json_array_append_new(list, claim(network, bank, lists, &result->candidate[k], settings,
			                                  start_gps_ns, (int)json_array_size(list) + 1));
	}
	return list;
}
