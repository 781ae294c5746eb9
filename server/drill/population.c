/* Distributions: reading, inverse cumulative sampling, densities. */
#include "server/drill/population.h"

#include <float.h>
#include <gsl/gsl_cdf.h>
#include <math.h>
#include <stdio.h>
#include <string.h>

#include "server/base/check.h"
#include "server/base/text.h"

#define LARGEST_INDEX 20.0

/* What each kind is called in a plan, and which numbers it takes. */
static const struct {
	const char *word;
	bool index, normal, positive;
} kinds[DIST_KINDS] = {
    [DIST_FIXED] = {NULL, false, false, false},
    [DIST_UNIFORM] = {"uniform", false, false, false},
    [DIST_LOG_UNIFORM] = {"log-uniform", false, false, true},
    [DIST_POWER_LAW] = {"power-law", true, false, true},
    [DIST_INVERSE_POWER] = {"inverse-power", true, false, true},
    [DIST_NORMAL] = {"normal", false, true, false},
    [DIST_POLAR] = {NULL, false, false, false},
    [DIST_LATITUDE] = {NULL, false, false, false},
};

const char *dist_word(enum dist_kind kind)
{
	CHECK(kind < DIST_KINDS);
	return kinds[kind].word;
}

int population_find(const struct population *pop, const char *key)
{
	for (int i = 0; i < pop->n; i++) {
		if (strcmp(pop->p[i].key, key) == 0)
			return i;
	}
	return -1;
}

static enum qb_status parse_bound(const struct yaml_doc *doc, struct yaml_node *map, const char *key,
                                  const struct population *earlier, struct dist_bound *out, struct qb_error *e)
{
	struct yaml_node *n;
	enum qb_status st = yaml_need(doc, map, key, &n, e);
	if (st != QB_OK)
		return st;
	out->parameter = -1;
	if (n->kind == YAML_SCALAR && !n->quoted && text_double(n->text, &out->value))
		return QB_OK;
	if (n->kind == YAML_SCALAR)
		out->parameter = population_find(earlier, n->text);
	if (out->parameter < 0)
		return yaml_refuse(doc, n, QB_FORMAT, "a number, or a parameter that stands above in the same family",
		                   e);
	return QB_OK;
}

static enum qb_status parse_numbers(const struct yaml_doc *doc, struct yaml_node *map, const struct population *earlier,
                                    struct dist *out, struct qb_error *e)
{
	struct yaml_node *n;
	enum qb_status st = yaml_is(doc, map, YAML_MAP, e);
	if (st == QB_OK && kinds[out->kind].index) {
		st = yaml_need(doc, map, "index", &n, e);
		if (st == QB_OK)
			st = yaml_double(doc, n, -LARGEST_INDEX, LARGEST_INDEX, &out->index, e);
	}
	if (st == QB_OK && kinds[out->kind].normal) {
		st = yaml_need(doc, map, "mean", &n, e);
		if (st == QB_OK)
			st = yaml_double(doc, n, -1e30, 1e30, &out->mean, e);
		if (st == QB_OK)
			st = yaml_need(doc, map, "sigma", &n, e);
		if (st == QB_OK)
			st = yaml_double(doc, n, DBL_MIN, 1e30, &out->sigma, e);
	}
	if (st == QB_OK)
		st = parse_bound(doc, map, "from", earlier, &out->from, e);
	if (st == QB_OK)
		st = parse_bound(doc, map, "to", earlier, &out->to, e);
	return st;
}

/* The rules that need only the written numbers; conditional bounds are looked at by plan_check. */
static enum qb_status check_bounds(const struct yaml_doc *doc, struct yaml_node *map, const struct dist *d,
                                   struct qb_error *e)
{
	if (kinds[d->kind].positive && d->from.parameter < 0 && d->from.value <= 0)
		return yaml_refuse(doc, yaml_find(map, "from"), QB_RANGE, "a number above 0 for this distribution", e);
	if (d->from.parameter < 0 && d->to.parameter < 0 && !(d->from.value < d->to.value))
		return yaml_refuse(doc, yaml_find(map, "to"), QB_RANGE, "a number above 'from'", e);
	return QB_OK;
}

enum qb_status dist_parse(const struct yaml_doc *doc, struct yaml_node *node, const struct population *earlier,
                          struct dist *out, struct qb_error *e)
{
	static const char accepted[] = "a number, or one of {uniform: {from, to}}, {log-uniform: {from, to}}, "
	                               "{power-law: {index, from, to}}, {inverse-power: {index, from, to}}, "
	                               "{normal: {mean, sigma, from, to}}";
	*out = (struct dist){.kind = DIST_FIXED, .from.parameter = -1, .to.parameter = -1};
	if (node->kind == YAML_SCALAR && !node->quoted && text_double(node->text, &out->from.value)) {
		out->to = out->from;
		return QB_OK;
	}
	if (node->kind != YAML_MAP || node->n_members != 1)
		return yaml_refuse(doc, node, QB_FORMAT, accepted, e);
	for (int k = 0; k < DIST_KINDS; k++) {
		if (kinds[k].word == NULL || strcmp(kinds[k].word, node->members[0]->key) != 0)
			continue;
		out->kind = (enum dist_kind)k;
		struct yaml_node *map = yaml_find(node, kinds[k].word);
		enum qb_status st = parse_numbers(doc, map, earlier, out, e);
		if (st == QB_OK)
			st = check_bounds(doc, map, out, e);
		return st;
	}
	return yaml_refuse(doc, node->members[0], QB_FORMAT, accepted, e);
}

static double bound(const struct dist_bound *b, const double *earlier)
{
	return b->parameter < 0 ? b->value : earlier[b->parameter];
}

/* The exponent of x in the density, for the three power laws. */
static double exponent(const struct dist *d)
{
	return d->kind == DIST_LOG_UNIFORM ? -1 : d->kind == DIST_INVERSE_POWER ? -d->index : d->index;
}

/* (r^k - 1) / k, and ln r at k = 0, without the cancellation near it. */
static double power_integral(double r, double k)
{
	double l = log(r);
	return fabs(k * l) < 1e-12 ? l : expm1(k * l) / k;
}

/* Power laws are taken relative to the lower bound a, so that no power of a itself can overflow. */
static double power_sample(double a, double b, double index, double u)
{
	double k = index + 1, part = u * power_integral(b / a, k);
	double l = fabs(k * log(b / a)) < 1e-12 ? part : log1p(k * part) / k;
	return a * exp(l);
}

/* Probability between z = lo and hi of a unit normal; counted from the tail that is nearer, where digits are left. */
static double normal_between(double lo, double hi)
{
	return lo > 0 ? gsl_cdf_ugaussian_Q(lo) - gsl_cdf_ugaussian_Q(hi)
	              : gsl_cdf_ugaussian_P(hi) - gsl_cdf_ugaussian_P(lo);
}

static double normal_sample(const struct dist *d, double a, double b, double u)
{
	double lo = (a - d->mean) / d->sigma, hi = (b - d->mean) / d->sigma;
	double z = lo > 0 ? gsl_cdf_ugaussian_Qinv(gsl_cdf_ugaussian_Q(lo) - u * normal_between(lo, hi))
	                  : gsl_cdf_ugaussian_Pinv(gsl_cdf_ugaussian_P(lo) + u * normal_between(lo, hi));
	return d->mean + d->sigma * z;
}

double dist_sample(const struct dist *d, const double *earlier, double u)
{
	if (d->kind == DIST_POLAR)
		return acos(1 - 2 * u);
	if (d->kind == DIST_LATITUDE)
		return asin(2 * u - 1);
	double a = bound(&d->from, earlier), b = bound(&d->to, earlier), x;
	if (d->kind == DIST_FIXED || !(a < b))
		return a;
	if (d->kind == DIST_UNIFORM)
		x = a + u * (b - a);
	else if (d->kind == DIST_NORMAL)
		x = normal_sample(d, a, b, u);
	else
		x = power_sample(a, b, exponent(d), u);
	return fmin(fmax(x, a), b);
}

double dist_cdf(const struct dist *d, const double *earlier, double x)
{
	if (d->kind == DIST_POLAR)
		return x <= 0 ? 0 : x >= M_PI ? 1 : (1 - cos(x)) / 2;
	if (d->kind == DIST_LATITUDE)
		return x <= -M_PI_2 ? 0 : x >= M_PI_2 ? 1 : (1 + sin(x)) / 2;
	double a = bound(&d->from, earlier), b = bound(&d->to, earlier);
	if (x < a)
		return 0;
	if (x >= b)
		return 1;
	if (d->kind == DIST_UNIFORM)
		return (x - a) / (b - a);
	if (d->kind == DIST_NORMAL) {
		double lo = (a - d->mean) / d->sigma;
		return normal_between(lo, (x - d->mean) / d->sigma) / normal_between(lo, (b - d->mean) / d->sigma);
	}
	double k = exponent(d) + 1;
	return power_integral(x / a, k) / power_integral(b / a, k);
}

double dist_density(const struct dist *d, const double *earlier, double x)
{
	if (d->kind == DIST_POLAR)
		return x < 0 || x > M_PI ? 0 : sin(x) / 2;
	if (d->kind == DIST_LATITUDE)
		return fabs(x) > M_PI_2 ? 0 : cos(x) / 2;
	double a = bound(&d->from, earlier), b = bound(&d->to, earlier);
	if (d->kind == DIST_FIXED)
		return x >= a && x <= a ? 1 : 0;
	if (!(a < b) || x < a || x > b)
		return 0;
	if (d->kind == DIST_UNIFORM)
		return 1 / (b - a);
	if (d->kind == DIST_NORMAL) {
		double z = (x - d->mean) / d->sigma;
		double whole = normal_between((a - d->mean) / d->sigma, (b - d->mean) / d->sigma);
		return exp(-z * z / 2) / (d->sigma * sqrt(2 * M_PI) * whole);
	}
	double k = exponent(d);
	return pow(x / a, k) / (a * power_integral(b / a, k + 1));
}

void dist_extremes(const struct population *pop, const struct dist *d, double *least, double *largest)
{
	double lo, hi;
	if (d->kind == DIST_POLAR || d->kind == DIST_LATITUDE) {
		*least = d->kind == DIST_POLAR ? 0 : -M_PI_2;
		*largest = d->kind == DIST_POLAR ? M_PI : M_PI_2;
		return;
	}
	*least = d->from.value;
	*largest = d->to.value;
	if (d->from.parameter >= 0) {
		dist_extremes(pop, &pop->p[d->from.parameter].dist, &lo, &hi);
		*least = lo;
	}
	if (d->to.parameter >= 0) {
		dist_extremes(pop, &pop->p[d->to.parameter].dist, &lo, &hi);
		*largest = hi;
	}
}

void population_sample(const struct population *pop, const double *u, double *values)
{
	for (int i = 0; i < pop->n; i++)
		values[i] = dist_sample(&pop->p[i].dist, values, u[i]);
}

double population_density(const struct population *pop, const double *values)
{
	double q = 1;
	for (int i = 0; i < pop->n; i++) {
		if (pop->p[i].dist.kind != DIST_FIXED)
			q *= dist_density(&pop->p[i].dist, values, values[i]);
	}
	return q;
}
