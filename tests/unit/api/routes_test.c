/* Default deny, from the table of routes: a new route can't be forgotten here. */
#include "tests/unit/api/fake.h"

static struct http *service;

/* The pattern's {words} replaced by a plain segment. */
static void path_of(const struct wire_route *r, char *out, size_t size)
{
	size_t n = 0;
	for (const char *p = r->path; *p != '\0' && n + 1 < size;) {
		if (*p == '{') {
			out[n++] = '7';
			p = strchr(p, '}') + 1;
		} else {
			out[n++] = *p++;
		}
	}
	out[n] = '\0';
}

static bool answered_here(const struct wire_route *r)
{
	return r->id == R_EVENTS || r->id == R_METRICS || r->id == R_HEALTHZ || r->id == R_READYZ;
}

static bool is_public(const struct wire_route *r)
{
	return (r->roles & ROLE_BIT(ROLE_NONE)) != 0 && r->id != R_PARTIES_POST;
}

static void nobody_gets_through_unsigned(void **state)
{
	struct buf answer = {0};
	int denied = 0;
	(void)state;
	for (int i = 0; i < R_COUNT; i++) {
		const struct wire_route *r = &wire_routes()[i];
		char path[300];
		if (is_public(r))
			continue;
		path_of(r, path, sizeof path);
		fake.calls = 0;
		const char *body =
		    r->body_limit > 0 ? "Content-Type: application/json\r\nContent-Length: 2\r\n\r\n{}" : "\r\n";
		int status = talk_text(service, "%s %s HTTP/1.1\r\nHost: 127.0.0.1:%d\r\nConnection: close\r\n%s",
		                       &answer, r->method, path, http_port(service), body);
		if (status != 401 || fake.calls != 0)
			fail_msg("%s %s unsigned: %d, %d calls", r->method, path, status, fake.calls);
		assert_problem(&answer, "unauthorised");
		assert_non_null(strstr(text_of(&answer), "\r\nWWW-Authenticate: Signature\r\n"));
		denied++;
	}
	assert_true(denied > 30);
	buf_free(&answer);
}

static void only_the_roles_of_the_table_get_through(void **state)
{
	struct buf answer = {0};
	(void)state;
	for (int i = 0; i < R_COUNT; i++) {
		const struct wire_route *r = &wire_routes()[i];
		char path[300];
		if (is_public(r))
			continue;
		path_of(r, path, sizeof path);
		for (int role = ROLE_ADMINISTRATOR; role <= ROLE_AUDITOR; role++) {
			bool may = (r->roles & ROLE_BIT(role)) != 0;
			fake.calls = 0;
			fake.n_nonces = 0;
			int status = talk_signed(service, role, r->method, path, "", r->body_limit > 0 ? "{}" : NULL,
			                         NULL, &answer);
			if (status != (may ? 200 : 403) || fake.calls != (may ? 1 : 0) || (may && fake.last != r->id))
				fail_msg("%s %s as %s: %d, %d calls", r->method, path,
				         wire_role_word((enum wire_role)role), status, fake.calls);
			if (!may)
				assert_problem(&answer, "refused");
		}
	}
	buf_free(&answer);
}

static void public_reads_need_no_signature(void **state)
{
	struct buf answer = {0};
	(void)state;
	for (int i = 0; i < R_COUNT; i++) {
		const struct wire_route *r = &wire_routes()[i];
		if (!is_public(r) || r->id == R_EVENTS)
			continue;
		fake.calls = 0;
		int status = talk_text(service, "%s %s HTTP/1.1\r\nHost: localhost:%d\r\nConnection: close\r\n\r\n",
		                       &answer, r->method, r->path, http_port(service));
		if (status != 200 || fake.calls != (answered_here(r) ? 0 : 1))
			fail_msg("%s %s: %d, %d calls", r->method, r->path, status, fake.calls);
	}
	buf_free(&answer);
}

static void bodies_beyond_the_limit_are_refused_early(void **state)
{
	struct buf answer = {0}, b = {0};
	(void)state;
	for (int i = 0; i < R_COUNT; i++) {
		const struct wire_route *r = &wire_routes()[i];
		char path[300];
		path_of(r, path, sizeof path);
		buf_clear(&b);
		/* The body itself is never sent: the answer must come from the header alone. */
		buf_printf(&b,
		           "%s %s HTTP/1.1\r\nHost: 127.0.0.1:%d\r\nSignature: qb=:x:\r\nSignature-Input: "
		           "qb=x\r\nContent-Type: application/json\r\nContent-Length: %zu\r\n\r\n",
		           r->method, path, http_port(service),
		           r->body_limit + ((r->body_limit > 300000) ? 1 : 300000));
		int status = talk(service, b.data, b.len, &answer);
		if (status != 413)
			fail_msg("%s %s: %d", r->method, path, status);
		assert_problem(&answer, "too-large");
	}
	buf_free(&b);
	buf_free(&answer);
}

static void other_methods_are_not_known(void **state)
{
	static const char *const methods[] = {"PUT", "DELETE", "PATCH", "OPTIONS", "HEAD", "TRACE", "QUIETBELLISH"};
	struct buf answer = {0};
	(void)state;
	for (size_t i = 0; i < sizeof methods / sizeof methods[0]; i++) {
		int status =
		    talk_text(service, "%s /v1/parties HTTP/1.1\r\nHost: 127.0.0.1:%d\r\nConnection: close\r\n\r\n",
		              &answer, methods[i], http_port(service));
		if (status != 405)
			fail_msg("%s: %d", methods[i], status);
		assert_non_null(strstr(text_of(&answer), "\r\nAllow: GET, POST\r\n"));
	}
	assert_int_equal(talk_text(service, "GET /v1/clock HTTP/1.1\r\nHost: 127.0.0.1:%d\r\nConnection: close\r\n\r\n",
	                           &answer, http_port(service)),
	                 405);
	assert_problem(&answer, "not-found");
	assert_non_null(strstr(text_of(&answer), "\r\nAllow: POST\r\n"));
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
	    cmocka_unit_test(nobody_gets_through_unsigned),
	    cmocka_unit_test(only_the_roles_of_the_table_get_through),
	    cmocka_unit_test(public_reads_need_no_signature),
	    cmocka_unit_test(bodies_beyond_the_limit_are_refused_early),
	    cmocka_unit_test(other_methods_are_not_known),
	};
	return cmocka_run_group_tests(tests, start, stop);
}
