/* Paper text and words over the telephone: what is accepted, written again, is accepted as the same bytes. */
#include <string.h>

#include "server/base/check.h"
#include "server/custody/paper.h"
#include "server/custody/words.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

/* Half of the inputs are laid over a valid sheet. */
static void sheet(const uint8_t *data, size_t size, struct buf *out)
{
	if (size == 0 || data[0] % 2 == 0) {
		buf_put(out, data, size);
		return;
	}
	paper_encode((const uint8_t *)"forty bytes of a share file, encrypted.", 40, "a share", out);
	for (size_t i = 1; i + 1 < size; i += 2)
		out->data[(data[i] * 7U) % out->len] = data[i + 1];
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
	struct buf text = {0}, first = {0}, again = {0}, second = {0};
	uint8_t bytes[16], back[16];
	sheet(data, size, &text);
	if (paper_decode((const char *)text.data, text.len, &first, NULL) == QB_OK) {
		paper_encode(first.data, first.len, "again", &again);
		CHECK(paper_decode((const char *)again.data, again.len, &second, NULL) == QB_OK);
		CHECK(second.len == first.len && memcmp(second.data, first.data, first.len) == 0);
	}
	buf_clear(&again);
	if (words_parse((const char *)data, size, bytes, sizeof bytes, NULL) == QB_OK) {
		words_put(bytes, sizeof bytes, &again);
		CHECK(words_parse((const char *)again.data, again.len, back, sizeof back, NULL) == QB_OK);
		CHECK(memcmp(bytes, back, sizeof bytes) == 0);
	}
	buf_free(&text);
	buf_free(&first);
	buf_free(&again);
	buf_free(&second);
	return 0;
}
