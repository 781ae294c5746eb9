/* Key files from outside, up to the point where a passphrase would be needed. */
#include "tests/fuzz/group_fixed.h"

#include "server/custody/keyfile.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
	static struct buf valid;
	struct keyfile_info info;
	struct buf b = {0};
	if (valid.len == 0) {
		CHECK(secret_setup(NULL) == QB_OK);
		struct secret *payload = secret_from("fixed payload", 13);
		CHECK(keyfile_encrypt(KEYFILE_OTHER, KEYFILE_INTERACTIVE, "p", payload, &valid, NULL) == QB_OK);
		secret_free(&payload);
	}
	bool same = fixed_overlay(&valid, data, size, &b);
	bool passed = keyfile_inspect(b.data, b.len, &info, NULL) == QB_OK;
	CHECK(passed == same); /* the check sum covers every byte */
	if (passed)
		CHECK(info.payload_bytes == 13 && info.rehearsal_only && info.type == KEYFILE_OTHER);
	buf_free(&b);
	return 0;
}
