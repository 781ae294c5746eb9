/* Messages of a resharing: only what their dealer signed may pass, and nobody can be blamed for an honest one. */
#include <stdlib.h>

#include "tests/fuzz/parties_fixed.h"

#include "server/custody/complaint.h"
#include "server/custody/reshare.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
	static struct reshare_context c;
	static struct buf valid, complaint;
	static struct deal honest;
	static const uint32_t dealers[2] = {1, 2};
	struct deal *d = malloc(sizeof *d);
	struct dealing g;
	enum complaint_verdict verdict;
	struct buf b = {0};
	CHECK(d != NULL);
	fixed_parties();
	if (valid.len == 0) {
		CHECK(reshare_context_init(&c, &fixed, 1, dealers, fixed_pub, 3, 2, fixed_pub + 2, NULL) == QB_OK);
		CHECK(reshare_make(&c, 1, &fixed_key[0], fixed_share, &valid, NULL) == QB_OK);
		CHECK(reshare_parse(&c, valid.data, valid.len, &honest, NULL) == QB_OK);
		g = reshare_dealing(&c);
		CHECK(complaint_dealing_make(&g, &honest, 2, &fixed_key[3], &complaint, NULL) == QB_OK);
	}
	g = reshare_dealing(&c);
	bool same = fixed_overlay(&valid, data, size, &b);
	bool good = reshare_parse(&c, b.data, b.len, d, NULL) == QB_OK && reshare_check(&c, d, NULL) == QB_OK;
	CHECK(good == same);
	buf_clear(&b);
	(void)fixed_overlay(&complaint, data, size, &b);
	if (complaint_dealing_judge(&g, &honest, b.data, b.len, &verdict, NULL) == QB_OK)
		CHECK(verdict == COMPLAINT_FALSE);
	buf_free(&b);
	free(d);
	return 0;
}
