/*
 * Populations: from which distribution each parameter of a family is drawn. Every parameter takes exactly one uniform
 * variate through the inverse of its cumulative distribution, so that a draw is a pure function of the sealed seed, and
 * its density can be evaluated again by an auditor.
 */
#ifndef QB_DRILL_POPULATION_H
#define QB_DRILL_POPULATION_H

#include <stdbool.h>
#include <stddef.h>

#include "server/base/yaml.h"

#define POPULATION_MAX     24 /* drawn parameters of one family */
#define POPULATION_KEY_MAX 48 /* bytes of a parameter's key, with its end */

enum dist_kind {
	DIST_FIXED,         /* one value: a bare number in the plan */
	DIST_UNIFORM,       /* {uniform: {from, to}} */
	DIST_LOG_UNIFORM,   /* {log-uniform: {from, to}}, p ~ 1/x */
	DIST_POWER_LAW,     /* {power-law: {index, from, to}}, p ~ x^index */
	DIST_INVERSE_POWER, /* {inverse-power: {index, from, to}}, p ~ x^-index */
	DIST_NORMAL,        /* {normal: {mean, sigma, from, to}}, cut to [from, to] */
	DIST_POLAR,         /* isotropic polar angle 0..pi, p ~ sin x (inclination) */
	DIST_LATITUDE,      /* isotropic latitude -pi/2..pi/2, p ~ cos x (declination) */
	DIST_KINDS
};

/* A bound: a number, or an earlier parameter of the same family (`to: primary_mass_msun`). */
struct dist_bound {
	double value;
	int parameter; /* index into the population, -1: value */
};

struct dist {
	enum dist_kind kind;
	double index;       /* of power-law and inverse-power, as written */
	double mean, sigma; /* of normal */
	struct dist_bound from, to;
};

struct population_parameter {
	char key[POPULATION_KEY_MAX]; /* with its unit suffix */
	struct dist dist;
	int line; /* in the plan file */
};

struct population {
	int n;
	struct population_parameter p[POPULATION_MAX];
};

/* Index of a key, or -1. */
int population_find(const struct population *pop, const char *key);

/*
 * One distribution of the plan file: a bare number or {kind: {...}}.
 *
 * Given:    node      the value in the plan
 *           earlier   parameters that a bound may name: those already in it
 * Errors:   QB_FORMAT unknown kind or bound, wrong type, missing key; QB_RANGE from >= to, sigma <= 0, from <= 0 for
 *           power laws, a value that is not finite
 */
enum qb_status dist_parse(const struct yaml_doc *doc, struct yaml_node *node, const struct population *earlier,
                          struct dist *out, struct qb_error *e) QB_MUST_USE;

/*
 * Value at cumulative probability u in (0,1), given the values of the earlier parameters. When a conditional bound
 * leaves nothing (from >= to), the value is the lower bound.
 */
double dist_sample(const struct dist *d, const double *earlier, double u);
/* Cumulative probability at x, 0..1. DIST_FIXED: a step. */
double dist_cdf(const struct dist *d, const double *earlier, double x);
/* Density at x (per unit of x), 0 outside. DIST_FIXED: 1 at its value, else 0 (a probability, not a density). */
double dist_density(const struct dist *d, const double *earlier, double x);
/* Smallest and largest value that the distribution can give, over all values of earlier parameters. */
void dist_extremes(const struct population *pop, const struct dist *d, double *least, double *largest);

/* Draws all parameters in order, u[i] for parameter i. */
void population_sample(const struct population *pop, const double *u, double *values);
/* Product of the densities of all parameters that are drawn (fixed ones left out): q(theta). */
double population_density(const struct population *pop, const double *values);

/* The words of the plan file for each kind ("power-law" ...), NULL for kinds that are never written. */
const char *dist_word(enum dist_kind kind);

#endif
