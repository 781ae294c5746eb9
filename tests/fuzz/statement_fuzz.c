/* Entries' texts: what is accepted has every member of its type, and says so of what it holds. */
#include <string.h>

#include "server/base/check.h"
#include "server/base/buf.h"
#include "server/wire/entries.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
	struct wire_entry en;
	/* the first byte chooses a type, so that the members of all are reached */
	int n;
	const struct wire_entry_type *all = wire_entry_types(&n);
	struct buf b = {0};
	if (size > 0 && data[0] < n) {
		buf_printf(
		    &b,
		    "{\"type\":\"%s\",\"by\":\"ines\",\"campaign\":\"00112233445566778899aabbccddeeff\",\"when_gps\":"
		    "\"1487894418\",\"why\":\"-\"",
		    all[data[0]].type);
		buf_put(&b, data + 1, size - 1);
	} else {
		buf_put(&b, data, size);
	}
	if (wire_entry_parse((const char *)b.data, b.len, &en, NULL) == QB_OK) {
		CHECK(en.by != NULL && en.why != NULL && en.type != NULL);
		CHECK(wire_entry_type(en.type->type) == en.type);
		wire_entry_free(&en);
	}
	buf_free(&b);
	return 0;
}
