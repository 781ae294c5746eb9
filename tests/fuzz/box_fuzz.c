/* Boxes: only the one that was sealed opens. */
#include "tests/fuzz/parties_fixed.h"

#include "server/custody/box.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
	static struct buf valid;
	struct buf b = {0}, content = {0};
	fixed_parties();
	if (valid.len == 0)
		CHECK(box_seal(fixed_pub[0].exchange, BOX_ANSWER, "ad", 2, "drill", 5, 64, &valid, NULL) == QB_OK);
	bool same = fixed_overlay(&valid, data, size, &b);
	CHECK((box_open(fixed_key[0].exchange, BOX_ANSWER, "ad", 2, b.data, b.len, &content, NULL) == QB_OK) == same);
	CHECK(!same || (content.len == 5 && memcmp(content.data, "drill", 5) == 0));
	buf_free(&b);
	buf_free(&content);
	return 0;
}
