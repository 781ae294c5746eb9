/* The noun `scan`: the plain matched-filter search of rehearsals, from strain to a claims file. */
#include <math.h>
#include <string.h>

#include "client/cli/cli.h"
#include "client/cli/npy.h"
#include "client/cli/scan.h"
#include "client/cli/wave_files.h"
#include "server/base/alloc.h"
#include "server/base/clock.h"
#include "server/base/text.h"

struct job {
	struct wave_network *network;
	struct scan_bank bank;
	struct scan_settings settings;
	struct scan_claim_settings claims;
	struct scan_list lists[WAVE_MAX_STATIONS];
	struct scan_result result;
	int64_t start_gps_ns;
	double rate_hz;
	size_t n;
};

static enum qb_status positive(struct cli_call *c, const char *name, double least, double most, double otherwise,
                               double *out)
{
	enum qb_status st = cli_option_double(c, name, otherwise, out);
	if (st == QB_OK && !(*out >= least && *out <= most))
		st = qb_fail(cli_error(c), QB_USAGE, NULL, NULL, "--%s is %g; accepted: %g to %g", name, *out, least,
		             most);
	return st;
}

static enum qb_status read_options(struct cli_call *c, struct job *j)
{
	struct scan_settings *s = &j->settings;
	int64_t shifts = 0, threads = 0;
	*s = scan_defaults;
	j->claims.pipeline = cli_option(c, "pipeline");
	if (!text_is_name(j->claims.pipeline))
		return qb_fail(cli_error(c), QB_USAGE, NULL, NULL, "--pipeline '%.60s' is not a name",
		               j->claims.pipeline);
	enum qb_status st = positive(c, "threshold", 3, 1000, s->threshold, &s->threshold);
	if (st == QB_OK)
		st = positive(c, "network-threshold", 3, 1000, s->network_threshold, &s->network_threshold);
	if (st == QB_OK)
		st = positive(c, "rate-hz", 256, 65536, s->rate_hz, &s->rate_hz);
	if (st == QB_OK)
		st = positive(c, "far-ceiling", 0, 1e12, 1000, &j->claims.far_ceiling_per_year);
	if (st == QB_OK)
		st = positive(c, "time-offset-s", -10, 10, 0, &j->claims.time_offset_s);
	if (st == QB_OK)
		st = cli_option_int(c, "shifts", 20, 10000000, s->shifts, &shifts);
	if (st == QB_OK)
		st = cli_option_int(c, "threads", 1, 16, s->threads, &threads);
	s->shifts = (int)shifts;
	s->threads = (int)threads;
	s->design_noise = cli_option(c, "design-noise") != NULL;
	return st;
}

static enum qb_status read_bank(struct cli_call *c, struct scan_bank *out)
{
	struct buf b = {0};
	const char *path = cli_option(c, "bank");
	enum qb_status st = text_file_read(path, &b, cli_error(c));
	if (st == QB_OK)
		st = scan_bank_parse((const char *)b.data, b.len, path, out, cli_error(c));
	buf_free(&b);
	return st;
}

/* One station's strain, which has to lie on the same grid as the first one's. */
static enum qb_status scan_file(struct cli_call *c, struct job *j, int i)
{
	const struct wave_station *station = &j->network->stations[i];
	char *path = text_printf("%s/%s.npy", cli_option(c, "strain"), station->name);
	struct npy_side side = {.unit = "strain"};
	struct npy_in in = {0};
	enum qb_status st = npy_side_read(path, &side, cli_error(c));
	if (st == QB_OK)
		st = npy_map(path, &in, cli_error(c));
	if (st == QB_OK && i == 0) {
		j->start_gps_ns = side.start_gps_ns;
		j->rate_hz = side.rate_hz;
		j->n = in.n;
	} else if (st == QB_OK &&
	           (side.start_gps_ns != j->start_gps_ns || side.rate_hz != j->rate_hz || in.n != j->n)) {
		st = qb_fail(cli_error(c), QB_FORMAT, path, NULL,
		             "start, rate or length differ from the first station's");
	}
	if (st == QB_OK)
		st = scan_station(station, &j->bank, &j->settings, in.values, in.n, side.rate_hz, &j->lists[i],
		                  cli_error(c));
	npy_unmap(&in);
	qb_free(path);
	return st;
}

static enum qb_status write_claims(struct cli_call *c, const json_t *list)
{
	struct buf b = {0};
	size_t i;
	json_t *one;
	json_array_foreach((json_t *)list, i, one)
	{
		char *text = json_text(one);
		buf_text(&b, text);
		buf_text(&b, "\n");
		qb_free(text);
	}
	enum qb_status st =
	    file_write(cli_option(c, "out"), 0644, b.data != NULL ? (const void *)b.data : "", b.len, cli_error(c));
	buf_free(&b);
	return st;
}

static void report(struct cli_call *c, const struct job *j, const json_t *list)
{
	size_t i, triggers = 0;
	json_t *one;
	for (int k = 0; k < j->network->n_stations; k++)
		triggers += j->lists[k].n;
	if (cli_wants_json(c)) {
		json_t *doc = json_object();
		json_object_set_new(doc, "triggers", json_integer((json_int_t)triggers));
		json_object_set_new(doc, "candidates", json_integer(j->result.n));
		json_object_set_new(doc, "background_s", json_real(j->result.background_s));
		json_object_set_new(doc, "background_events", json_integer((json_int_t)j->result.background_events));
		json_object_set(doc, "claims", (json_t *)list);
		cli_json(c, doc);
		json_decref(doc);
		return;
	}
	cli_print(c, "%zu triggers, %d candidates, %.3g days of shifted background; %zu claims in %s\n", triggers,
	          j->result.n, j->result.background_s / 86400, json_array_size(list), cli_option(c, "out"));
	json_array_foreach((json_t *)list, i, one)
	{
		cli_print(c, "  %-16s GPS %-20s SNR %6.2f  %10.3g a year  %s\n",
		          json_string_value(json_object_get(one, "claim_id")),
		          json_string_value(json_object_get(one, "arrival_gps")),
		          json_number_value(json_object_get(one, "network_snr")),
		          json_number_value(json_object_get(one, "false_alarm_rate_per_year")),
		          json_string_value(json_object_get(one, "family")));
	}
}

static enum qb_status run_scan(struct cli_call *c)
{
	struct job *j = QB_NEW(struct job);
	enum qb_status st = read_options(c, j);
	if (st == QB_OK)
		st = network_file_read(cli_option(c, "network"), &j->network, cli_error(c));
	if (st == QB_OK)
		st = read_bank(c, &j->bank);
	if (st == QB_OK && j->network->n_stations < 2)
		st = qb_fail(cli_error(c), QB_RANGE, j->network->name, NULL, "a coincidence needs two stations");
	for (int i = 0; st == QB_OK && i < j->network->n_stations; i++) {
		cli_progress(c, "stations", (uint64_t)i, (uint64_t)j->network->n_stations);
		st = scan_file(c, j, i);
	}
	if (st == QB_OK) {
		cli_progress(c, "stations", (uint64_t)j->network->n_stations, (uint64_t)j->network->n_stations);
		scan_coincide(j->network, &j->settings, j->lists, (double)j->n / j->rate_hz, &j->result);
		json_t *list = scan_claims(j->network, &j->bank, j->lists, &j->result, &j->claims, j->start_gps_ns);
		st = write_claims(c, list);
		if (st == QB_OK)
			report(c, j, list);
		json_decref(list);
	}
	for (int i = 0; i < WAVE_MAX_STATIONS; i++)
		qb_free(j->lists[i].trigger);
	scan_result_free(&j->result);
	scan_bank_free(&j->bank);
	wave_network_free(&j->network);
	qb_free(j);
	return st;
}

static const struct cli_option options[] = {
    {"network", "FILE", true, "the network file (YAML)"},
    {"strain", "DIR", true, "DIR/STATION.npy and side-cars, as `rig run` writes them"},
    {"bank", "FILE", true, "a list of sources without sky and distance (YAML)"},
    {"pipeline", "NAME", true, "whose claims these are"},
    {"out", "FILE", true, "the claims, one JSON document a line"},
    {"threshold", "SNR", false, "of one station (default 5.5)"},
    {"network-threshold", "SNR", false, "of the network (default 7.5)"},
    {"rate-hz", "HZ", false, "rate of the search; a whole part of the strain's (default 2048)"},
    {"far-ceiling", "N", false, "claim nothing with a higher false-alarm rate a year (default 1000)"},
    {"shifts", "N", false, "time shifts for the background (default 20000)"},
    {"design-noise", NULL, false, "take the noise from the network file, not from the data"},
    {"time-offset-s", "X", false, "added to every arrival: a pipeline whose clock is wrong, for rehearsals"},
    {"threads", "N", false, "the result does not depend on it (default 2)"},
    {NULL, NULL, false, NULL}};

const struct cli_verb cli_scan_verbs[] = {
    {"scan", "run", "", run_scan, options, "searches strain with matched filters and writes claims",
     "quietbell scan run --network network.yaml --strain strain --bank bank.yaml --pipeline amber --out claims.jsonl"},
    {NULL, NULL, NULL, NULL, NULL, NULL, NULL}};
