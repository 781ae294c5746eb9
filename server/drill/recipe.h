/*
 * The recipe: what one station's driver needs to play one slot, in a fixed 1024-byte binary form, so that a null slot's
 * recipe has the same length and the same fields as a live one's.
 */
#ifndef QB_DRILL_RECIPE_H
#define QB_DRILL_RECIPE_H

#include <stdbool.h>
#include <stdint.h>

#include "server/base/buf.h"
#include "server/drill/truth.h"
#include "server/wave/source.h"

#define DRILL_RECIPE_BYTES   1024
#define DRILL_RECIPE_VERSION 1

struct drill_recipe {
	uint8_t campaign[16];
	int64_t slot, slot_start_ns, slot_ns;
	char station[64];
	double rate_hz;                     /* of the drive */
	double gain;                        /* 1 live, 0 null */
	int64_t drive_from_ns, drive_to_ns; /* the whole drive, inside the slot less its guards */
	struct wave_source source;          /* as seen at the station */
};

/* The recipe of station i (position in the plan's network) for a drawn truth. */
void drill_recipe_from_truth(const struct drill_truth *t, int i, const uint8_t campaign[static 16], double rate_hz,
                             struct drill_recipe *out);

/*
 * "QBRP" | version u16 | conventions u16 | campaign 16 | slot u64 | start i64 | duration i64 | station 64 | rate f64 |
 * gain f64 | drive from i64, to i64 | family 32 | model 32 | arrival i64 | right ascension, declination, polarisation,
 * lowest frequency f64 | count u32 | 0 u32 | 16 x (key 40 | value f64); unused parts zero
 *
 * Errors:   QB_RANGE    a name too long, more than 16 parameters, a number that is not finite
 */
enum qb_status drill_recipe_encode(const struct drill_recipe *r, uint8_t out[static DRILL_RECIPE_BYTES],
                                   struct qb_error *e) QB_MUST_USE;
/* Strict: exact length, known version and family, zeros where nothing is, gain 0 or 1, drive inside the slot. */
enum qb_status drill_recipe_decode(const void *p, size_t n, struct drill_recipe *out, struct qb_error *e) QB_MUST_USE;
/* The source to render: a checked copy with the arrival; multiply the samples by gain. */
enum qb_status drill_recipe_to_source(const struct drill_recipe *r, struct wave_source *out,
                                      struct qb_error *e) QB_MUST_USE;

#endif
