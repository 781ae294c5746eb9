/* Signed heads: the one accepted text, signatures, cosignatures and the quorum. */
#include "tests/hex.h"

#include "server/ledger/head.h"

#define WITNESSES 3

static struct secret *service, *custodian[WITNESSES];
static uint8_t service_pk[SIGN_PUBLIC], known[WITNESSES][SIGN_PUBLIC];

static int keys(void **state)
{
	(void)state;
	service = secret_random(32);
	sign_public(service, service_pk);
	for (int i = 0; i < WITNESSES; i++) {
		custodian[i] = secret_random(32);
		sign_public(custodian[i], known[i]);
	}
	return 0;
}

static int keys_free(void **state)
{
	(void)state;
	secret_free(&service);
	for (int i = 0; i < WITNESSES; i++)
		secret_free(&custodian[i]);
	return 0;
}

static struct head make(int cosigners)
{
	struct head h = {.size = 77, .time_gps_ns = INT64_C(1488789012500000000)};
	memset(h.root.b, 0xab, sizeof h.root.b);
	head_sign(&h, service);
	for (int i = 0; i < cosigners; i++) {
		struct head_signature s;
		head_cosign(&h, custodian[i], &s);
		assert_int_equal(head_add(&h, &s, NULL), QB_OK);
	}
	return h;
}

static enum qb_status verify(const struct head *h, size_t *n)
{
	return head_verify(h, service_pk, (const uint8_t(*)[SIGN_PUBLIC])known, WITNESSES, n, NULL);
}

static void text_is_exact_both_ways(void **state)
{
	(void)state;
	struct head h = make(2), back;
	struct buf b = {0}, again = {0};
	head_format(&h, &b);
	assert_memory_equal(b.data, "quietbell/1/head\norigin ", 24);
	assert_non_null(strstr((char *)b.data, "\nsize 77\nroot abababab"));
	assert_non_null(strstr((char *)b.data, "\ntime 1488789012.5\n\nservice "));
	assert_int_equal(head_parse((char *)b.data, b.len, &back, NULL), QB_OK);
	head_format(&back, &again);
	assert_int_equal(again.len, b.len);
	assert_memory_equal(again.data, b.data, b.len);
	for (size_t n = 0; n < b.len; n++) {
		enum qb_status s = head_parse((char *)b.data, n, &back, NULL);
		if (s == QB_OK) /* only whole lines less, which are cosignatures less */
			assert_true(b.data[n - 1] == '\n' && back.n_cosigners < 2);
	}
	buf_free(&b);
	buf_free(&again);
}

static void other_spellings_are_refused(void **state)
{
	(void)state;
	static const char *const edits[][2] = {
	    {"size 77", "size 077"},   {"size 77", "size +77"},           {"size 77", "size -1"},
	    {"abababab", "ABababab"},  {"1488789012.5", "1488789012.50"}, {"\n\nservice", "\nservice"},
	    {"/1/head", "/2/head"},    {"origin ", "origin  "},           {"\ntime", "\r\ntime"},
	    {"cosigner ", "witness "}, {"service ", "cosigner "},         {"size 77", "size 99999999999999999999"},
	};
	struct head h = make(1), back;
	struct buf b = {0};
	head_format(&h, &b);
	for (size_t i = 0; i < sizeof edits / sizeof *edits; i++) {
		const char *text = (const char *)b.data, *at = strstr(text, edits[i][0]);
		struct buf c = {0};
		assert_non_null(at);
		buf_put(&c, text, (size_t)(at - text));
		buf_text(&c, edits[i][1]);
		buf_text(&c, at + strlen(edits[i][0]));
		assert_int_equal(head_parse((char *)c.data, c.len, &back, NULL), QB_FORMAT);
		buf_free(&c);
	}
	buf_text(&b, "\n");
	assert_int_equal(head_parse((char *)b.data, b.len, &back, NULL), QB_FORMAT);
	buf_free(&b);
	h = make(2); /* one key twice */
	h.cosigner[1] = h.cosigner[0];
	head_format(&h, &b);
	assert_int_equal(head_parse((char *)b.data, b.len, &back, NULL), QB_FORMAT);
	buf_free(&b);
}

static void quorum_counts_known_custodians_once(void **state)
{
	(void)state;
	size_t n;
	struct secret *stranger = secret_random(32);
	struct head_signature s;
	for (int k = 0; k <= WITNESSES; k++) {
		struct head h = make(k);
		assert_int_equal(verify(&h, &n), QB_OK);
		assert_int_equal(n, k);
		head_cosign(&h, stranger, &s);
		assert_int_equal(head_add(&h, &s, NULL), QB_OK);
		assert_int_equal(verify(&h, &n), QB_OK);
		assert_int_equal(n, k); /* unknown keys do not count */
	}
	struct head h = make(1);
	head_cosign(&h, custodian[0], &s);
	assert_int_equal(head_add(&h, &s, NULL), QB_OK);
	assert_int_equal(h.n_cosigners, 1);
	const uint8_t twice[2][SIGN_PUBLIC] = {{0}};
	uint8_t same[2][SIGN_PUBLIC];
	memcpy(same, twice, sizeof same);
	memcpy(same[0], known[0], SIGN_PUBLIC);
	memcpy(same[1], known[0], SIGN_PUBLIC);
	assert_int_equal(head_verify(&h, service_pk, (const uint8_t(*)[SIGN_PUBLIC])same, 2, &n, NULL), QB_OK);
	assert_int_equal(n, 1);
	assert_int_equal(head_quorum(2), 2);
	assert_int_equal(head_quorum(3), 2);
	assert_int_equal(head_quorum(4), 3);
	assert_int_equal(head_quorum(5), 3);
	secret_free(&stranger);
}

static void any_change_breaks_a_signature(void **state)
{
	(void)state;
	struct head h = make(2);
	h.size++;
	assert_int_equal(verify(&h, NULL), QB_CRYPTO);
	h = make(2);
	h.root.b[31] ^= 1;
	assert_int_equal(verify(&h, NULL), QB_CRYPTO);
	h = make(2);
	h.time_gps_ns--;
	assert_int_equal(verify(&h, NULL), QB_CRYPTO);
	h = make(2);
	h.cosigner[1].signature[0] ^= 1;
	assert_int_equal(verify(&h, NULL), QB_CRYPTO);
	h = make(0);
	head_sign(&h, custodian[0]); /* another service */
	assert_int_equal(verify(&h, NULL), QB_CRYPTO);
	h = make(1);
	struct head other = make(0); /* a cosignature moved to another head */
	other.size = 78;
	head_sign(&other, service);
	assert_int_equal(head_add(&other, &h.cosigner[0], NULL), QB_OK);
	assert_int_equal(verify(&other, NULL), QB_CRYPTO);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(text_is_exact_both_ways),
	    cmocka_unit_test(other_spellings_are_refused),
	    cmocka_unit_test(quorum_counts_known_custodians_once),
	    cmocka_unit_test(any_change_breaks_a_signature),
	};
	struct qb_error e = {0};
	if (secret_setup(&e) != QB_OK)
		return 1;
	return cmocka_run_group_tests(tests, keys, keys_free);
}
