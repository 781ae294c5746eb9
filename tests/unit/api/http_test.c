/* Requests that no decent client sends: framing, targets, headers, sizes, slowness; and the layer's own answers. */
#include <fcntl.h>

#include "tests/unit/api/fake.h"

static struct http *service;

static void refused(int status, const char *target, const char *headers, const char *body)
{
	struct buf answer = {0}, b = {0};
	fake.calls = 0;
	buf_printf(
	    &b, "POST %s HTTP/1.1\r\nHost: 127.0.0.1:%d\r\nConnection: close\r\nSignature: a\r\nSignature-Input: b\r\n",
	    target, http_port(service));
	buf_printf(&b, "Content-Type: application/json\r\n%s\r\n%s", headers, body);
	int got = talk(service, b.data, b.len, &answer);
	if (got != status || fake.calls != 0)
		fail_msg("%s: %d instead of %d: %s", target, got, status, text_of(&answer));
	buf_free(&b);
	buf_free(&answer);
}

static void ambiguous_framing_is_refused(void **state)
{
	(void)state;
	refused(400, "/v1/clock", "Content-Length: 2\r\nContent-Length: 3\r\n", "{}1");
	refused(400, "/v1/clock", "Content-Length: 2\r\nContent-Length: 2\r\n", "{}");
	refused(400, "/v1/clock", "Content-Length: 2\r\nTransfer-Encoding: chunked\r\n", "2\r\n{}\r\n0\r\n\r\n");
	refused(411, "/v1/clock", "Transfer-Encoding: chunked\r\n", "2\r\n{}\r\n0\r\n\r\n");
	refused(400, "/v1/clock", "Content-Length: +2\r\n", "{}");
	refused(400, "/v1/clock", "Content-Length: 2\r\nHost: other\r\n", "{}");
	refused(400, "/v1/clock", "Content-Length: 2\r\nSignature: c\r\n", "{}");
	refused(400, "/v1/clock", "", "");
}

static void disguised_paths_are_refused(void **state)
{
	static const char *const targets[] = {
	    "/v1/clock%00",     "/v1%2Fclock",          "/v1%2fclock",     "/v1/%63lock",  "/v1/campaigns/../clock",
	    "/v1/campaigns/..", "/v1/campaigns/./seal", "/v1/clock?x=%00", "/v1/clock#x",  "http://127.0.0.1/v1/clock",
	    "v1/clock",         "/v1/clock;x",          "/v1\\clock",      "/v1/cl\x80ock"};
	(void)state;
	for (size_t i = 0; i < sizeof targets / sizeof targets[0]; i++)
		refused(400, targets[i], "Content-Length: 2\r\n", "{}");
	refused(404, "//v1/clock", "Content-Length: 2\r\n", "{}");
	refused(404, "/v1/clock/", "Content-Length: 2\r\n", "{}");
	refused(404, "/V1/clock", "Content-Length: 2\r\n", "{}");
	char longer[1200] = "/v1/";
	memset(longer + 4, 'a', 1100);
	refused(414, longer, "Content-Length: 2\r\n", "{}");
}

/* The library cuts the target at a zero byte; then what is left must be what was signed. */
static void a_zero_byte_in_the_target_is_no_way_in(void **state)
{
	struct buf answer = {0}, b = {0};
	(void)state;
	fake.calls = 0;
	signed_text(service, ROLE_OPERATOR, "GET", "/v1/campaigns/c/slots", "", NULL,
	            &(struct spoiled){.path = "/v1/campaigns/c_/slots"}, &b);
	char *mark = strchr((char *)b.data, '_');
	assert_non_null(mark);
	*mark = '\0';
	int status = talk(service, b.data, b.len, &answer);
	assert_true(status >= 400 || status == 0);
	assert_int_equal(fake.calls, 0);
	buf_free(&b);
	buf_free(&answer);
}

static void headers_cannot_be_injected(void **state)
{
	struct buf answer = {0};
	(void)state;
	/* An escaped line end in path or query comes back nowhere. */
	assert_int_equal(
	    talk_text(service, "GET /v1/%%0d%%0aX-Evil:1 HTTP/1.1\r\nHost: 127.0.0.1:%d\r\nConnection: close\r\n\r\n",
	              &answer, http_port(service)),
	    400);
	assert_null(strstr(text_of(&answer), "Evil"));
	assert_int_equal(
	    talk_text(service,
	              "GET /v1/service?a=%%0d%%0aX-Evil:1 HTTP/1.1\r\nHost: 127.0.0.1:%d\r\nConnection: close\r\n\r\n",
	              &answer, http_port(service)),
	    200);
	assert_null(strstr(text_of(&answer), "Evil"));
	refused(400, "/v1/clock",
	        "Content-Length: 2\r\nX-Odd: a\x01"
	        "b\r\n",
	        "{}");
	/* Too many header bytes: the library refuses them by itself. */
	struct buf b = {0};
	buf_printf(&b, "GET /v1/service HTTP/1.1\r\nHost: 127.0.0.1:%d\r\nX-Long: ", http_port(service));
	for (int i = 0; i < 70000; i++)
		buf_text(&b, "a");
	buf_text(&b, "\r\n\r\n");
	fake.calls = 0;
	int status = talk(service, b.data, b.len, &answer);
	assert_true((status >= 400 && status < 500) || status == 0);
	assert_int_equal(fake.calls, 0);
	buf_free(&b);
	buf_free(&answer);
}

static void answers_say_nothing_of_the_content(void **state)
{
	struct buf answer = {0};
	(void)state;
	assert_int_equal(talk_signed(service, ROLE_OPERATOR, "GET", "/v1/campaigns/c/slots/5", "", NULL, NULL, &answer),
	                 200);
	assert_non_null(strstr(text_of(&answer), "\r\nContent-Type: application/json\r\n"));
	assert_non_null(strstr(text_of(&answer), "\r\nCache-Control: no-store\r\n"));
	assert_non_null(strstr(text_of(&answer), "\r\nX-Content-Type-Options: nosniff\r\n"));
	assert_non_null(strstr(text_of(&answer), "{\"done\":true}"));
	assert_null(strstr(text_of(&answer), "ETag"));
	assert_null(strstr(text_of(&answer), "Last-Modified"));
	assert_null(strstr(text_of(&answer), "Content-Encoding"));
	buf_free(&answer);
}

static void refusals_of_use_cases_become_problems(void **state)
{
	static const struct {
		enum qb_status status;
		int http_status;
		const char *word;
	} cases[] = {{QB_NO, 422, "refused"},          {QB_FORMAT, 400, "format"},   {QB_RANGE, 400, "range"},
	             {QB_CRYPTO, 400, "not-verified"}, {QB_REFUSED, 403, "refused"}, {QB_CONFLICT, 409, "conflict"},
	             {QB_NOT_FOUND, 404, "not-found"}, {QB_IO, 500, "fault"},        {QB_FAULT, 500, "fault"}};
	struct buf answer = {0};
	(void)state;
	for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
		fake.answer = cases[i].status;
		assert_int_equal(
		    talk_signed(service, ROLE_DRIVER, "GET", "/v1/campaigns/c/recipes/4/key", "", NULL, NULL, &answer),
		    cases[i].http_status);
		assert_problem(&answer, cases[i].word);
		assert_non_null(strstr(text_of(&answer), "\"instance\":\"urn:quietbell:request:"));
		assert_null(strstr(text_of(&answer), "until_gps"));
		/* Our own faults keep their reasons for the log. */
		assert_int_equal(strstr(text_of(&answer), "/secret/path") == NULL, cases[i].http_status == 500);
	}
	fake.answer = QB_CONFLICT;
	fake.until_gps_ns = INT64_C(1456789012500000000);
	assert_int_equal(
	    talk_signed(service, ROLE_DRIVER, "GET", "/v1/campaigns/c/recipes/4/key", "", NULL, NULL, &answer), 409);
	assert_non_null(strstr(text_of(&answer), "\"until_gps\":\"1456789012.5\""));
	fake.answer = QB_OK;
	fake.until_gps_ns = 0;
	buf_free(&answer);
}

static void bodies_must_be_json(void **state)
{
	struct buf answer = {0};
	(void)state;
	fake.calls = 0;
	assert_int_equal(talk_signed(service, ROLE_OPERATOR, "POST", "/v1/campaigns/c/holds", "", "{\"a\":1,\"a\":2}",
	                             NULL, &answer),
	                 400);
	assert_problem(&answer, "format");
	assert_int_equal(talk_signed(service, ROLE_OPERATOR, "POST", "/v1/campaigns/c/holds", "", "{", NULL, &answer),
	                 400);
	assert_int_equal(fake.calls, 0);
	buf_free(&answer);
}

static int64_t now_ms(void)
{
	struct timespec t;
	(void)clock_gettime(CLOCK_MONOTONIC, &t);
	return (int64_t)t.tv_sec * 1000 + t.tv_nsec / 1000000;
}

/* A byte every 100 ms never is inactive for long; the whole request has an end nevertheless. */
static void trickle(const char *head, const char *repeated)
{
	struct http_settings s = fake_settings();
	s.request_ms = 600;
	struct http *quick = fake_start(&s);
	int fd = connect_to(quick);
	char buf[256];
	int64_t began = now_ms();
	int n = snprintf(buf, sizeof buf, head, http_port(quick));
	send_all(fd, buf, (size_t)n);
	bool closed = false;
	for (int i = 0; i < 60 && !closed; i++) {
		struct timespec pause = {0, 100000000};
		(void)nanosleep(&pause, NULL);
		closed = send(fd, repeated, strlen(repeated), MSG_NOSIGNAL) < 0 ||
		         recv(fd, buf, sizeof buf, MSG_DONTWAIT) == 0;
	}
	assert_true(closed);
	assert_true(now_ms() - began < 3000);
	assert_int_equal(fake.calls, 0);
	(void)close(fd);
	http_stop(&quick);
}

static void slow_headers_are_cut(void **state)
{
	(void)state;
	trickle("GET /v1/service HTTP/1.1\r\nHost: 127.0.0.1:%d\r\nX-Slow: ", "a");
}

static void slow_bodies_are_cut(void **state)
{
	(void)state;
	trickle("POST /v1/clock HTTP/1.1\r\nHost: 127.0.0.1:%d\r\nSignature: a\r\nSignature-Input: b\r\nContent-Type: "
	        "application/json\r\nContent-Length: 4000\r\n\r\n",
	        " ");
}

static void memory_for_bodies_is_bounded(void **state)
{
	struct http_settings s = fake_settings();
	struct buf answer = {0};
	(void)state;
	s.body_memory_bytes = 1000;
	struct http *small = fake_start(&s);
	char body[1200];
	memset(body, ' ', sizeof body - 1);
	body[0] = '{';
	body[sizeof body - 2] = '}';
	body[sizeof body - 1] = '\0';
	assert_int_equal(talk_signed(small, ROLE_OPERATOR, "POST", "/v1/campaigns/c/holds", "", body, NULL, &answer),
	                 503);
	assert_problem(&answer, "busy");
	assert_int_equal(talk_signed(small, ROLE_OPERATOR, "POST", "/v1/campaigns/c/holds", "", "{}", NULL, &answer),
	                 200);
	/* What was reserved is given back, again and again. */
	body[900] = '}';
	body[901] = '\0';
	for (int i = 0; i < 4; i++)
		assert_int_equal(
		    talk_signed(small, ROLE_OPERATOR, "POST", "/v1/campaigns/c/holds", "", body, NULL, &answer), 200);
	http_stop(&small);
	buf_free(&answer);
}

/* Reads until the text is there or ten seconds passed. */
static bool read_until(int fd, const char *text, struct buf *got)
{
	char part[512];
	while (got->len == 0 || strstr((const char *)got->data, text) == NULL) {
		ssize_t n = recv(fd, part, sizeof part, 0);
		if (n <= 0)
			return false;
		buf_put(got, part, (size_t)n);
	}
	return true;
}

static int open_stream(void)
{
	char text[120];
	int fd = connect_to(service);
	int n =
	    snprintf(text, sizeof text, "GET /v1/events HTTP/1.1\r\nHost: 127.0.0.1:%d\r\n\r\n", http_port(service));
	send_all(fd, text, (size_t)n);
	return fd;
}

static void change(uint64_t size, int64_t now_gps_ns)
{
	pthread_mutex_lock(&fake.lock);
	fake.size = size;
	fake.now_gps_ns = now_gps_ns;
	pthread_cond_broadcast(&fake.changed);
	pthread_mutex_unlock(&fake.lock);
}

static void streams_tell_size_and_clock(void **state)
{
	struct buf a = {0}, b = {0}, answer = {0};
	(void)state;
	int one = open_stream(), two = open_stream();
	assert_true(
	    read_until(one, "event: ledger\ndata: {\"size\":0}\n\nevent: clock\ndata: {\"now_gps\":\"0\"}\n\n", &a));
	assert_non_null(strstr((const char *)a.data, "\r\nContent-Type: text/event-stream\r\n"));
	assert_true(read_until(two, "event: clock", &b));
	/* The third is one too many. */
	assert_int_equal(
	    talk_text(service, "GET /v1/events HTTP/1.1\r\nHost: 127.0.0.1:%d\r\n\r\n", &answer, http_port(service)),
	    503);
	change(9, 5 * NS_PER_S);
	assert_true(
	    read_until(one, "event: ledger\ndata: {\"size\":9}\n\nevent: clock\ndata: {\"now_gps\":\"5\"}\n\n", &a));
	assert_true(read_until(two, "{\"size\":9}", &b));
	change(9, 8 * NS_PER_S);
	assert_true(read_until(one, "{\"now_gps\":\"8\"}", &a));
	/* A client that went away makes room as soon as there is news. */
	(void)close(two);
	int three = -1;
	for (int i = 0; i < 50 && three < 0; i++) {
		change(10 + (uint64_t)i, 8 * NS_PER_S);
		struct timespec pause = {0, 100000000};
		(void)nanosleep(&pause, NULL);
		int fd = open_stream();
		buf_clear(&b);
		if (read_until(fd, "\r\n\r\n", &b) && strstr((const char *)b.data, "HTTP/1.1 200") != NULL)
			three = fd;
		else
			(void)close(fd);
	}
	assert_true(three >= 0);
	(void)close(one);
	(void)close(three);
	change(0, 0);
	buf_free(&a);
	buf_free(&b);
	buf_free(&answer);
}

static void draining_ends_streams_and_lets_work_end(void **state)
{
	struct http_settings s = fake_settings();
	struct buf b = {0};
	char text[120];
	(void)state;
	struct http *h = fake_start(&s);
	int fd = connect_to(h);
	int n = snprintf(text, sizeof text, "GET /v1/events HTTP/1.1\r\nHost: 127.0.0.1:%d\r\n\r\n", http_port(h));
	send_all(fd, text, (size_t)n);
	assert_true(read_until(fd, "event: clock", &b));
	int64_t began = now_ms();
	http_drain(h, 5000);
	assert_true(now_ms() - began < 4000);
	assert_true(read_until(fd, "0\r\n\r\n", &b)); /* the last chunk: an end, not a cut */
	http_stop(&h);
	assert_null(h);
	(void)close(fd);
	buf_free(&b);
}

static void metrics_count_routes_but_no_hidden_ones(void **state)
{
	struct buf answer = {0};
	(void)state;
	for (int i = 0; i < 3; i++)
		assert_int_equal(
		    talk_signed(service, ROLE_OPERATOR, "GET", "/v1/campaigns/c/slots", "", NULL, NULL, &answer), 200);
	assert_int_equal(talk_signed(service, ROLE_ANALYST, "POST", "/v1/campaigns/c/claims", "", "{}", NULL, &answer),
	                 200);
	assert_int_equal(
	    talk_signed(service, ROLE_REVIEWER, "POST", "/v1/campaigns/c/openings", "", "{}", NULL, &answer), 200);
	assert_int_equal(
	    talk_text(service, "GET /metrics HTTP/1.1\r\nHost: anything\r\nConnection: close\r\n\r\n%s", &answer, ""),
	    200);
	const char *text = text_of(&answer);
	assert_non_null(
	    strstr(text, "\r\nContent-Type: application/openmetrics-text; version=1.0.0; charset=utf-8\r\n"));
	assert_non_null(strstr(
	    text, "quietbell_requests_total{method=\"GET\",route=\"/v1/campaigns/{c}/slots\",status=\"200\"} 3\n"));
	assert_null(strstr(text, "route=\"/v1/campaigns/{c}/claims"));
	assert_null(strstr(text, "route=\"/v1/campaigns/{c}/openings"));
	assert_non_null(strstr(text, "\n# EOF\n"));
	buf_free(&answer);
}

static void one_log_line_a_request_without_content(void **state)
{
	struct http_settings s = fake_settings();
	struct buf answer = {0};
	int ends[2];
	char line[2000];
	(void)state;
	assert_int_equal(pipe(ends), 0);
	struct log log = {ends[1], LOG_INFO_, {fake_now, NULL}};
	s.log = &log;
	struct http *h = fake_start(&s);
	assert_int_equal(talk_signed(h, ROLE_OPERATOR, "POST", "/v1/campaigns/fells-spring/holds", "word=hidden",
	                             "{\"why\":\"quiet\"}", NULL, &answer),
	                 200);
	http_stop(&h);
	(void)close(ends[1]);
	ssize_t n = read(ends[0], line, sizeof line - 1);
	assert_true(n > 0);
	line[n] = '\0';
	assert_ptr_equal(strchr(line, '\n'), line + n - 1);
	assert_non_null(strstr(line, " event=request "));
	assert_non_null(strstr(line, " method=POST route=/v1/campaigns/{c}/holds status=200 duration_ms="));
	assert_non_null(strstr(line, " party=operator-one\n"));
	assert_null(strstr(line, "hidden"));
	assert_null(strstr(line, "quiet"));
	assert_null(strstr(line, "fells-spring"));
	(void)close(ends[0]);
	buf_free(&answer);
}

static void a_taken_port_is_a_clear_error(void **state)
{
	struct http_settings s = fake_settings();
	struct http *second;
	struct qb_error e = {0};
	(void)state;
	s.port = http_port(service);
	assert_int_equal(http_start(&s, &second, &e), QB_IO);
	assert_null(second);
	assert_non_null(strstr(e.what, "can't listen"));
	e = (struct qb_error){0};
	s.host = "no-address.example";
	assert_int_equal(http_start(&s, &second, &e), QB_IO);
	e = (struct qb_error){0};
	s = fake_settings();
	s.tls_certificate = s.tls_key = "not PEM";
	assert_int_equal(http_start(&s, &second, &e), QB_FORMAT);
	assert_null(second);
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
	    cmocka_unit_test(ambiguous_framing_is_refused),
	    cmocka_unit_test(disguised_paths_are_refused),
	    cmocka_unit_test(a_zero_byte_in_the_target_is_no_way_in),
	    cmocka_unit_test(headers_cannot_be_injected),
	    cmocka_unit_test(answers_say_nothing_of_the_content),
	    cmocka_unit_test(refusals_of_use_cases_become_problems),
	    cmocka_unit_test(bodies_must_be_json),
	    cmocka_unit_test(slow_headers_are_cut),
	    cmocka_unit_test(slow_bodies_are_cut),
	    cmocka_unit_test(memory_for_bodies_is_bounded),
	    cmocka_unit_test(streams_tell_size_and_clock),
	    cmocka_unit_test(draining_ends_streams_and_lets_work_end),
	    cmocka_unit_test(metrics_count_routes_but_no_hidden_ones),
	    cmocka_unit_test(one_log_line_a_request_without_content),
	    cmocka_unit_test(a_taken_port_is_a_clear_error),
	};
	return cmocka_run_group_tests(tests, start, stop);
}
