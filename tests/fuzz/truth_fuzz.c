/* Fuzz target: any bytes as a truth record; what decodes must encode, and decode to the same again. */
#include <stddef.h>
#include <stdint.h>

#include "server/drill/truth.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
	struct drill_truth t, again;
	struct qb_error e = {0};
	struct buf b = {0};
	if (truth_decode(data, size, &t, &e) != QB_OK)
		return 0;
	if (truth_encode(&t, &b, &e) == QB_OK) { /* a shorter spelling of a number may have been the only one to fit */
		if (truth_decode(b.data, b.len, &again, &e) != QB_OK || truth_compare(&t, &again, 0, &e) != QB_OK)
			__builtin_trap();
	}
	json_decref(truth_audit_json(&t));
	buf_free(&b);
	return 0;
}
