/* The driver's start-up message; see cautions.h. */
#include "client/agent/cautions.h"

#include "server/base/clock.h"

static const char usual[] =
    "CAUTION  Driving a suspended mirror can break lock or damage hardware, and a drill can set off costly work "
    "elsewhere.\n"
    "         Limits come from the station's own actuator and laser-safety authorities; their rules and their licensed "
    "staff prevail.\n"
    "         A drill is never played over a hold, outside its limits, without a working stop path, or without an "
    "agreed way\n"
    "         to ask \"is this a drill?\".\n";

void cautions_text(const struct drill_plan *plan, int station, struct buf *out)
{
	const struct wave_station *s = &plan->network->stations[station];
	const struct wave_actuator *a = &s->actuator;
	char from[40], to[40];
	buf_text(out, usual);
	if (!a->present) {
		buf_printf(out, "LIMITS   %s has no actuator in the network file: nothing will be played.\n", s->name);
		return;
	}
	double range = (double)(UINT64_C(1) << (a->converter_bits - 1));
	buf_printf(out, "LIMITS   %s: largest drive %.0f counts (%g of %d bits), slew %g counts/s, at %g samples/s.\n",
	           s->name, plan->largest_drive * range, plan->largest_drive, a->converter_bits, a->slew_counts_per_s,
	           a->rate_hz);
	buf_printf(out, "         Driven band %g to %g Hz, edges out to %g and %g Hz.", a->band_hz[1], a->band_hz[2],
	           a->band_hz[0], a->band_hz[3]);
	for (int i = 0; i < plan->n_excluded_bands; i++)
		buf_printf(out, "%s%g to %g Hz", i == 0 ? " Never driven: " : ", ", plan->excluded_bands_hz[i][0],
		           plan->excluded_bands_hz[i][1]);
	buf_printf(out, "%s\n", plan->n_excluded_bands > 0 ? "." : "");
	if (a->valid_to_gps_ns > a->valid_from_gps_ns)
		buf_printf(out, "         Calibration %s, valid from %s to %s; not a slot outside it is played.\n",
		           a->calibration_id[0] != '\0' ? a->calibration_id : "(unnamed)",
		           clock_utc_text(a->valid_from_gps_ns, from, sizeof from),
		           clock_utc_text(a->valid_to_gps_ns, to, sizeof to));
	else
		buf_printf(out, "         The network file does not say how long the calibration is valid.\n");
}
