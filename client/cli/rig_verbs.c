/* The noun `rig`: the simulated instrument of rehearsals. */
#include <errno.h>
#include <string.h>
#include <sys/stat.h>

#include "client/cli/cli.h"
#include "client/cli/rig.h"
#include "client/cli/wave_files.h"
#include "server/base/alloc.h"
#include "server/base/text.h"

static enum qb_status read_run(struct cli_call *c, struct rig_run *run)
{
	int64_t seed;
	*run = (struct rig_run){.noise = cli_option(c, "without-noise") == NULL};
	enum qb_status st = cli_option_gps(c, "start", 0, &run->start_gps_ns);
	if (st == QB_OK)
		st = cli_option_double(c, "seconds", 0, &run->seconds);
	if (st == QB_OK)
		st = cli_option_double(c, "rate-hz", 4096, &run->rate_hz);
	if (st == QB_OK)
		st = cli_option_int(c, "seed", 0, INT64_MAX, 1, &seed);
	if (st == QB_OK)
		run->seed = (uint64_t)seed;
	return st;
}

static enum qb_status one_station(struct cli_call *c, const struct wave_station *s, const struct rig_run *run,
                                  json_t *list)
{
	const char *drive = cli_option(c, "drive"), *out = cli_option(c, "out");
	char *from = drive != NULL ? text_printf("%s/%s", drive, s->name) : NULL;
	char *to = text_printf("%s/%s.npy", out, s->name);
	int slots = 0;
	enum qb_status st = rig_station(s, run, from, to, &slots, cli_error(c));
	if (st == QB_OK) {
		json_t *o = json_object();
		json_object_set_new(o, "station", json_string(s->name));
		json_object_set_new(o, "file", json_string(to));
		json_object_set_new(o, "drives", json_integer(slots));
		json_array_append_new(list, o);
		if (!cli_wants_json(c))
			cli_print(c, "%s: %g s at %g Hz, drives that were not silent: %d\n", to, run->seconds,
			          run->rate_hz, slots);
	}
	qb_free(from);
	qb_free(to);
	return st;
}

static enum qb_status run_rig(struct cli_call *c)
{
	struct wave_network *n = NULL;
	struct rig_run run;
	struct stat info;
	const char *drive = cli_option(c, "drive"), *out = cli_option(c, "out");
	json_t *list = json_array();
	enum qb_status st = read_run(c, &run);
	if (st == QB_OK)
		st = network_file_read(cli_option(c, "network"), &n, cli_error(c));
	if (st == QB_OK && drive != NULL && (stat(drive, &info) != 0 || !S_ISDIR(info.st_mode)))
		st = qb_fail(cli_error(c), QB_IO, drive, "give the directory that holds one directory a station",
		             "is not a directory");
	if (st == QB_OK && mkdir(out, 0755) != 0 && errno != EEXIST)
		st = qb_fail(cli_error(c), QB_IO, out, NULL, "can't be made: %s", strerror(errno));
	for (int i = 0; st == QB_OK && i < n->n_stations; i++) {
		cli_progress(c, "stations", (uint64_t)i, (uint64_t)n->n_stations);
		st = one_station(c, &n->stations[i], &run, list);
	}
	if (st == QB_OK)
		cli_progress(c, "stations", (uint64_t)n->n_stations, (uint64_t)n->n_stations);
	if (st == QB_OK && cli_wants_json(c))
		cli_json(c, list);
	json_decref(list);
	wave_network_free(&n);
	return st;
}

static const struct cli_option options[] = {
    {"network", "FILE", true, "the network file (YAML)"},
    {"start", "GPS", true, "first sample"},
    {"seconds", "S", true, "length"},
    {"rate-hz", "HZ", false, "sampling rate of the recording (default 4096)"},
    {"drive", "DIR", false, "drives: DIR/STATION/slot-NNNNNN.npy, as quietbell-driver writes them"},
    {"seed", "K", false, "of the noise; the same seed writes the same bytes (default 1)"},
    {"without-noise", NULL, false, "only what the drives do"},
    {"out", "DIR", true, "writes DIR/STATION.npy and side-cars"},
    {NULL, NULL, false, NULL}};

const struct cli_verb cli_rig_verbs[] = {
    {"rig", "run", "", run_rig, options, "simulates the instruments: noise, and what the drives do to them",
     "quietbell rig run --network network.yaml --start 1456789012 --seconds 64 --drive drives --seed 1 --out strain"},
    {NULL, NULL, NULL, NULL, NULL, NULL, NULL}};
