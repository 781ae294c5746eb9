/* Distributions against closed forms written out here: Kolmogorov-Smirnov distance, moments, densities, bad files. */
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "server/base/text.h"
#include "server/drill/population.h"
#include "tests/near.h"

#define N 4000

/* Parses "key: value" lines as one family's parameters. */
static enum qb_status parse(const char *text, struct population *pop, struct qb_error *e)
{
	struct yaml_doc *doc;
	*pop = (struct population){0};
	enum qb_status st = yaml_parse(text, strlen(text), "p.yaml", &doc, e);
	for (int i = 0; st == QB_OK && i < doc->root->n_members; i++) {
		struct yaml_node *m = doc->root->members[i];
		(void)snprintf(pop->p[i].key, sizeof pop->p[i].key, "%s", m->key);
		m->used = true;
		st = dist_parse(doc, m, pop, &pop->p[i].dist, e);
		if (st == QB_OK)
			pop->n++;
	}
	if (st == QB_OK)
		st = yaml_all_used(doc, doc->root, e);
	yaml_doc_free(&doc);
	return st;
}

static struct dist one(const char *text)
{
	struct population pop;
	struct qb_error e = {0};
	char line[900];
	(void)snprintf(line, sizeof line, "x: %s\n", text);
	if (parse(line, &pop, &e) != QB_OK)
		print_error("%s: %s\n", text, qb_error_line(&e, line, sizeof line));
	assert_int_equal(pop.n, 1);
	return pop.p[0].dist;
}

static double normal_cdf(double z)
{
	return erfc(-z / sqrt(2)) / 2;
}
static double uniform_cdf(double x)
{
	return (x - 2) / 5;
}
static double log_uniform_cdf(double x)
{
	return log(x / 2) / log(50);
}
static double salpeter_cdf(double x)
{
	return (pow(5, -1.35) - pow(x, -1.35)) / (pow(5, -1.35) - pow(50, -1.35));
}
static double snr_cdf(double x)
{
	return (pow(4, -3) - pow(x, -3)) / (pow(4, -3) - pow(40, -3));
}
static double rising_cdf(double x)
{
	return (x * x * x - 1) / (1e6 - 1);
}
static double cut_normal_cdf(double x)
{
	double a = normal_cdf(-4.5), b = normal_cdf(4.5);
	return (normal_cdf(x / 0.2) - a) / (b - a);
}
static double tail_cdf(double x)
{
	double q = erfc(6 / sqrt(2)) / 2;
	return 1 - erfc(x / sqrt(2)) / 2 / q;
}
static double polar_cdf(double x)
{
	return (1 - cos(x)) / 2;
}
static double latitude_cdf(double x)
{
	return (1 + sin(x)) / 2;
}

static int ascending(const void *a, const void *b)
{
	double x = *(const double *)a, y = *(const double *)b;
	return x < y ? -1 : x > y;
}

/* Kolmogorov-Smirnov distance of N samples from the closed form; 1.95 / sqrt(N) is passed by 0.1 % of honest draws. */
static void follows(const struct dist *d, double (*cdf)(double))
{
	static double x[N];
	double worst = 0;
	for (int i = 0; i < N; i++)
		x[i] = dist_sample(d, NULL, uniform_from_u64(splitmix64((uint64_t)i + 77)));
	qsort(x, N, sizeof x[0], ascending);
	for (int i = 0; i < N; i++) {
		double f = cdf(x[i]);
		worst = fmax(worst, fmax((i + 1.0) / N - f, f - i / (double)N));
	}
	near_abs(worst, 0, 1.95 / sqrt(N));
	for (int i = 1; i < 200; i++) {
		double u = i / 200.0, at = dist_sample(d, NULL, u);
		near_abs(cdf(at), u, 1e-9);
		near_abs(dist_cdf(d, NULL, at), u, 1e-9);
	}
}

static void samples_follow_closed_forms(void **state)
{
	(void)state;
	const struct {
		const char *text;
		double (*cdf)(double);
	} cases[] = {
	    {"{uniform: {from: 2, to: 7}}", uniform_cdf},
	    {"{log-uniform: {from: 2, to: 100}}", log_uniform_cdf},
	    {"{power-law: {index: -1, from: 2, to: 100}}", log_uniform_cdf},
	    {"{power-law: {index: -2.35, from: 5, to: 50}}", salpeter_cdf},
	    {"{inverse-power: {index: 4, from: 4, to: 40}}", snr_cdf},
	    {"{power-law: {index: 2, from: 1, to: 100}}", rising_cdf},
	    {"{normal: {mean: 0, sigma: 0.2, from: -0.9, to: 0.9}}", cut_normal_cdf},
	    {"{normal: {mean: 0, sigma: 1, from: 6, to: 40}}", tail_cdf},
	};
	for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
		struct dist d = one(cases[i].text);
		follows(&d, cases[i].cdf);
	}
	follows(&(struct dist){.kind = DIST_POLAR}, polar_cdf);
	follows(&(struct dist){.kind = DIST_LATITUDE}, latitude_cdf);
}

/* The mean over equal steps of probability is the mean of the distribution. */
static double mean_of(const struct dist *d)
{
	double sum = 0;
	for (int i = 0; i < 200000; i++)
		sum += dist_sample(d, NULL, (i + 0.5) / 200000);
	return sum / 200000;
}

static void moments(void **state)
{
	(void)state;
	struct dist d = one("{power-law: {index: -2.35, from: 5, to: 50}}");
	double whole = (pow(50, -1.35) - pow(5, -1.35)) / -1.35;
	near_rel(mean_of(&d), (pow(50, -0.35) - pow(5, -0.35)) / -0.35 / whole, 1e-6);
	d = one("{inverse-power: {index: 4, from: 8, to: 1.0e6}}");
	near_rel(mean_of(&d), 12.0, 1e-3);                       /* p ~ x^-4 from a: mean 3a/2 */
	near_rel(dist_sample(&d, NULL, 0.5), 8 * cbrt(2), 1e-9); /* median 2^(1/3) x 8 = 10.1: signals.md, facts */
	d = one("{log-uniform: {from: 1, to: 10}}");
	near_rel(mean_of(&d), 9 / log(10), 1e-8);
	d = (struct dist){.kind = DIST_POLAR};
	near_rel(mean_of(&d), M_PI / 2, 1e-9);
	d = one("{normal: {mean: 3, sigma: 2, from: 3, to: 1000}}"); /* half a normal: mean + sigma sqrt(2/pi) */
	near_rel(mean_of(&d), 3 + 2 * sqrt(2 / M_PI), 1e-4);
}

static void density_is_the_slope_of_the_cdf(void **state)
{
	(void)state;
	static const char *const texts[] = {
	    "{uniform: {from: 2, to: 7}}",
	    "{log-uniform: {from: 2, to: 100}}",
	    "{power-law: {index: -2.35, from: 5, to: 50}}",
	    "{power-law: {index: -1.0000000001, from: 5, to: 50}}",
	    "{inverse-power: {index: 4, from: 4, to: 40}}",
	    "{inverse-power: {index: 3, from: 1.0e-23, to: 1.0e-20}}",
	    "{normal: {mean: 10, sigma: 2, from: 5, to: 30}}",
	};
	for (size_t i = 0; i < sizeof texts / sizeof texts[0]; i++) {
		struct dist d = one(texts[i]);
		for (int j = 1; j < 20; j++) {
			double x = dist_sample(&d, NULL, j / 20.0), h = 1e-5 * x;
			double slope = (dist_cdf(&d, NULL, x + h) - dist_cdf(&d, NULL, x - h)) / (2 * h);
			near_rel(dist_density(&d, NULL, x), slope, 1e-5);
		}
		near_abs(dist_density(&d, NULL, d.to.value * 1.01), 0, 0);
		near_abs(dist_density(&d, NULL, d.from.value * 0.99), 0, 0);
	}
}

static void conditional_bounds(void **state)
{
	(void)state;
	struct population pop;
	struct qb_error e = {0};
	assert_int_equal(parse("primary_mass_msun: {power-law: {index: -2.35, from: 5, to: 50}}\n"
	                       "secondary_mass_msun: {uniform: {from: 5, to: primary_mass_msun}}\n"
	                       "primary_spin: 0.25\n",
	                       &pop, &e),
	                 QB_OK);
	double values[3], least, largest;
	for (int i = 0; i < 500; i++) {
		double u[3] = {uniform_from_u64(splitmix64((uint64_t)i)),
		               uniform_from_u64(splitmix64((uint64_t)i + 9999)), 0.5};
		population_sample(&pop, u, values);
		assert_true(values[1] >= 5 && values[1] <= values[0] && values[0] <= 50);
		near_rel(values[1], 5 + u[1] * (values[0] - 5), 1e-14);
		near_abs(values[2], 0.25, 0);
		/* Joint density: Salpeter times 1 / (m1 - 5); the fixed spin adds no factor. */
		double p = 1.35 / (pow(5, -1.35) - pow(50, -1.35)) * pow(values[0], -2.35) / (values[0] - 5);
		near_rel(population_density(&pop, values), p, 1e-10);
	}
	dist_extremes(&pop, &pop.p[1].dist, &least, &largest);
	near_abs(least, 5, 0);
	near_abs(largest, 50, 0);
	values[0] = 5; /* nothing is left: the lower bound */
	near_abs(dist_sample(&pop.p[1].dist, values, 0.7), 5, 0);
}

static void refuses(const char *text, enum qb_status want, const char *word)
{
	struct population pop;
	struct qb_error e = {0};
	char line[900];
	assert_int_equal(parse(text, &pop, &e), want);
	qb_error_line(&e, line, sizeof line);
	if (strstr(line, word) == NULL || strstr(line, "p.yaml:") == NULL)
		fail_msg("'%s' does not name '%s'", line, word);
}

static void bad_distributions(void **state)
{
	(void)state;
	refuses("x: {triangle: {from: 1, to: 2}}", QB_FORMAT, "triangle");
	refuses("x: {uniform: {from: 1, to: 2}, normal: {}}", QB_FORMAT, "accepted");
	refuses("x: five", QB_FORMAT, "five");
	refuses("x: '5'", QB_FORMAT, "5");
	refuses("x: [1, 2]", QB_FORMAT, "list");
	refuses("x: {uniform: {from: 1}}", QB_FORMAT, "'to' is missing");
	refuses("x: {uniform: {from: 2, to: 1}}", QB_RANGE, "above 'from'");
	refuses("x: {uniform: {from: 1, to: 2, step: 3}}", QB_FORMAT, "step");
	refuses("x: {uniform: {from: 1, to: y}}", QB_FORMAT, "stands above");
	refuses("x: {uniform: {from: 1, to: x}}", QB_FORMAT, "stands above");
	refuses("x: {power-law: {from: 1, to: 2}}", QB_FORMAT, "'index' is missing");
	refuses("x: {power-law: {index: -2, from: 0, to: 2}}", QB_RANGE, "above 0");
	refuses("x: {power-law: {index: 200, from: 1, to: 2}}", QB_RANGE, "200");
	refuses("x: {normal: {mean: 0, sigma: 0, from: 0, to: 1}}", QB_RANGE, "sigma");
	refuses("x: {normal: {mean: 0, sigma: -1, from: 0, to: 1}}", QB_RANGE, "sigma");
	refuses("x: {normal: 3}", QB_FORMAT, "map");
	refuses("x: .nan", QB_FORMAT, "nan");
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(samples_follow_closed_forms),
	    cmocka_unit_test(moments),
	    cmocka_unit_test(density_is_the_slope_of_the_cdf),
	    cmocka_unit_test(conditional_bounds),
	    cmocka_unit_test(bad_distributions),
	};
	return cmocka_run_group_tests_name("drill/population", tests, NULL, NULL);
}
