/* The truth record's JSON, strict both ways, and its comparison with one derived again. */
#include "server/drill/truth.h"

#include <inttypes.h>
#include <math.h>
#include <stdio.h>
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/clock.h"
#include "server/base/secret.h"
#include "server/base/text.h"
#include "server/drill/signal.h"

#define WHAT "truth record"

static json_t *duration_new(int64_t ns)
{
	char t[32];
	return json_string(clock_gps_text(ns, t, sizeof t));
}

static json_t *parameters_new(const struct wave_source *s)
{
	json_t *j = json_object();
	for (int i = 0; i < signal_parameter_count(s); i++)
		json_object_set_new(j, signal_parameter_key(s, i), json_real(signal_parameter_value(s, i)));
	return j;
}

static json_t *station_new(const struct truth_station *s)
{
	json_t *j = json_object(), *hashes = json_array();
	json_object_set_new(j, "station", json_string(s->name));
	json_object_set_new(j, "snr", json_real(s->snr));
	json_object_set_new(j, "peak_strain", json_real(s->peak_strain));
	json_object_set_new(j, "peak_drive_counts", json_real(s->peak_drive_counts));
	json_object_set_new(j, "drive_from_gps", json_gps_new(s->drive_from_ns));
	json_object_set_new(j, "drive_to_gps", json_gps_new(s->drive_to_ns));
	for (int i = 0; i < TRUTH_PLACES; i++)
		json_array_append_new(hashes, json_hex_new(s->recipe_hash[i], 64));
	json_object_set_new(j, "recipe_hashes", hashes);
	return j;
}

enum qb_status truth_check(const struct drill_truth *t, struct qb_error *e)
{
	if (t->slot < 0 || t->slot_ns <= 0 || t->slot_start_ns < 0 || t->redraws < 0)
		return qb_fail(e, QB_RANGE, WHAT, NULL, "has a negative slot, time or count");
	if (!text_is_name(t->name))
		return qb_fail(e, QB_RANGE, WHAT, NULL, "has no valid family name");
	if (t->n_stations < 1 || t->n_stations > TRUTH_MAX_STATIONS)
		return qb_fail(e, QB_RANGE, WHAT, NULL, "has %d stations, accepted: 1 to %d", t->n_stations,
		               TRUTH_MAX_STATIONS);
	if (t->live ? !(t->gain >= 1 && t->gain <= 1) : !(t->gain >= 0 && t->gain <= 0))
		return qb_fail(e, QB_RANGE, WHAT, NULL, "has the gain %g; live is 1, null is 0", t->gain);
	if (!isfinite(t->network_snr) || t->network_snr < 0 || !isfinite(t->redshift) || t->redshift < 0 ||
	    !isfinite(t->weight_mpc3) || t->weight_mpc3 < 0)
		return qb_fail(e, QB_RANGE, WHAT, NULL,
		               "has an SNR, redshift or weight that is negative or not finite");
	for (int i = 0; i < t->n_stations; i++) {
		const struct truth_station *s = &t->station[i];
		if (!text_is_name(s->name))
			return qb_fail(e, QB_RANGE, WHAT, NULL, "has a station without a valid name");
		if (!isfinite(s->snr) || s->snr < 0 || !isfinite(s->peak_strain) || s->peak_strain < 0 ||
		    !isfinite(s->peak_drive_counts) || s->peak_drive_counts < 0)
			return qb_fail(e, QB_RANGE, WHAT, NULL, "has a number of station '%s' that is not finite",
			               s->name);
		if (s->drive_from_ns < t->slot_start_ns || s->drive_to_ns < s->drive_from_ns ||
		    s->drive_to_ns > t->slot_start_ns + t->slot_ns)
			return qb_fail(e, QB_RANGE, WHAT, NULL, "has a drive of station '%s' outside its slot",
			               s->name);
	}
	return source_check(&t->source, WHAT, e);
}

enum qb_status truth_encode(const struct drill_truth *t, struct buf *out, struct qb_error *e)
{
	enum qb_status st = truth_check(t, e);
	if (st != QB_OK)
		return st;
	const struct wave_source *s = &t->source;
	json_t *j = json_object(), *stations = json_array();
	json_object_set_new(j, "version", json_integer(TRUTH_VERSION));
	json_object_set_new(j, "conventions", json_integer(TRUTH_CONVENTIONS));
	json_object_set_new(j, "slot", json_integer(t->slot));
	json_object_set_new(j, "slot_start_gps", json_gps_new(t->slot_start_ns));
	json_object_set_new(j, "slot_s", duration_new(t->slot_ns));
	json_object_set_new(j, "assignment", json_string(t->live ? "live" : "null"));
	json_object_set_new(j, "gain", json_real(t->gain));
	json_object_set_new(j, "name", json_string(t->name));
	json_object_set_new(j, "family", json_string(signal_family_name(s)));
	json_object_set_new(j, "model", json_string(source_model_word(s)));
	json_object_set_new(j, "parameters", parameters_new(s));
	json_object_set_new(j, "right_ascension_rad", json_real(s->right_ascension_rad));
	json_object_set_new(j, "declination_rad", json_real(s->declination_rad));
	json_object_set_new(j, "polarization_rad", json_real(s->polarization_rad));
	json_object_set_new(j, "lowest_frequency_hz", json_real(s->lowest_frequency_hz));
	json_object_set_new(j, "arrival_gps", json_gps_new(s->arrival_gps_ns));
	json_object_set_new(j, "frame", json_string(t->source_frame ? "source" : "station"));
	json_object_set_new(j, "redshift", json_real(t->redshift));
	json_object_set_new(j, "redraws", json_integer(t->redraws));
	json_object_set_new(j, "network_snr", json_real(t->network_snr));
	json_object_set_new(j, "weight_mpc3", t->has_weight ? json_real(t->weight_mpc3) : json_null());
	for (int i = 0; i < t->n_stations; i++)
		json_array_append_new(stations, station_new(&t->station[i]));
	json_object_set_new(j, "stations", stations);
	char *text = json_text(j);
	size_t n = strlen(text);
	json_decref(j);
	if (n > TRUTH_BYTES)
		st = qb_fail(e, QB_RANGE, WHAT, NULL, "takes %zu bytes, at most %d are allowed", n, TRUTH_BYTES);
	else
		buf_put(out, text, n);
	wipe(text, n);
	qb_free(text);
	return st;
}
