/*
 * The draw: from uniform variates of the sealed seed to one slot's truth. Pure: the same variates give the same truth,
 * in any order of slots, so that an auditor can draw again after the opening.
 *
 * Variates of a slot, by number m:
 *   0            live or null: live when u < expected_live / slots and the campaign is not empty
 *   1            family, by weight, in the plan's order
 *   64 a + 2     attempt a = 0, 1, ... redraws: arrival, uniform over the times that keep the whole drive inside the
 * guards 64 a + 3     right ascension 64 a + 4     declination 64 a + 5     inclination 64 a + 6     polarisation 64 a
 * + 7     phase 64 a + 8     network SNR, or the scale (distance, hrss) 64 a + 9 + i intrinsic parameter i, in the
 * plan's order Variates of the campaign's own draw: 0, empty by design when u < empty_chance.
 *
 * SNRs are optimal, from the family's lowest frequency up to half the slowest drive rate of the network. A drive's
 * interval lies on the sample grid of its slot (start + k / rate), rounded outwards.
 *
 * An attempt whose drive is beyond a limit at any station is drawn again as the next attempt; live or null and family
 * stay. A null is the same draw with gain 0: all of the work, and all the numbers, are the same.
 */
#ifndef QB_DRILL_DRAW_H
#define QB_DRILL_DRAW_H

#include <stdbool.h>
#include <stdint.h>

#include "server/drill/plan.h"
#include "server/drill/truth.h"

#define DRAW_STRIDE 64

/* The m-th uniform variate, in (0,1). */
struct draw_uniforms {
	double (*uniform)(void *state, uint64_t m);
	void *state;
};

/* Whether the campaign is empty by design. */
bool draw_campaign_empty(const struct drill_plan *plan, const struct draw_uniforms *u);

/*
 * One slot.
 *
 * Given:    plan        checked (plan_check gave no refusal)
 *           empty       of draw_campaign_empty
 *           slot        0 .. slots_count - 1
 * Returned: out         the truth; recipe hashes zero
 * Errors:   QB_RANGE    no draw within the limits in plan->redraws attempts: names the family and the limit
 *           others      from the wave room
 *
 * weight_mpc3 (compact binaries; absent for bursts): p v / q at the draw, where
 *   q   density of the draw within this family: product over the intrinsic parameters that audit.population names,
 * times the density of the luminosity distance: q(rho) |d rho / d D| at the drawn orientation, masses and arrival, or
 *       the plan's own density when the distance is drawn
 *   p   the target density audit.population of the same parameters at the same values (in the frame they are drawn in);
 *       parameters that it does not name are taken as drawn from the target, so that they cancel
 *   v   4 pi D^2 in the station frame; (dV_c/dz) (dz/dD) / (1 + z) in the source frame (audit C3)
 * It is absent when audit.population is empty or names a parameter that this family does not draw.
 */
enum qb_status draw_slot(const struct drill_plan *plan, bool empty, int64_t slot, const struct draw_uniforms *u,
                         struct drill_truth *out, struct qb_error *e) QB_MUST_USE;

/*
 * The longest drive that a family can ask for, over its population's extremes: before and after the arrival at Earth's
 * centre, signal, tapers, delays and filter tails included. Used by plan_check.
 */
enum qb_status draw_longest_drive(const struct drill_plan *plan, const struct plan_family *family, double *before_s,
                                  double *after_s, struct qb_error *e) QB_MUST_USE;

/* True when draws of this family carry weight_mpc3. */
bool draw_family_has_weight(const struct drill_plan *plan, const struct plan_family *family);

#endif
