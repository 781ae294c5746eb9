/* From a recipe to counts; see drive.h. */
#include "client/agent/drive.h"

#include <inttypes.h>
#include <math.h>
#include <string.h>

#include "client/agent/play.h"
#include "server/base/alloc.h"
#include "server/base/check.h"
#include "server/base/clock.h"
#include "server/base/secret.h"
#include "server/wave/actuation.h"
#include "server/wave/render.h"

#define SAMPLES_MAX (INT64_C(1) << 26)
#define MARGIN_MAX  1e9 /* a finite number for a drive that is as good as silent */

enum qb_status drive_check_recipe(const struct drill_recipe *recipe, const uint8_t campaign[static 16],
                                  const struct drill_plan *plan, int64_t slot, int station, struct qb_error *e)
{
	const struct wave_station *s = &plan->network->stations[station];
	if (memcmp(recipe->campaign, campaign, 16) != 0)
		return qb_fail(e, QB_CRYPTO, "recipe", NULL, "is another campaign's");
	if (recipe->slot != slot || recipe->slot_start_ns != slots_start(&plan->slots, slot) ||
	    recipe->slot_ns != plan->slots.slot_ns)
		return qb_fail(e, QB_CRYPTO, "recipe", NULL, "is another slot's");
	if (strcmp(recipe->station, s->name) != 0)
		return qb_fail(e, QB_CRYPTO, "recipe", NULL, "is another station's");
	if (recipe->rate_hz != s->actuator.rate_hz)
		return qb_fail(e, QB_CRYPTO, "recipe", NULL, "has another rate than the station's actuator");
	return QB_OK;
}

static enum qb_status check_actuator(const struct drill_recipe *r, const struct wave_actuator *a, struct qb_error *e)
{
	if (!a->present)
		return qb_fail(e, QB_REFUSED, "actuator", NULL, "the network gives none for this station");
	if (a->valid_to_gps_ns > a->valid_from_gps_ns &&
	    (r->slot_start_ns < a->valid_from_gps_ns || r->slot_start_ns + r->slot_ns > a->valid_to_gps_ns))
		return qb_fail(e, QB_REFUSED, "actuator", "renew the calibration",
		               "its calibration is not valid at the time of the slot");
	return QB_OK;
}

static enum qb_status check_limits(const struct wave_actuator *a, const struct drill_plan *plan, const double *counts,
                                   size_t n, double rate_hz, double *margin, struct qb_error *e)
{
	struct actuator_limits limits = {.largest_drive = plan->largest_drive};
	struct actuator_report report;
	CHECK(plan->n_excluded_bands <= ACTUATOR_MAX_BANDS);
	limits.n_bands = plan->n_excluded_bands;
	memcpy(limits.excluded_bands_hz, plan->excluded_bands_hz,
	       (size_t)limits.n_bands * sizeof limits.excluded_bands_hz[0]);
	actuator_check(a, &limits, rate_hz, counts, n, &report);
	*margin = report.least_margin < MARGIN_MAX ? report.least_margin : MARGIN_MAX;
	enum qb_status st = QB_OK;
	for (int i = 0; st == QB_OK && i < report.n; i++) {
		if (!report.limit[i].within)
			st = qb_fail(e, QB_REFUSED, "limits", NULL, "the drive is beyond the limit '%s'",
			             report.limit[i].name);
	}
	wipe(&report, sizeof report);
	return st;
}

/* The same samples as the sealer rendered when it held the draw to the limits. */
static enum qb_status render(const struct drill_recipe *r, const struct wave_source *source,
                             const struct wave_station *station, struct drive *out, struct qb_error *e)
{
	struct play grid;
	play_begin(&grid, r->slot_start_ns, r->slot_ns, r->rate_hz);
	int64_t from = play_sample_at(&grid, r->drive_from_ns), to = play_sample_at(&grid, r->drive_to_ns);
	if (to <= from || to - from > SAMPLES_MAX)
		return qb_fail(e, QB_RANGE, "recipe", NULL, "the drive's window is empty or too long");
	out->n = (size_t)(to - from);
	out->at = from;
	out->counts = QB_NEW_ARRAY(double, out->n);
	return render_drive(station, source, r->rate_hz, r->drive_from_ns, out->n, out->counts, e);
}

enum qb_status drive_make(const struct drill_recipe *recipe, const struct drill_plan *plan, int station,
                          struct drive *out, struct qb_error *e)
{
	const struct wave_station *s = &plan->network->stations[station];
	struct wave_source source;
	*out = (struct drive){.from_ns = recipe->drive_from_ns, .to_ns = recipe->drive_to_ns};
	enum qb_status st = check_actuator(recipe, &s->actuator, e);
	if (st == QB_OK)
		st = drill_recipe_to_source(recipe, &source, e);
	if (st == QB_OK)
		st = render(recipe, &source, s, out, e);
	if (st == QB_OK)
		st = check_limits(&s->actuator, plan, out->counts, out->n, recipe->rate_hz, &out->margin, e);
	if (st == QB_OK) {
		memcpy(out->calibration_id, s->actuator.calibration_id, sizeof out->calibration_id);
		/* Adding zero turns a null's negative zeros, which would show the signs of its draw, into plain ones.
		 */
		for (size_t i = 0; i < out->n; i++)
			out->counts[i] = out->counts[i] * recipe->gain + 0.0;
		out->margin *= recipe->gain;
	}
	wipe(&source, sizeof source);
	if (st != QB_OK)
		drive_free(out);
	return st;
}

void drive_free(struct drive *d)
{
	if (d->counts != NULL)
		wipe(d->counts, d->n * sizeof *d->counts);
	qb_free(d->counts);
	wipe(d, sizeof *d);
}
