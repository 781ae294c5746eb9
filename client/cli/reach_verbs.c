/* The noun `reach`: horizon, range and sensitive volume of a network for a kind of source. */
#include <math.h>

#include "client/cli/cli.h"
#include "client/cli/wave_files.h"
#include "server/wave/reach.h"

#define SAMPLES       20000
#define MPC3_PER_GPC3 1e9

static json_t *reach_json(const struct wave_network *n, const struct reach *r, double threshold, double rate)
{
	json_t *doc = json_object(), *stations = json_object();
	for (int i = 0; i < n->n_stations; i++) {
		json_t *o = json_object();
		json_object_set_new(o, "horizon_mpc", json_real(r->horizon_mpc[i]));
		json_object_set_new(o, "range_mpc", json_real(r->range_mpc[i]));
		json_object_set_new(stations, n->stations[i].name, o);
	}
	json_object_set_new(doc, "threshold", json_real(threshold));
	json_object_set_new(doc, "volume_mpc3", json_real(r->volume_mpc3));
	json_object_set_new(doc, "volume_mpc3_standard_error", json_real(r->volume_mpc3_standard_error));
	json_object_set_new(doc, "samples", json_integer(r->samples));
	if (rate >= 0)
		json_object_set_new(doc, "expected_per_year", json_real(rate * r->volume_mpc3 / MPC3_PER_GPC3));
	json_object_set_new(doc, "stations", stations);
	return doc;
}

static void print_reach(struct cli_call *c, const struct wave_network *n, const struct reach *r, double threshold,
                        double rate)
{
	cli_print(c, "%-12s %14s %14s   (SNR %g in one station)\n", "station", "horizon (Mpc)", "range (Mpc)",
	          threshold);
	for (int i = 0; i < n->n_stations; i++)
		cli_print(c, "%-12s %14.5g %14.5g\n", n->stations[i].name, r->horizon_mpc[i], r->range_mpc[i]);
	cli_print(c, "network: %.4g +- %.2g Mpc^3 with a network SNR of %g or more (%ld orientations, no redshift)\n",
	          r->volume_mpc3, r->volume_mpc3_standard_error, threshold, r->samples);
	if (rate >= 0)
		cli_print(c, "at %g a year and cubic gigaparsec: %.4g a year\n", rate,
		          rate * r->volume_mpc3 / MPC3_PER_GPC3);
}

static enum qb_status run_reach(struct cli_call *c)
{
	struct wave_network *n = NULL;
	struct wave_source s;
	struct reach r;
	double threshold, rate;
	int64_t samples, seed;
	enum qb_status st = network_file_read(cli_option(c, "network"), &n, cli_error(c));
	if (st == QB_OK)
		st = source_file_read(cli_option(c, "source"), &s, cli_error(c));
	if (st == QB_OK)
		st = cli_option_double(c, "threshold", 8, &threshold);
	if (st == QB_OK)
		st = cli_option_double(c, "rate-per-gpc3-per-year", -1, &rate);
	if (st == QB_OK && cli_option(c, "rate-per-gpc3-per-year") != NULL && !(rate >= 0))
		st = qb_fail(cli_error(c), QB_USAGE, NULL, NULL, "--rate-per-gpc3-per-year is negative");
	if (st == QB_OK)
		st = cli_option_int(c, "samples", 100, 100000000, SAMPLES, &samples);
	if (st == QB_OK)
		st = cli_option_int(c, "seed", 0, INT64_MAX, 1, &seed);
	if (st == QB_OK)
		st = reach_of(n, &s, threshold, (long)samples, (uint64_t)seed, &r, cli_error(c));
	if (st == QB_OK && cli_wants_json(c)) {
		json_t *doc = reach_json(n, &r, threshold, rate);
		cli_json(c, doc);
		json_decref(doc);
	} else if (st == QB_OK) {
		print_reach(c, n, &r, threshold, rate);
	}
	wave_network_free(&n);
	return st;
}

static const struct cli_option options[] = {
    {"network", "FILE", true, "the network file (YAML)"},
    {"source", "FILE", true, "a compact binary; its sky position and distance don't matter"},
    {"threshold", "SNR", false, "what counts as found (default 8)"},
    {"rate-per-gpc3-per-year", "R", false, "mergers a year and cubic gigaparsec: prints the expected number a year"},
    {"samples", "N", false, "sky positions and orientations drawn (default 20000)"},
    {"seed", "K", false, "of the draws; the same seed gives the same result (default 1)"},
    {NULL, NULL, false, NULL}};

const struct cli_verb cli_reach_verbs[] = {
    {"reach", "", "", run_reach, options, "how far the network reaches: horizon, range, sensitive volume",
     "quietbell reach --network network.yaml --source source.yaml --threshold 8 --json"},
    {NULL, NULL, NULL, NULL, NULL, NULL, NULL}};
