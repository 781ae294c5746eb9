/* The frame of entries byte by byte, signatures, commitments and promises. */
#include "tests/hex.h"

#include "server/ledger/entry.h"

static const char body[] = "{\"what\":\"hold\"}";

static struct entry make(const struct secret *seed)
{
	struct entry en = {.kind = ENTRY_PUBLIC,
	                   .seq = 41,
	                   .received_gps_ns = INT64_C(1488789012000000001),
	                   .body = (const uint8_t *)body,
	                   .body_len = strlen(body)};
	entry_sign(&en, seed);
	return en;
}

static void frame_is_the_documented_one(void **state)
{
	(void)state;
	struct secret *seed = secret_random(32);
	struct entry en = make(seed), back;
	struct buf b = {0};
	struct ledger_hash a, h;
	assert_int_equal(entry_encode(&en, &b, NULL), QB_OK);
	assert_int_equal(b.len, ENTRY_FRAME_BYTES + strlen(body));
	assert_memory_equal(b.data, "QBL1\0\0\0\0", 8);
	assert_int_equal(le64_load(b.data + 8), 41);
	assert_int_equal(le64_load(b.data + 16), 1488789012000000001);
	assert_memory_equal(b.data + 24, en.author, 16);
	assert_int_equal(le64_load(b.data + 40), strlen(body));
	assert_memory_equal(b.data + 48, body, strlen(body));
	assert_memory_equal(b.data + 48 + strlen(body), en.signature, 64);
	assert_int_equal(entry_decode(b.data, b.len, &back, NULL), QB_OK);
	assert_ptr_equal(back.body, b.data + 48);
	assert_true(back.seq == en.seq && back.received_gps_ns == en.received_gps_ns && back.kind == en.kind);
	assert_int_equal(entry_leaf_hash(&back, &a, NULL), QB_OK);
	hash_leaf(&h, b.data, b.len);
	assert_true(hash_equal(&a, &h));
	buf_free(&b);
	secret_free(&seed);
}

static void malformed_frames_are_refused(void **state)
{
	(void)state;
	struct secret *seed = secret_random(32);
	struct entry en = make(seed), back;
	struct buf b = {0};
	assert_int_equal(entry_encode(&en, &b, NULL), QB_OK);
	for (size_t n = 0; n < b.len; n++)
		assert_int_not_equal(entry_decode(b.data, n, &back, NULL), QB_OK);
	buf_u8(&b, 0);
	assert_int_equal(entry_decode(b.data, b.len, &back, NULL), QB_FORMAT);
	b.len--;
	static const size_t must_be_exact[] = {0, 3, 4, 5, 6, 7, 40, 41, 43, 47};
	for (size_t i = 0; i < sizeof must_be_exact / sizeof *must_be_exact; i++) {
		uint8_t was = b.data[must_be_exact[i]];
		b.data[must_be_exact[i]] ^= 0x82;
		assert_int_not_equal(entry_decode(b.data, b.len, &back, NULL), QB_OK);
		b.data[must_be_exact[i]] = was;
	}
	b.data[23] |= 0x80; /* received before the epoch */
	assert_int_equal(entry_decode(b.data, b.len, &back, NULL), QB_RANGE);
	b.data[23] &= 0x7f;
	b.data[4] = ENTRY_HIDDEN; /* a document passed off as a commitment */
	assert_int_equal(entry_decode(b.data, b.len, &back, NULL), QB_FORMAT);
	en.body_len = 0;
	assert_int_equal(entry_encode(&en, &b, NULL), QB_RANGE);
	en.body_len = ENTRY_BODY_MAX + 1;
	assert_int_equal(entry_encode(&en, &b, NULL), QB_RANGE);
	buf_free(&b);
	secret_free(&seed);
}

static void signatures_bind_body_and_author(void **state)
{
	(void)state;
	struct secret *seed = secret_random(32), *other = secret_random(32);
	uint8_t pk[SIGN_PUBLIC], other_pk[SIGN_PUBLIC];
	struct entry en = make(seed);
	sign_public(seed, pk);
	sign_public(other, other_pk);
	assert_int_equal(entry_verify(&en, pk, NULL), QB_OK);
	assert_int_equal(entry_verify(&en, other_pk, NULL), QB_CRYPTO);
	sign_key_id(other_pk, en.author); /* somebody else's entry claimed as one's own */
	assert_int_equal(entry_verify(&en, other_pk, NULL), QB_CRYPTO);
	en = make(seed);
	en.signature[10] ^= 1;
	assert_int_equal(entry_verify(&en, pk, NULL), QB_CRYPTO);
	en = make(seed);
	en.body = (const uint8_t *)"{\"what\":\"lift\"}";
	assert_int_equal(entry_verify(&en, pk, NULL), QB_CRYPTO);
	secret_free(&seed);
	secret_free(&other);
}

static void hidden_entries_commit_to_bytes_and_nonce(void **state)
{
	(void)state;
	struct secret *seed = secret_random(32);
	uint8_t nonce[ENTRY_NONCE_BYTES] = {1}, a[64], b[64], pk[SIGN_PUBLIC];
	entry_hide(nonce, "claim", 5, a);
	entry_hide(nonce, "claim", 5, b);
	assert_memory_equal(a, b, 64);
	nonce[0] = 2;
	entry_hide(nonce, "claim", 5, b);
	assert_memory_not_equal(a, b, 64);
	struct entry en = {.kind = ENTRY_HIDDEN, .body = a, .body_len = 64};
	struct buf f = {0};
	entry_sign(&en, seed);
	sign_public(seed, pk);
	assert_int_equal(entry_encode(&en, &f, NULL), QB_OK);
	assert_int_equal(entry_decode(f.data, f.len, &en, NULL), QB_OK);
	assert_int_equal(entry_verify(&en, pk, NULL), QB_OK);
	buf_free(&f);
	secret_free(&seed);
}

static void promises_bind_every_field(void **state)
{
	(void)state;
	struct secret *seed = secret_random(32);
	uint8_t pk[SIGN_PUBLIC];
	struct entry_promise p = {.received_gps_ns = 10, .batch_due_gps_ns = 20}, q;
	sign_public(seed, pk);
	entry_promise_sign(&p, seed);
	assert_int_equal(entry_promise_verify(&p, pk, NULL), QB_OK);
	q = p;
	q.campaign[0] ^= 1;
	assert_int_equal(entry_promise_verify(&q, pk, NULL), QB_CRYPTO);
	q = p;
	q.commitment[63] ^= 1;
	assert_int_equal(entry_promise_verify(&q, pk, NULL), QB_CRYPTO);
	q = p;
	q.received_gps_ns--; /* an earlier claim than promised */
	assert_int_equal(entry_promise_verify(&q, pk, NULL), QB_CRYPTO);
	q = p;
	q.batch_due_gps_ns++;
	assert_int_equal(entry_promise_verify(&q, pk, NULL), QB_CRYPTO);
	q = p;
	q.batch_due_gps_ns = 9;
	entry_promise_sign(&q, seed);
	assert_int_equal(entry_promise_verify(&q, pk, NULL), QB_FORMAT);
	secret_free(&seed);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(frame_is_the_documented_one),
	    cmocka_unit_test(malformed_frames_are_refused),
	    cmocka_unit_test(signatures_bind_body_and_author),
	    cmocka_unit_test(hidden_entries_commit_to_bytes_and_nonce),
	    cmocka_unit_test(promises_bind_every_field),
	};
	struct qb_error e = {0};
	if (secret_setup(&e) != QB_OK)
		return 1;
	return cmocka_run_group_tests(tests, NULL, NULL);
}
