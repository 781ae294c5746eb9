/* Signed requests that were replayed, kept, altered or made by a stranger; enrolment; who the service thinks it is. */
#include "tests/unit/api/fake.h"

static struct http *service;
static const char slots[] = "/v1/campaigns/fells-spring/slots", holds[] = "/v1/campaigns/fells-spring/holds";

static void expect(int status, const struct spoiled *s, const char *method, const char *path, const char *body)
{
	struct buf answer = {0};
	fake.calls = 0;
	int got = talk_signed(service, ROLE_OPERATOR, method, path, "from=0", body, s, &answer);
	if (got != status || fake.calls != (status == 200))
		fail_msg("%d instead of %d: %s", got, status, text_of(&answer));
	if (status == 401)
		assert_problem(&answer, "unauthorised");
	buf_free(&answer);
}

static void honest_requests_pass(void **state)
{
	(void)state;
	expect(200, NULL, "GET", slots, NULL);
	assert_string_equal(fake.last_party, "operator-one");
	assert_string_equal(fake.last_query, "from=0");
	expect(200, NULL, "POST", holds, "{\"entry\":\"x\"}");
	assert_int_equal(fake.last, R_HOLDS);
}

static void replays_are_refused(void **state)
{
	(void)state;
	struct spoiled s = {.nonce = 77};
	expect(200, &s, "GET", slots, NULL);
	expect(401, &s, "GET", slots, NULL);
	expect(401, &s, "POST", holds, "{}"); /* a nonce is good for one request, whatever it is */
}

static void a_forged_request_uses_no_nonce_up(void **state)
{
	(void)state;
	struct spoiled forged = {.nonce = 78, .query = "from=1"}, honest = {.nonce = 78};
	expect(401, &forged, "GET", slots, NULL);
	expect(200, &honest, "GET", slots, NULL);
}

static void stale_requests_are_refused(void **state)
{
	(void)state;
	expect(200, &(struct spoiled){.created_off_s = -60}, "GET", slots, NULL);
	expect(200, &(struct spoiled){.created_off_s = 60}, "GET", slots, NULL);
	expect(401, &(struct spoiled){.created_off_s = -61}, "GET", slots, NULL);
	expect(401, &(struct spoiled){.created_off_s = 61}, "GET", slots, NULL);
}

static void altered_requests_are_refused(void **state)
{
	(void)state;
	char *digest = wire_content_digest("{\"a\":2}", 7);
	expect(401, &(struct spoiled){.query = "from=1"}, "GET", slots, NULL);
	expect(401, &(struct spoiled){.query = ""}, "GET", slots, NULL);
	expect(401, &(struct spoiled){.path = "/v1/campaigns/fells-autumn/slots"}, "GET", slots, NULL);
	expect(401, &(struct spoiled){.body = "{\"a\":2}"}, "POST", holds, "{\"a\":1}");
	expect(401, &(struct spoiled){.body = "{\"a\":2}", .digest = digest}, "POST", holds, "{\"a\":1}");
	expect(415, &(struct spoiled){.type = "text/plain"}, "POST", holds, "{\"a\":1}");
	/* A name that is also ours, but not the one that was signed. */
	char host[40];
	(void)snprintf(host, sizeof host, "localhost:%d", http_port(service));
	expect(401, &(struct spoiled){.host = host}, "GET", slots, NULL);
	expect(421, &(struct spoiled){.host = "bell.example"}, "GET", slots, NULL);
	/* The same headers under another method of the same path. */
	struct buf answer = {0};
	fake.calls = 0;
	assert_int_equal(talk_signed(service, ROLE_ANALYST, "GET", "/v1/campaigns/c/claims", "", NULL,
	                             &(struct spoiled){.method = "POST", .body = "{}"}, &answer),
	                 401);
	assert_int_equal(fake.calls, 0);
	qb_free(digest);
	buf_free(&answer);
}

static const char *detail_of(const struct buf *answer)
{
	return strstr(text_of(answer), "\"detail\":");
}

static void strangers_and_forgers_read_the_same(void **state)
{
	struct buf stranger = {0}, forger = {0};
	(void)state;
	assert_int_equal(talk_signed(service, 40, "GET", slots, "", NULL, NULL, &stranger), 401);
	assert_int_equal(
	    talk_signed(service, ROLE_OPERATOR, "GET", slots, "", NULL, &(struct spoiled){.query = "from=1"}, &forger),
	    401);
	const char *a = detail_of(&stranger), *b = detail_of(&forger);
	assert_non_null(a);
	assert_non_null(b);
	assert_memory_equal(a, b, strcspn(a, ","));
	buf_free(&stranger);
	buf_free(&forger);
}

static void malformed_signatures_are_refused(void **state)
{
	static const char *const heads[] = {
	    "Signature-Input: qb=()\r\nSignature: qb=:AAAA:\r\n",
	    "Signature-Input: \r\nSignature: \r\n",
	    "Signature-Input: qb=(\"@method\");created=1;keyid=\"00\";alg=\"ed25519\"\r\nSignature: qb=:AAAA:\r\n",
	    "Signature: qb=:AAAA:\r\n",
	};
	struct buf answer = {0};
	(void)state;
	fake.calls = 0;
	for (size_t i = 0; i < sizeof heads / sizeof heads[0]; i++) {
		int status = talk_text(service, "GET %s HTTP/1.1\r\nHost: 127.0.0.1:%d\r\nConnection: close\r\n%s\r\n",
		                       &answer, slots, http_port(service), heads[i]);
		assert_int_equal(status, 401);
		assert_problem(&answer, "unauthorised");
	}
	assert_int_equal(fake.calls, 0);
	buf_free(&answer);
}

static char *enrolment_body(int party_in_entry, const char *type)
{
	struct view_party p;
	char hex[65];
	party_of(party_in_entry, &p);
	hex_encode(hex, p.signing_key, 32);
	return text_printf("{\"entry\":\"{\\\"type\\\":\\\"%s\\\",\\\"signing_key\\\":\\\"%s\\\"}\",\"code\":\"c\"}",
	                   type, hex);
}

static void enrolling_needs_the_new_key_itself(void **state)
{
	struct buf answer = {0};
	struct view_party p;
	(void)state;
	char *own = enrolment_body(40, "enrolment"), *other = enrolment_body(41, "enrolment"),
	     *invitation = enrolment_body(40, "invitation");
	party_of(40, &p);
	fake.calls = 0;
	assert_int_equal(talk_signed(service, 40, "POST", "/v1/parties", "", own, NULL, &answer), 200);
	assert_int_equal(fake.calls, 1);
	assert_memory_equal(fake.last_key, p.signing_key, 32);
	assert_string_equal(fake.last_party, "");
	assert_int_equal(talk_signed(service, 40, "POST", "/v1/parties", "", other, NULL, &answer), 401);
	assert_int_equal(talk_signed(service, 40, "POST", "/v1/parties", "", invitation, NULL, &answer), 401);
	/* A key that brings itself along gets no further than this route. */
	assert_int_equal(talk_signed(service, 40, "POST", "/v1/campaigns", "", own, NULL, &answer), 401);
	assert_int_equal(fake.calls, 1);
	qb_free(own);
	qb_free(other);
	qb_free(invitation);
	buf_free(&answer);
}

static int start(void **state)
{
	struct http_settings s = fake_settings();
	(void)state;
	service = fake_start(&s);
	return 0;
}

static int stop(void **state)
{
	(void)state;
	http_stop(&service);
	return 0;
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(honest_requests_pass),
	    cmocka_unit_test(replays_are_refused),
	    cmocka_unit_test(a_forged_request_uses_no_nonce_up),
	    cmocka_unit_test(stale_requests_are_refused),
	    cmocka_unit_test(altered_requests_are_refused),
	    cmocka_unit_test(strangers_and_forgers_read_the_same),
	    cmocka_unit_test(malformed_signatures_are_refused),
	    cmocka_unit_test(enrolling_needs_the_new_key_itself),
	};
	return cmocka_run_group_tests(tests, start, stop);
}
