/* Partial openings from outside: nothing but the one valid opening may pass the check. */
#include "tests/fuzz/group_fixed.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
	static struct buf valid;
	struct partial_authority a = {.purpose = PARTIAL_CLAIMS, .hash = {1, 2, 3}};
	struct partial out;
	struct buf b = {0};
	fixed_setup();
	if (valid.len == 0)
		CHECK(partial_make(&fixed, &fixed_record, 1, fixed_share, &a, &valid, NULL) == QB_OK);
	bool same = fixed_overlay(&valid, data, size, &b);
	CHECK((partial_check(&fixed, &fixed_record, &a, b.data, b.len, &out, NULL) == QB_OK) == same);
	buf_free(&b);
	return 0;
}
