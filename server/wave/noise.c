/* Noise curves. Ref: Sathyaprakash & Schutz 2009 (Living Rev. Relativity 12, 2, Table 1), Ajith 2011 (PRD 84 084037),
 * Mishra et al. 2010 (PRD 82 064010), all from memory. */
#include "server/wave/noise.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/text.h"

#define TABLE_MAX 1000000

static const struct {
	const char *word;
	double lowest_hz, f0, s0;
} curves[WAVE_CURVES] = {
    [WAVE_ADVANCED_BROADBAND_B] = {"advanced-broadband-b", 10, 245.4, 1e-48},
    [WAVE_ADVANCED_BROADBAND] = {"advanced-broadband", 20, 215, 1.0e-49},
    [WAVE_THIRD_GENERATION] = {"third-generation", 10, 200, 1.5e-52},
    [WAVE_THIRD_GENERATION_B] = {"third-generation-b", 1, 100, 1e-50},
};

double noise_curve_psd(enum wave_curve curve, double f)
{
	if (!(f >= curves[curve].lowest_hz))
		return INFINITY;
	double x = f / curves[curve].f0, x2 = x * x, s = 0;
	switch (curve) {
	case WAVE_ADVANCED_BROADBAND_B:
		s = 0.0152 / (x2 * x2) + 0.2935 * pow(x, 2.25) + 2.7951 * pow(x, 1.5) - 6.5080 * pow(x, 0.75) + 17.7622;
		break;
	case WAVE_ADVANCED_BROADBAND:
		s = pow(x, -4.14) - 5 / x2 + 111 * (1 - x2 + 0.5 * x2 * x2) / (1 + 0.5 * x2);
		break;
	case WAVE_THIRD_GENERATION:
		s = pow(x, -4.1) + 186 * pow(x, -0.69) +
		    233 * (1 + x * (31 + x * (-65 + x * (52 + x * (-42 + x * (10 + x * 12)))))) /
		        (1 + x * (14 + x * (-37 + x * (19 + x * 27))));
		break;
	default:
		s = 2.39e-27 * pow(x, -15.64) + 0.349 * pow(x, -2.145) + 1.76 * pow(x, -0.12) + 0.409 * pow(x, 1.10);
		s *= s;
	}
	return s * curves[curve].s0;
}

double noise_curve_lowest_hz(enum wave_curve curve)
{
	return curves[curve].lowest_hz;
}

const char *noise_curve_word(enum wave_curve curve)
{
	return curve < WAVE_CURVES ? curves[curve].word : "table";
}

bool noise_curve_find(const char *word, enum wave_curve *out)
{
	for (int i = 0; i < WAVE_CURVES; i++) {
		if (strcmp(curves[i].word, word) == 0) {
			*out = (enum wave_curve)i;
			return true;
		}
	}
	return false;
}

double noise_psd(const struct wave_noise *noise, double f)
{
	if (noise->curve != WAVE_CURVE_TABLE)
		return noise_curve_psd(noise->curve, f);
	double l = log(f);
	if (!(f > 0) || l < noise->log_f[0] || l > noise->log_f[noise->n - 1])
		return INFINITY;
	size_t lo = 0, hi = noise->n - 1;
	while (hi - lo > 1) {
		size_t mid = (lo + hi) / 2;
		if (noise->log_f[mid] <= l)
			lo = mid;
		else
			hi = mid;
	}
	double t = (l - noise->log_f[lo]) / (noise->log_f[hi] - noise->log_f[lo]);
	return exp(noise->log_s[lo] + t * (noise->log_s[hi] - noise->log_s[lo]));
}

void noise_free(struct wave_noise *noise)
{
	qb_free(noise->log_f);
	qb_free(noise->log_s);
	noise->log_f = noise->log_s = NULL;
	noise->n = 0;
}

/* One line of a table; false when it is malformed. *empty for blank lines and comments. */
static bool table_line(const char *line, size_t len, double *f, double *a, bool *empty)
{
	char copy[128], one[64], two[64], rest[2];
	size_t n = 0;
	while (n < len && line[n] != '#' && line[n] != '\n')
		n++;
	*empty = strspn(line, " \t\r") >= n;
	if (*empty)
		return true;
	if (n >= sizeof copy)
		return false;
	memcpy(copy, line, n);
	copy[n] = '\0';
	return sscanf(copy, " %63[^ \t\r,]%*[ \t,]%63[^ \t\r,] %1s", one, two, rest) == 2 && text_double(one, f) &&
	       text_double(two, a);
}

enum qb_status noise_table_parse(const char *text, const char *file, struct wave_noise *out, struct qb_error *e)
{
	size_t cap = 0;
	int number = 1;
	enum qb_status st = QB_OK;
	*out = (struct wave_noise){.curve = WAVE_CURVE_TABLE};
	for (const char *p = text; st == QB_OK && *p != '\0'; number++) {
		size_t len = strcspn(p, "\n");
		double f = 0, a = 0;
		bool empty;
		char where[240];
		(void)snprintf(where, sizeof where, "%s:%d", file, number);
		if (!table_line(p, len, &f, &a, &empty))
			st = qb_fail(e, QB_FORMAT, where,
			             "write frequency in Hz and amplitude spectral density in 1/sqrt(Hz)",
			             "is not two numbers");
		else if (!empty && (!(f > 0) || !(a > 0)))
			st = qb_fail(e, QB_FORMAT, where, NULL, "both numbers must be positive");
		else if (!empty && out->n > 0 && log(f) <= out->log_f[out->n - 1])
			st = qb_fail(e, QB_FORMAT, where, "sort the table by frequency",
			             "the frequency is not above the one before");
		else if (!empty) {
			if (out->n == cap) {
				cap = cap > 0 ? 2 * cap : 256;
				out->log_f = qb_realloc(out->log_f, cap, sizeof(double));
				out->log_s = qb_realloc(out->log_s, cap, sizeof(double));
			}
			out->log_f[out->n] = log(f);
			out->log_s[out->n++] = 2 * log(a);
		}
		p += len + (p[len] == '\n');
	}
	if (st == QB_OK && (out->n < 2 || out->n > TABLE_MAX))
		st = qb_fail(e, QB_FORMAT, file, NULL, "needs at least two lines of numbers");
	if (st != QB_OK)
		noise_free(out);
	return st;
}
