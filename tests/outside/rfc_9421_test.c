/*
 * HTTP Message Signatures against RFC 9421, appendix B.2.6 (Ed25519 over a request), with the key of B.1.4 and the
 * Content-Digest of B.2 (RFC 9530). Values as printed in the RFC.
 */
#include "server/base/alloc.h"
#include "server/base/text.h"
#include "server/wire/request.h"
#include "tests/near.h"

#include <string.h>

static const char seed_base64[] = "n4Ni+HpISpVObnQMW0wOhCKROaIKqKtW/2ZYb2p9KcU=";
static const char public_base64[] = "JrQLj5P/89iXES9+vFgrIy29clF9CC/oPPsw3c5D0bs=";
static const char signature_base64[] =
    "wqcAqbmYJ2ji2glfAMaRy4gruYYnx2nEFN2HN6jrnDnQCK1u02Gb04v9EDgwUPiu4A0w6vuQv5lIp5WPpBKRCw==";
static const char params[] =
    "(\"date\" \"@method\" \"@path\" \"@authority\" \"content-type\" \"content-length\");created=1618884473"
    ";keyid=\"test-key-ed25519\"";
static const char base_expected[] =
    "\"date\": Tue, 20 Apr 2021 02:07:55 GMT\n"
    "\"@method\": POST\n"
    "\"@path\": /foo\n"
    "\"@authority\": example.com\n"
    "\"content-type\": application/json\n"
    "\"content-length\": 18\n"
    "\"@signature-params\": (\"date\" \"@method\" \"@path\" \"@authority\" \"content-type\" "
    "\"content-length\");created=1618884473;keyid=\"test-key-ed25519\"";

static void the_example_is_reproduced(void **state)
{
	const char *pairs[] = {"date",
	                       "Tue, 20 Apr 2021 02:07:55 GMT",
	                       "@method",
	                       "POST",
	                       "@path",
	                       "/foo",
	                       "@authority",
	                       "example.com",
	                       "content-type",
	                       "application/json",
	                       "content-length",
	                       "18",
	                       NULL,
	                       NULL};
	struct buf base = {0}, seed = {0}, public = {0}, want = {0};
	uint8_t signature[64], key[32];
	(void)state;
	wire_signature_base(pairs, params, &base);
	assert_string_equal((char *)base.data, base_expected);
	assert_true(base64_decode(seed_base64, &seed) && base64_decode(public_base64, &public) &&
	            base64_decode(signature_base64, &want));
	struct secret *s = secret_from(seed.data, seed.len);
	sign_public(s, key);
	assert_memory_equal(key, public.data, 32);
	sign_bytes(s, base.data, base.len, signature);
	assert_int_equal(want.len, 64);
	assert_memory_equal(signature, want.data, 64);
	assert_true(sign_verify(key, base.data, base.len, want.data));
	base.data[0] ^= 1;
	assert_false(sign_verify(key, base.data, base.len, want.data));
	secret_free(&s);
	buf_free(&base);
	buf_free(&seed);
	buf_free(&public);
	buf_free(&want);
}

static void the_digest_is_reproduced(void **state)
{
	static const char body[] = "{\"hello\": \"world\"}";
	(void)state;
	char *digest = wire_content_digest(body, strlen(body));
	assert_string_equal(digest,
	                    "sha-512=:WZDPaVn/7XgHaAy8pmojAkGWoRx2UFChF41A2svX+TaPm+AbwAgBWnrIiYllu7BNNyealdVLvRwE"
	                    "mTHWXvJwew==:");
	qb_free(digest);
}

/* Our own profile: what is signed verifies, and every change is refused. */
static void changes_are_refused(void **state)
{
	struct wire_request r = {.method = "POST",
	                         .authority = "127.0.0.1:8787",
	                         .path = "/v1/campaigns/fells/holds",
	                         .query = "a=1",
	                         .content_type = "application/json",
	                         .body = "{}",
	                         .body_n = 2};
	struct secret *s = secret_random(32);
	uint8_t key[32], id[16], nonce[16] = {7};
	struct wire_signature_headers h;
	struct wire_claimed c;
	(void)state;
	sign_public(s, key);
	sign_key_id(key, id);
	wire_request_sign(&r, s, id, 1000, nonce, &h);
	assert_int_equal(wire_request_parse(h.signature_input, h.signature, true, &c, NULL), QB_OK);
	assert_memory_equal(c.key_id, id, 16);
	assert_memory_equal(c.nonce, nonce, 16);
	assert_int_equal(wire_request_verify(&r, &c, h.content_digest, key, 1000, NULL), QB_OK);
	assert_int_equal(wire_request_verify(&r, &c, h.content_digest, key, 1060, NULL), QB_OK);
	assert_int_equal(wire_request_verify(&r, &c, h.content_digest, key, 1061, NULL), QB_CRYPTO);
	assert_int_equal(wire_request_verify(&r, &c, h.content_digest, key, 939, NULL), QB_CRYPTO);
	struct wire_request changed[] = {r, r, r, r, r, r};
	changed[0].method = "GET";
	changed[1].authority = "127.0.0.1:8788";
	changed[2].path = "/v1/campaigns/fells/stops";
	changed[3].query = "a=2";
	changed[4].content_type = "text/plain";
	changed[5].body = "[]";
	for (size_t i = 0; i < 6; i++)
		assert_int_equal(wire_request_verify(&changed[i], &c, h.content_digest, key, 1000, NULL), QB_CRYPTO);
	/* a body exchanged together with its digest */
	char *other = wire_content_digest("[]", 2);
	assert_int_equal(wire_request_verify(&changed[5], &c, other, key, 1000, NULL), QB_CRYPTO);
	qb_free(other);
	/* a signature made for a body does not parse as one without */
	assert_int_equal(wire_request_parse(h.signature_input, h.signature, false, &c, NULL), QB_FORMAT);
	wire_signature_headers_free(&h);
	secret_free(&s);
}

static void headers_are_parsed_strictly(void **state)
{
	static const char *const bad[] = {
	    "", "qb=()", "qb=(\"@method\");created=1", "sig=(\"@method\" \"@authority\" \"@path\" \"@query\")",
	    "qb=(\"@method\" \"@authority\" \"@path\" \"@query\");created=-1;nonce=\"00\""};
	struct wire_claimed c;
	(void)state;
	for (size_t i = 0; i < sizeof bad / sizeof bad[0]; i++)
		assert_int_equal(wire_request_parse(bad[i], "qb=:AAAA:", false, &c, NULL), QB_FORMAT);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(the_example_is_reproduced),
	    cmocka_unit_test(the_digest_is_reproduced),
	    cmocka_unit_test(changes_are_refused),
	    cmocka_unit_test(headers_are_parsed_strictly),
	};
	return secret_setup(NULL) == QB_OK ? cmocka_run_group_tests(tests, NULL, NULL) : 1;
}
