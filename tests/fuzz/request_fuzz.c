/* The signature headers of a request (RFC 9421): no two header values claim one thing, and only the signed ones verify.
 */
#include "tests/fuzz/parties_fixed.h"

#include "server/base/alloc.h"
#include "server/base/text.h"
#include "server/wire/request.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
	static struct wire_signature_headers valid;
	static uint8_t nonce[16] = {7}, id[16];
	struct wire_request r = {.method = "POST",
	                         .authority = "127.0.0.1:1",
	                         .path = "/v1/a",
	                         .query = "?",
	                         .content_type = "application/json",
	                         .body = "{}",
	                         .body_n = 2};
	struct wire_claimed claimed;
	struct buf input = {0}, signature = {0}, whole = {0};
	fixed_parties();
	if (valid.signature == NULL) {
		sign_key_id(fixed_pub[0].sign, id);
		wire_request_sign(&r, fixed_key[0].seed, id, 1800000000, nonce, &valid);
	}
	buf_text(&whole, valid.signature_input);
	bool same = fixed_overlay(&whole, data, size, &input);
	buf_u8(&input, 0);
	buf_clear(&whole);
	buf_text(&whole, valid.signature);
	same = fixed_overlay(&whole, data, size, &signature) && same;
	buf_u8(&signature, 0);
	if (wire_request_parse((const char *)input.data, valid.signature, true, &claimed, NULL) == QB_OK &&
	    wire_request_verify(&r, &claimed, valid.content_digest, fixed_pub[0].sign, 1800000000, NULL) == QB_OK)
		CHECK(strcmp((const char *)input.data, valid.signature_input) == 0);
	if (wire_request_parse(valid.signature_input, (const char *)signature.data, true, &claimed, NULL) == QB_OK &&
	    wire_request_verify(&r, &claimed, valid.content_digest, fixed_pub[0].sign, 1800000000, NULL) == QB_OK)
		CHECK(strcmp((const char *)signature.data, valid.signature) == 0);
	(void)same;
	buf_free(&input);
	buf_free(&signature);
	buf_free(&whole);
	return 0;
}
