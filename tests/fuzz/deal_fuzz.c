/* Deals, complaints and certificates from outside: only the one signed deal may pass; nothing else may be judged
 * guilty. */
#include "tests/fuzz/group_fixed.h"

#include "server/custody/complaint.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

static struct keygen_context context;
static struct deal deals[3];
static struct buf valid, complaint, certificate;

static void setup(void)
{
	struct party_public pub[3];
	struct party_key key[3];
	uint8_t campaign[CAMPAIGN_ID_BYTES] = {1}, sig[3][SIGN_BYTES];
	struct custody_group g;
	CHECK(secret_setup(NULL) == QB_OK);
	for (uint8_t j = 0; j < 3; j++) {
		uint8_t seed[32] = {j}, scalar[SCALAR_BYTES];
		group_scalar_from_u64(scalar, 100 + j);
		CHECK(party_key_from(seed, scalar, &key[j], NULL) == QB_OK);
		party_key_public(&key[j], &pub[j]);
	}
	CHECK(keygen_context_init(&context, campaign, 1, 1, 3, 2, pub, NULL) == QB_OK);
	for (uint32_t j = 3; j >= 1; j--) {
		buf_clear(&valid);
		CHECK(deal_make(&context, j, &key[j - 1], &valid, NULL) == QB_OK);
		CHECK(deal_parse(&context, valid.data, valid.len, &deals[j - 1], NULL) == QB_OK);
	}
	CHECK(complaint_make(&context, &deals[0], 2, &key[1], &complaint, NULL) == QB_OK);
	CHECK(keygen_group(&context, deals, &g, NULL) == QB_OK);
	for (int j = 0; j < 3; j++) {
		keygen_certificate_sign(&g, key[j].seed, sig[j]);
		party_key_free(&key[j]);
	}
	keygen_certificate_encode(&g, (const uint8_t(*)[SIGN_BYTES])sig, &certificate);
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
	struct deal d;
	struct buf b = {0};
	struct custody_group g;
	enum complaint_verdict verdict;
	if (context.n == 0)
		setup();
	bool same = fixed_overlay(&valid, data, size, &b);
	bool passed = deal_parse(&context, b.data, b.len, &d, NULL) == QB_OK && deal_check(&context, &d, NULL) == QB_OK;
	CHECK(passed == same);
	buf_clear(&b);
	fixed_overlay(&complaint, data, size, &b);
	if (complaint_judge(&context, &deals[0], b.data, b.len, &verdict, NULL) == QB_OK)
		CHECK(verdict == COMPLAINT_FALSE);
	buf_clear(&b);
	same = fixed_overlay(&certificate, data, size, &b);
	CHECK((keygen_certificate_verify(&context, deals, b.data, b.len, &g, NULL) == QB_OK) == same);
	buf_free(&b);
	return 0;
}
