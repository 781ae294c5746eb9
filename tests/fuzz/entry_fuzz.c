/* Ledger frames from outside: whatever is accepted must encode to the very same bytes. */
#include <string.h>

#include "server/base/check.h"
#include "server/ledger/entry.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
	struct entry en;
	struct buf again = {0};
	if (entry_decode(data, size, &en, NULL) == QB_OK) {
		CHECK(entry_encode(&en, &again, NULL) == QB_OK);
		CHECK(again.len == size && memcmp(again.data, data, size) == 0);
	}
	buf_free(&again);
	return 0;
}
