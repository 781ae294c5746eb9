/* Fuzz target: any bytes as a recipe; what decodes must encode to the same bytes. */
#include <stddef.h>
#include <stdint.h>
#include <string.h>

#include "server/drill/recipe.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
	struct drill_recipe r;
	struct wave_source s;
	struct qb_error e = {0};
	uint8_t out[DRILL_RECIPE_BYTES];
	if (drill_recipe_decode(data, size, &r, &e) != QB_OK)
		return 0;
	if (drill_recipe_encode(&r, out, &e) != QB_OK || memcmp(out, data, sizeof out) != 0 ||
	    drill_recipe_to_source(&r, &s, &e) != QB_OK)
		__builtin_trap();
	return 0;
}
