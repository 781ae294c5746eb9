/*
 * From a recipe to the counts that the actuator gets: rendering, the inverse of the actuator, the limits. A null takes
 * the same way to its end, limits included, and is multiplied by 0 there.
 */
#ifndef QB_AGENT_DRIVE_H
#define QB_AGENT_DRIVE_H

#include "server/drill/plan.h"
#include "server/drill/recipe.h"

struct drive {
	double *counts; /* owned; n of them, gain applied; drive_free wipes */
	size_t n;
	int64_t at;              /* sample of the slot where counts[0] belongs */
	int64_t from_ns, to_ns;  /* the whole drive's window, as the recipe says */
	double margin;           /* smallest limit / demand; 0 for a null */
	char calibration_id[64]; /* of the actuator; "" none */
};

/*
 * Given:    recipe     decoded, and checked to be of this slot, station and campaign
 *           plan       its network's station i, its largest drive and excluded bands
 * Returned: *out       owned by the caller
 * Errors:   QB_REFUSED beyond a limit of the actuator, its calibration not valid at the slot's time, or no actuator;
 *           QB_RANGE, QB_FORMAT a recipe that cannot be rendered
 */
enum qb_status drive_make(const struct drill_recipe *recipe, const struct drill_plan *plan, int station,
                          struct drive *out, struct qb_error *e) QB_MUST_USE;
void drive_free(struct drive *d);

/* QB_CRYPTO unless the recipe is this campaign's, slot's and station's, at the station's drive rate. */
enum qb_status drive_check_recipe(const struct drill_recipe *recipe, const uint8_t campaign[static 16],
                                  const struct drill_plan *plan, int64_t slot, int station,
                                  struct qb_error *e) QB_MUST_USE;

#endif
