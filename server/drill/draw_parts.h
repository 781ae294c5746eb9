/* Inside the draw: one attempt's working values, and the steps that more than one file takes. Not for other rooms. */
#ifndef QB_DRILL_DRAW_PARTS_H
#define QB_DRILL_DRAW_PARTS_H

#include "server/drill/draw.h"
#include "server/drill/signal.h"
#include "server/wave/cosmology.h"

/* Order of the six places in plan_family.place. */
enum draw_place { PLACE_RIGHT_ASCENSION, PLACE_DECLINATION, PLACE_INCLINATION, PLACE_POLARIZATION, PLACE_PHASE };

struct draw_attempt {
	const struct drill_plan *plan;
	const struct plan_family *family;
	double values[POPULATION_MAX]; /* intrinsic parameters as drawn (in the family's frame) */
	double place[6];
	struct wave_source source;
	double loud;     /* network SNR or scale as drawn */
	double scale;    /* distance or hrss that is in source */
	double redshift; /* 0 in the station frame */
	double network_snr;
	double station_snr[WAVE_MAX_STATIONS];
	double snr_slope; /* |d rho / d D| at the draw, per Mpc; binaries only */
};

struct cosmology draw_cosmology(const struct drill_plan *plan);
/* Puts values and places into the source, at redshift 0 and the family's default scale. */
enum qb_status draw_fill(struct draw_attempt *a, struct qb_error *e) QB_MUST_USE;
/* Puts a scale (and with it the redshift) into the source. */
void draw_set_scale(struct draw_attempt *a, double scale);
/* Network SNR of the source as it stands; fills station_snr. */
enum qb_status draw_snr(struct draw_attempt *a, double *network, struct qb_error *e) QB_MUST_USE;
/* Solves for the scale whose network SNR is `wanted`, or takes the drawn scale; sets all SNRs and the slope. */
enum qb_status draw_loudness(struct draw_attempt *a, double u, struct qb_error *e) QB_MUST_USE;
/* audit C1; see draw.h. False when there is none. */
bool draw_weight(const struct draw_attempt *a, double *weight_mpc3);

/* Longest time before and after arrival at Earth's centre that any station is driven for this source. */
enum qb_status draw_drive_reach(const struct drill_plan *plan, const struct wave_source *s, double *before_s,
                                double *after_s, struct qb_error *e) QB_MUST_USE;
/*
 * Renders station i's drive at gain 1.
 * Returned: out      peak strain, peak counts, drive interval
 *           within   false when a limit is exceeded; `limit` says which
 */
enum qb_status draw_station(const struct drill_plan *plan, const struct wave_source *s, int i,
                            struct truth_station *out, bool *within, char limit[80], struct qb_error *e) QB_MUST_USE;

#endif
