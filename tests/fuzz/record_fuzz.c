/* Sealed records from outside: nothing but the one valid record may pass the check. */
#include "tests/fuzz/group_fixed.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
	struct buf b = {0};
	struct record rec;
	fixed_setup();
	bool same = fixed_overlay(&fixed_record_bytes, data, size, &b);
	CHECK((record_check(&fixed, b.data, b.len, &rec, NULL) == QB_OK) == same);
	if (b.len >= RECORD_HEADER_BYTES) {
		struct record_header h;
		uint8_t again[RECORD_HEADER_BYTES];
		if (record_header_decode(b.data, &h, NULL) == QB_OK) {
			record_header_encode(&h, again);
			CHECK(memcmp(again, b.data, sizeof again) == 0);
		}
	}
	buf_free(&b);
	return 0;
}
