/* Heads as text from outside: whatever is accepted must format to the very same text. */
#include <string.h>

#include "server/base/check.h"
#include "server/ledger/head.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
	static struct head h;
	struct buf again = {0};
	if (head_parse((const char *)data, size, &h, NULL) == QB_OK) {
		uint8_t pk[SIGN_PUBLIC] = {0};
		head_format(&h, &again);
		CHECK(again.len == size && memcmp(again.data, data, size) == 0);
		CHECK(head_verify(&h, pk, NULL, 0, NULL, NULL) != QB_OK);
	}
	buf_free(&again);
	return 0;
}
