/*
 * The noun `wave`: local calculators that show what a source does at every station, and write its strain, its drive or
 * its spectrum. No service is needed.
 */
#include <math.h>
#include <string.h>

#include "client/cli/cli.h"
#include "client/cli/npy.h"
#include "client/cli/wave_files.h"
#include "server/base/alloc.h"
#include "server/base/clock.h"
#include "server/base/text.h"
#include "server/wave/actuation.h"
#include "server/wave/render.h"
#include "server/wave/response.h"
#include "server/wave/snr.h"
#include "server/wave/spectrum.h"

#define RATE_HZ         16384.0
#define SAMPLES_MAX     ((size_t)1 << 26)
#define FREQUENCIES_MAX 100000

/* What every verb starts from. */
struct job {
	struct wave_network *network; /* NULL for `spectrum` */
	struct wave_source source;
	double rate_hz;
};

static enum qb_status job_open(struct cli_call *c, struct job *j)
{
	const char *network = cli_option(c, "network");
	*j = (struct job){0};
	enum qb_status st = source_file_read(cli_option(c, "source"), &j->source, cli_error(c));
	if (st == QB_OK && network != NULL)
		st = network_file_read(network, &j->network, cli_error(c));
	if (st == QB_OK)
		st = cli_option_double(c, "rate-hz", RATE_HZ, &j->rate_hz);
	if (st == QB_OK && !(j->rate_hz >= 64 && j->rate_hz <= 262144))
		st = qb_fail(cli_error(c), QB_USAGE, NULL, NULL, "--rate-hz is %g; accepted: 64 to 262144", j->rate_hz);
	return st;
}

static enum qb_status the_station(struct cli_call *c, const struct job *j, const struct wave_station **out)
{
	const char *name = cli_option(c, "station");
	int i = name != NULL ? network_station(j->network, name) : 0;
	if (name == NULL)
		return qb_fail(cli_error(c), QB_USAGE, NULL, "see --help", "--station NAME is needed");
	if (i < 0)
		return qb_fail(cli_error(c), QB_RANGE, cli_option(c, "network"), NULL, "there is no station '%.60s'",
		               name);
	*out = &j->network->stations[i];
	return QB_OK;
}

/* ---- grids of samples ---- */

struct window {
	int64_t start_gps_ns;
	double rate_hz;
	size_t n;
};

/* Whole GPS seconds around the signal, unless --start and --seconds say otherwise. */
static enum qb_status find_window(struct cli_call *c, int64_t arrival_gps_ns, double before_s, double after_s,
                                  double rate_hz, struct window *w)
{
	double seconds;
	int64_t from = arrival_gps_ns - (int64_t)ceil(before_s * 1e9);
	from -= from % NS_PER_S;
	enum qb_status st = cli_option_gps(c, "start", from, &w->start_gps_ns);
	double otherwise = ceil((double)(arrival_gps_ns - w->start_gps_ns) / 1e9 + after_s);
	if (st == QB_OK)
		st = cli_option_double(c, "seconds", fmax(otherwise, 1), &seconds);
	if (st != QB_OK)
		return st;
	w->rate_hz = rate_hz;
	if (!(seconds > 0 && seconds * rate_hz < (double)SAMPLES_MAX))
		return qb_fail(cli_error(c), QB_RANGE, NULL, "give --start and --seconds, or a lower --rate-hz",
		               "%g s at %g Hz are too many samples", seconds, rate_hz);
	w->n = (size_t)llround(seconds * rate_hz);
	return QB_OK;
}

/* ---- show ---- */

static enum qb_status show_station(struct cli_call *c, const struct job *j, int i, double snr, json_t *stations)
{
	const struct wave_station *s = &j->network->stations[i];
	struct wave_earth earth;
	struct wave_response r;
	struct window w = {.rate_hz = j->rate_hz};
	double before, after, peak = 0, sum = 0;
	int64_t arrival = wave_arrival_gps_ns(s, &j->source);
	earth_at(j->source.arrival_gps_ns, 0, WAVE_PRECISE, &earth);
	response_at(s, &earth, j->source.right_ascension_rad, j->source.declination_rad, j->source.polarization_rad,
	            &r);
	wave_extent(&j->source, &before, &after);
	w.start_gps_ns = arrival - (int64_t)(before * 1e9);
	w.n = (size_t)ceil(fmin((before + after) * j->rate_hz, (double)SAMPLES_MAX)) + 2;
	double *h = QB_NEW_ARRAY(double, w.n);
	enum qb_status st = render_strain(s, &j->source, j->rate_hz, w.start_gps_ns, w.n, true, h, cli_error(c));
	for (size_t k = 0; st == QB_OK && k < w.n; k++) {
		peak = fmax(peak, fabs(h[k]));
		sum += h[k] * h[k];
	}
	qb_free(h);
	if (st != QB_OK)
		return st;
	json_t *o = json_object();
	json_object_set_new(o, "snr", json_real(snr));
	json_object_set_new(o, "f_plus", json_real(r.f_plus));
	json_object_set_new(o, "f_cross", json_real(r.f_cross));
	json_object_set_new(o, "arrival_gps", json_gps_new(arrival));
	json_object_set_new(o, "delay_s", json_real(r.delay_s));
	json_object_set_new(o, "peak_strain", json_real(peak));
	json_object_set_new(o, "hrss_per_sqrt_hz", json_real(sqrt(sum / j->rate_hz)));
	json_object_set_new(stations, s->name, o);
	return QB_OK;
}

static void print_show(struct cli_call *c, const struct job *j, const json_t *doc)
{
	const char *name;
	json_t *o;
	char utc[40], gps[32];
	const char *model = source_model_word(&j->source);
	cli_print(c, "%s%s%s, network SNR %.2f", wave_family_info(j->source.family)->name, *model != '\0' ? " " : "",
	          model, json_number_value(json_object_get(doc, "network_snr")));
	if (j->source.family == WAVE_COMPACT_BINARY)
		cli_print(c, ", chirp mass %.4g solar masses", source_chirp_mass_msun(&j->source));
	cli_print(c, "\narrives at Earth's centre %s (GPS %s)\n",
	          clock_utc_text(j->source.arrival_gps_ns, utc, sizeof utc),
	          clock_gps_text(j->source.arrival_gps_ns, gps, sizeof gps));
	cli_print(c, "%-12s %8s %8s %8s %12s %12s %22s\n", "station", "SNR", "F plus", "F cross", "delay (ms)",
	          "peak strain", "arrival (GPS)");
	json_object_foreach(json_object_get(doc, "stations"), name, o)
	{
		cli_print(c, "%-12s %8.2f %8.4f %8.4f %12.4f %12.3e %22s\n", name,
		          json_number_value(json_object_get(o, "snr")), json_number_value(json_object_get(o, "f_plus")),
		          json_number_value(json_object_get(o, "f_cross")),
		          1e3 * json_number_value(json_object_get(o, "delay_s")),
		          json_number_value(json_object_get(o, "peak_strain")),
		          json_string_value(json_object_get(o, "arrival_gps")));
	}
}

static enum qb_status run_show(struct cli_call *c)
{
	struct job j;
	double snr[WAVE_MAX_STATIONS], total = 0;
	json_t *doc = json_object(), *stations = json_object();
	enum qb_status st = job_open(c, &j);
	if (st == QB_OK)
		st = snr_network(j.network, &j.source, j.rate_hz / 2, snr, &total, cli_error(c));
	for (int i = 0; st == QB_OK && i < j.network->n_stations; i++)
		st = show_station(c, &j, i, snr[i], stations);
	if (st == QB_OK) {
		json_object_set_new(doc, "family", json_string(wave_family_info(j.source.family)->name));
		if (j.source.model != WAVE_NO_MODEL)
			json_object_set_new(doc, "model", json_string(source_model_word(&j.source)));
		json_object_set_new(doc, "network_snr", json_real(total));
		if (j.source.family == WAVE_COMPACT_BINARY) {
			json_object_set_new(doc, "chirp_mass_msun", json_real(source_chirp_mass_msun(&j.source)));
			json_object_set_new(doc, "effective_spin", json_real(source_effective_spin(&j.source)));
		}
		json_object_set(doc, "stations", stations);
		if (cli_wants_json(c))
			cli_json(c, doc);
		else
			print_show(c, &j, doc);
	}
	json_decref(stations);
	json_decref(doc);
	wave_network_free(&j.network);
	return st;
}

/* ---- render ---- */

static enum qb_status write_array(struct cli_call *c, const char *path, const double *const rows[], size_t n_rows,
                                  const struct window *w, const char *unit, const char *station)
{
	struct npy_out *out = NULL;
	const struct npy_side side = {w->start_gps_ns, w->rate_hz, unit, station};
	enum qb_status st = npy_create(path, n_rows > 1 ? n_rows : 0, w->n, &out, cli_error(c));
	for (size_t i = 0; st == QB_OK && i < n_rows; i++)
		st = npy_put(out, rows[i], w->n, cli_error(c));
	if (st == QB_OK)
		st = npy_close(&out, cli_error(c));
	npy_abandon(&out);
	if (st == QB_OK)
		st = npy_side_write(path, &side, cli_error(c));
	return st;
}

static void say_written(struct cli_call *c, const char *path, const struct window *w, const char *unit)
{
	char gps[32];
	json_t *doc = json_object();
	json_object_set_new(doc, "file", json_string(path));
	json_object_set_new(doc, "start_gps", json_gps_new(w->start_gps_ns));
	json_object_set_new(doc, "rate_hz", json_real(w->rate_hz));
	json_object_set_new(doc, "samples", json_integer((json_int_t)w->n));
	json_object_set_new(doc, "unit", json_string(unit));
	if (cli_wants_json(c))
		cli_json(c, doc);
	else
		cli_print(c, "%s: %zu samples at %g Hz from GPS %s, %s\n", path, w->n, w->rate_hz,
		          clock_gps_text(w->start_gps_ns, gps, sizeof gps), unit);
	json_decref(doc);
}

static enum qb_status run_render(struct cli_call *c)
{
	struct job j;
	struct window w;
	const struct wave_station *s = NULL;
	const char *path = cli_option(c, "out");
	bool both = cli_option(c, "polarizations") != NULL;
	double before, after, *h = NULL, *cross = NULL;
	enum qb_status st = job_open(c, &j);
	if (st == QB_OK && !both)
		st = the_station(c, &j, &s);
	if (st != QB_OK)
		goto out;
	wave_extent(&j.source, &before, &after);
	int64_t arrival = both ? j.source.arrival_gps_ns : wave_arrival_gps_ns(s, &j.source);
	if ((st = find_window(c, arrival, before, after, j.rate_hz, &w)) != QB_OK)
		goto out;
	h = QB_NEW_ARRAY(double, w.n);
	if (both) {
		cross = QB_NEW_ARRAY(double, w.n);
		st = render_polarizations(&j.source, w.rate_hz, w.start_gps_ns, w.n, h, cross, cli_error(c));
	} else {
		st = render_strain(s, &j.source, w.rate_hz, w.start_gps_ns, w.n, true, h, cli_error(c));
	}
	if (st == QB_OK)
		st = write_array(c, path, (const double *const[]){h, cross}, both ? 2 : 1, &w, "strain",
		                 both ? NULL : s->name);
	if (st == QB_OK)
		say_written(c, path, &w, "strain");
out:
	qb_free(h);
	qb_free(cross);
	wave_network_free(&j.network);
	return st;
}

/* ---- drive ---- */

/* "495-515,995-1030" */
static enum qb_status read_bands(struct cli_call *c, struct actuator_limits *limits)
{
	const char *text = cli_option(c, "excluded-bands-hz");
	char *copy = text != NULL ? qb_strdup(text) : NULL, *rest = copy, *one;
	enum qb_status st = QB_OK;
	while (st == QB_OK && copy != NULL && (one = strsep(&rest, ",")) != NULL) {
		char *dash = strchr(one, '-');
		double *b = limits->excluded_bands_hz[limits->n_bands];
		if (dash != NULL)
			*dash = '\0';
		if (limits->n_bands == ACTUATOR_MAX_BANDS || dash == NULL || !text_double(one, &b[0]) ||
		    !text_double(dash + 1, &b[1]) || !(b[0] >= 0 && b[1] > b[0]))
			st = qb_fail(cli_error(c), QB_USAGE, NULL, "write for example 495-515,995-1030",
			             "--excluded-bands-hz is '%.60s'", text);
		limits->n_bands++;
	}
	qb_free(copy);
	return st;
}

static json_t *report_json(const struct actuator_report *r)
{
	json_t *doc = json_object(), *list = json_array();
	json_object_set_new(doc, "peak_counts", json_real(r->peak_counts));
	json_object_set_new(doc, "rms_counts", json_real(r->rms_counts));
	json_object_set_new(doc, "slew_counts_per_s", json_real(r->slew_counts_per_s));
	json_object_set_new(doc, "quantisation_ratio", json_real(r->quantisation_ratio));
	for (int i = 0; i < r->n; i++) {
		const struct actuator_limit *l = &r->limit[i];
		json_t *o = json_object();
		json_object_set_new(o, "name", json_string(l->name));
		json_object_set_new(o, "value", json_real(l->value));
		json_object_set_new(o, "limit", json_real(l->limit));
		json_object_set_new(o, "unit", json_string(l->unit));
		json_object_set_new(o, "margin", isfinite(l->margin) ? json_real(l->margin) : json_null());
		json_object_set_new(o, "within", json_boolean(l->within));
		json_array_append_new(list, o);
	}
	json_object_set_new(doc, "limits", list);
	json_object_set_new(doc, "within", json_boolean(r->within));
	return doc;
}

static void print_report(struct cli_call *c, const struct wave_station *s, const struct actuator_report *r)
{
	cli_print(c, "drive of %s (%s): peak %.4g counts, RMS %.4g counts, slew %.4g counts/s\n", s->name,
	          s->actuator.calibration_id, r->peak_counts, r->rms_counts, r->slew_counts_per_s);
	for (int i = 0; i < r->n; i++) {
		const struct actuator_limit *l = &r->limit[i];
		cli_print(c, "  %-20s %12.4g of %12.4g %-10s %s\n", l->name, l->value, l->limit, l->unit,
		          l->within ? "within" : "BEYOND THE LIMIT");
	}
	cli_print(c, "  rounding noise is %.2g of the drive's RMS\n", r->quantisation_ratio);
}

static enum qb_status make_drive(struct cli_call *c, const struct job *j, const struct wave_station *s,
                                 struct window *w, double **counts)
{
	double before, after, rate;
	*counts = NULL;
	if (!s->actuator.present)
		return qb_fail(cli_error(c), QB_RANGE, s->name, "describe it in the network file",
		               "the station has no actuator");
	enum qb_status st = cli_option_double(c, "rate-hz", s->actuator.rate_hz, &rate);
	if (st == QB_OK && !(s->actuator.band_hz[3] < 0.45 * rate))
		st = qb_fail(cli_error(c), QB_RANGE, s->name, NULL, "--rate-hz %g is too low for the band up to %g Hz",
		             rate, s->actuator.band_hz[3]);
	wave_drive_extent(s, &j->source, &before, &after);
	if (st == QB_OK)
		st = find_window(c, wave_arrival_gps_ns(s, &j->source), before, after, rate, w);
	if (st != QB_OK)
		return st;
	*counts = QB_NEW_ARRAY(double, w->n);
	return render_drive(s, &j->source, rate, w->start_gps_ns, w->n, *counts, cli_error(c));
}

static enum qb_status run_drive(struct cli_call *c)
{
	struct job j;
	struct window w = {0};
	struct actuator_limits limits = {0};
	struct actuator_report report;
	const struct wave_station *s = NULL;
	const char *path = cli_option(c, "out");
	double *counts = NULL;
	enum qb_status st = job_open(c, &j);
	if (st == QB_OK)
		st = the_station(c, &j, &s);
	if (st == QB_OK)
		st = cli_option_double(c, "largest-drive", 0.8, &limits.largest_drive);
	if (st == QB_OK && !(limits.largest_drive > 0 && limits.largest_drive <= 1))
		st = qb_fail(cli_error(c), QB_USAGE, NULL, NULL, "--largest-drive is %g; accepted: above 0, to 1",
		             limits.largest_drive);
	if (st == QB_OK)
		st = read_bands(c, &limits);
	if (st == QB_OK)
		st = make_drive(c, &j, s, &w, &counts);
	if (st != QB_OK)
		goto out;
	actuator_check(&s->actuator, &limits, w.rate_hz, counts, w.n, &report);
	/* a drive beyond its limits is nothing to keep */
	if (path != NULL && report.within)
		st = write_array(c, path, (const double *const[]){counts}, 1, &w, "counts", s->name);
	if (st == QB_OK && cli_wants_json(c)) {
		json_t *doc = report_json(&report);
		json_object_set_new(doc, "station", json_string(s->name));
		json_object_set_new(doc, "calibration_id", json_string(s->actuator.calibration_id));
		json_object_set_new(doc, "start_gps", json_gps_new(w.start_gps_ns));
		json_object_set_new(doc, "rate_hz", json_real(w.rate_hz));
		json_object_set_new(doc, "samples", json_integer((json_int_t)w.n));
		cli_json(c, doc);
		json_decref(doc);
	} else if (st == QB_OK) {
		print_report(c, s, &report);
	}
	if (st == QB_OK && !report.within)
		st = qb_fail(cli_error(c), QB_NO, s->name, "make the source weaker", "the drive is beyond a limit%s",
		             path != NULL ? " and was not written" : "");
out:
	qb_free(counts);
	wave_network_free(&j.network);
	return st;
}

/* ---- spectrum ---- */

static enum qb_status read_frequencies(struct cli_call *c, double **f, size_t *n)
{
	const char *text = cli_option(c, "frequencies-hz");
	char *copy = qb_strdup(text), *rest = copy, *one;
	size_t most = 1;
	enum qb_status st = QB_OK;
	for (const char *p = text; *p != '\0'; p++)
		most += *p == ',';
	*n = 0;
	*f = NULL;
	if (most > FREQUENCIES_MAX)
		st = qb_fail(cli_error(c), QB_USAGE, NULL, NULL, "more than %d frequencies", FREQUENCIES_MAX);
	else
		*f = QB_NEW_ARRAY(double, most);
	while (st == QB_OK && (one = strsep(&rest, ",")) != NULL) {
		if (!text_double(one, &(*f)[*n]) || !((*f)[*n] >= 0 && (*f)[*n] <= 1e6))
			st = qb_fail(cli_error(c), QB_USAGE, NULL, "write for example 20,50,100",
			             "--frequencies-hz holds '%.40s'", one);
		++*n;
	}
	qb_free(copy);
	return st;
}

static json_t *complex_list(const double complex *z, size_t n)
{
	json_t *list = json_array();
	for (size_t i = 0; i < n; i++)
		json_array_append_new(list, json_pack("[f,f]", creal(z[i]), cimag(z[i])));
	return list;
}

static enum qb_status run_spectrum(struct cli_call *c)
{
	struct job j;
	double *f = NULL;
	double complex *plus = NULL, *cross = NULL;
	size_t n = 0;
	enum qb_status st = job_open(c, &j);
	if (st == QB_OK)
		st = read_frequencies(c, &f, &n);
	if (st == QB_OK) {
		plus = QB_NEW_ARRAY(double complex, n);
		cross = QB_NEW_ARRAY(double complex, n);
		st = spectrum_at(&j.source, f, n, false, plus, cross, cli_error(c));
	}
	if (st == QB_OK && cli_wants_json(c)) {
		json_t *doc = json_object(), *list = json_array();
		for (size_t i = 0; i < n; i++)
			json_array_append_new(list, json_real(f[i]));
		json_object_set_new(doc, "frequencies_hz", list);
		json_object_set_new(doc, "plus", complex_list(plus, n));
		json_object_set_new(doc, "cross", complex_list(cross, n));
		cli_json(c, doc);
		json_decref(doc);
	} else if (st == QB_OK) {
		cli_print(c, "%12s %26s %26s   (1/Hz, t = 0 at the arrival)\n", "Hz", "plus", "cross");
		for (size_t i = 0; i < n; i++)
			cli_print(c, "%12g %+.5e %+.5ei %+.5e %+.5ei\n", f[i], creal(plus[i]), cimag(plus[i]),
			          creal(cross[i]), cimag(cross[i]));
	}
	qb_free(f);
	qb_free(plus);
	qb_free(cross);
	wave_network_free(&j.network);
	return st;
}

/* ---- tables ---- */

#define SOURCE                                                                                                         \
	{                                                                                                              \
		"source", "FILE", true, "the source file (YAML)"                                                       \
	}
#define NETWORK                                                                                                        \
	{                                                                                                              \
		"network", "FILE", true, "the network file (YAML)"                                                     \
	}
#define STATION                                                                                                        \
	{                                                                                                              \
		"station", "NAME", false, "the station"                                                                \
	}
#define GRID                                                                                                           \
	{"start", "GPS", false, "first sample (default: a whole second before the signal)"},                           \
	{                                                                                                              \
		"seconds", "S", false, "length (default: the whole signal)"                                            \
	}
#define END                                                                                                            \
	{                                                                                                              \
		NULL, NULL, false, NULL                                                                                \
	}

static const struct cli_option show_options[] = {
    SOURCE, NETWORK, {"rate-hz", "HZ", false, "sampling rate; SNRs count up to half of it (default 16384)"}, END};
static const struct cli_option render_options[] = {
    SOURCE,
    NETWORK,
    STATION,
    {"polarizations", NULL, false, "h-plus and h-cross at Earth's centre instead of a station's strain"},
    {"rate-hz", "HZ", false, "sampling rate (default 16384)"},
    {"out", "FILE", true, "the .npy file; a .json side-car is written beside it"},
    GRID,
    END};
static const struct cli_option drive_options[] = {
    SOURCE,
    NETWORK,
    STATION,
    {"rate-hz", "HZ", false, "sampling rate (default: the actuator's)"},
    {"largest-drive", "SHARE", false, "largest peak as a share of the converter's range (default 0.8)"},
    {"excluded-bands-hz", "BANDS", false, "bands to stay out of, for example 495-515,995-1030"},
    {"out", "FILE", false, "write the counts (.npy and side-car) when they are within every limit"},
    GRID,
    END};
static const struct cli_option spectrum_options[] = {
    SOURCE, {"frequencies-hz", "LIST", true, "frequencies, comma-separated"}, END};

const struct cli_verb cli_wave_verbs[] = {
    {"wave", "show", "", run_show, show_options, "what a source does at every station: SNR, response, arrival, peak",
     "quietbell wave show --source source.yaml --network network.yaml --json"},
    {"wave", "render", "", run_render, render_options, "writes the strain at a station as samples",
     "quietbell wave render --source source.yaml --network network.yaml --station tarn --out h.npy"},
    {"wave", "drive", "", run_drive, drive_options,
     "the counts that make a station's actuator play a source, held to its limits",
     "quietbell wave drive --source source.yaml --network network.yaml --station tarn"},
    {"wave", "spectrum", "", run_spectrum, spectrum_options, "polarisations at Earth's centre in the frequency domain",
     "quietbell wave spectrum --source source.yaml --frequencies-hz 20,50,100 --json"},
    {NULL, NULL, NULL, NULL, NULL, NULL, NULL}};
