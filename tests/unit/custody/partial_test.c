/* Openings by any k custodians, and which purpose opens what. */
#include "tests/unit/custody/scene.h"

static void any_k_open_a_record(void **state)
{
	(void)state;
	struct scene s;
	struct buf bytes = {0}, plain = {0};
	struct record rec;
	struct partial part[SCENE_MAX], some[SCENE_MAX];
	struct partial_authority a = scene_authority(PARTIAL_TRUTH, 7);
	scene_make(&s, 5, 3);
	scene_seal(&s, RECORD_SLOT, 12, "live: heavy pair", &bytes, &rec);
	for (uint32_t i = 1; i <= 5; i++)
		scene_partial(&s, &rec, i, &a, &part[i - 1]);
	for (unsigned set = 0; set < 32; set++) {
		size_t n = 0;
		for (unsigned i = 0; i < 5; i++)
			if (set >> i & 1)
				some[n++] = part[i];
		buf_clear(&plain);
		enum qb_status got = partial_open(&s.g, &rec, some, n, &plain, NULL);
		assert_int_equal(got, n >= 3 ? QB_OK : QB_CRYPTO);
		if (got == QB_OK)
			assert_memory_equal(plain.data, "live: heavy pair", 16);
		assert_int_equal(plain.len, n >= 3 ? 16 : 0);
	}
	buf_free(&bytes);
	buf_free(&plain);
	scene_free(&s);
}

/* Noise under a proof that holds: only a record of the sealer's has to open. */
static void what_a_party_sealed_to_nobody_has_no_content(void **state)
{
	(void)state;
	static const uint8_t zeros[64];
	static const struct {
		enum record_type type;
		enum partial_purpose purpose;
		enum qb_status expected;
	} table[] = {{RECORD_CLAIM, PARTIAL_CLAIMS, QB_OK},
	             {RECORD_PLAY_NOTE, PARTIAL_SPOT, QB_OK},
	             {RECORD_SLOT, PARTIAL_TRUTH, QB_CRYPTO},
	             {RECORD_SEED, PARTIAL_TRUTH, QB_CRYPTO}};
	struct scene s;
	scene_make(&s, 3, 2);
	for (size_t i = 0; i < sizeof table / sizeof *table; i++) {
		struct buf bytes = {0}, plain = {0};
		struct record rec;
		struct partial p[2];
		struct partial_authority a = scene_authority(table[i].purpose, 7);
		uint8_t hash[64];
		bool opens = false;
		scene_seal(&s, table[i].type, 12, "words", &bytes, &rec);
		for (uint32_t j = 1; j <= 2; j++)
			scene_partial(&s, &rec, j, &a, &p[j - 1]);
		assert_int_equal(partial_open_filed(&s.g, &rec, p, 2, &plain, &opens, NULL), QB_OK);
		assert_true(opens);
		assert_int_equal(plain.len, 5);
		partial_content_hash(&plain, opens, hash);
		assert_memory_not_equal(hash, zeros, 64);
		/* The ciphertext changes after the proof was looked at; what is left is what an author could have
		 * sealed. */
		bytes.data[bytes.len - 1] ^= 1;
		buf_clear(&plain);
		assert_int_equal(partial_open_filed(&s.g, &rec, p, 2, &plain, &opens, NULL), table[i].expected);
		assert_true(table[i].expected != QB_OK || !opens);
		partial_content_hash(&plain, false, hash);
		assert_memory_equal(hash, zeros, 64);
		assert_int_equal(plain.len, 0);
		assert_int_equal(partial_open_filed(&s.g, &rec, p, 1, &plain, &opens, NULL), QB_CRYPTO);
		buf_free(&bytes);
		buf_free(&plain);
	}
	scene_free(&s);
}

static void purposes_open_their_own_types_only(void **state)
{
	(void)state;
	static const struct {
		enum partial_purpose purpose;
		unsigned types; /* bit per record type */
	} table[] = {
	    {PARTIAL_SPOT, 1U << RECORD_SLOT | 1U << RECORD_PLAY_NOTE},
	    {PARTIAL_TRUTH, 1U << RECORD_SEED | 1U << RECORD_SLOT},
	    {PARTIAL_CLAIMS, 1U << RECORD_CLAIM | 1U << RECORD_GUESS | 1U << RECORD_MILESTONE | 1U << RECORD_INCIDENT},
	    {PARTIAL_DELIVERY, 1U << RECORD_PLAY_REPORT | 1U << RECORD_PLAY_NOTE},
	    {PARTIAL_REHEARSAL, 1U << RECORD_CANARY},
	};
	for (size_t i = 0; i < sizeof table / sizeof *table; i++)
		for (unsigned t = 0; t < RECORD_TYPES; t++)
			assert_int_equal(partial_purpose_opens(table[i].purpose, (enum record_type)t),
			                 table[i].types >> t & 1);
	assert_false(partial_purpose_opens((enum partial_purpose)0, RECORD_ANSWER));
	assert_false(partial_purpose_opens((enum partial_purpose)6, RECORD_SLOT));
	for (unsigned t = 0; t < RECORD_ANSWER; t++)
		assert_true(partial_purpose_opens(partial_full_purpose((enum record_type)t), (enum record_type)t));
}

static void a_custodian_refuses_what_does_not_fit(void **state)
{
	(void)state;
	struct scene s;
	struct buf bytes = {0}, out = {0};
	struct record rec;
	scene_make(&s, 3, 2);
	struct partial_authority slot = scene_authority(PARTIAL_SPOT, 1),
	                         canary = scene_authority(PARTIAL_REHEARSAL, 1);
	scene_seal(&s, RECORD_CANARY, 0, "canary", &bytes, &rec);
	assert_int_equal(partial_make(&s.g, &rec, 1, s.share[0], &slot, &out, NULL), QB_REFUSED);
	scene_seal(&s, RECORD_CLAIM, 0, "{}", &bytes, &rec);
	assert_int_equal(partial_make(&s.g, &rec, 1, s.share[0], &slot, &out, NULL), QB_REFUSED);
	scene_seal(&s, RECORD_SLOT, 0, "{}", &bytes, &rec);
	assert_int_equal(partial_make(&s.g, &rec, 1, s.share[0], &canary, &out, NULL), QB_REFUSED);
	assert_int_equal(partial_make(&s.g, &rec, 2, s.share[0], &slot, &out, NULL), QB_CRYPTO);
	assert_int_equal(partial_make(&s.g, &rec, 0, s.share[0], &slot, &out, NULL), QB_CRYPTO);
	assert_int_equal(partial_make(&s.g, &rec, 4, s.share[0], &slot, &out, NULL), QB_CRYPTO);
	assert_int_equal(out.len, 0);
	buf_free(&bytes);
	scene_free(&s);
}

static const struct CMUnitTest tests[] = {
    cmocka_unit_test(any_k_open_a_record),
    cmocka_unit_test(what_a_party_sealed_to_nobody_has_no_content),
    cmocka_unit_test(purposes_open_their_own_types_only),
    cmocka_unit_test(a_custodian_refuses_what_does_not_fit),
};
SCENE_MAIN(tests)
