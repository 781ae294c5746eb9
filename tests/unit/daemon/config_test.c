/* The configuration: defaults, one clear line for each bad value, unsafe combinations; and that the manual fits. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <string.h>
#include <cmocka.h>

#include "server/base/clock.h"
#include "server/base/log.h"
#include "server/daemon/config.h"
#include "server/daemon/man.h"

static enum qb_status parse(const char *text, struct config *c, struct qb_error *e)
{
	*e = (struct qb_error){0};
	return config_parse(text, strlen(text), "q.yaml", c, e);
}

static void defaults_are_the_tables(void **state)
{
	struct config c;
	struct qb_error e;
	(void)state;
	assert_int_equal(parse("data: /var/lib/quietbell\n", &c, &e), QB_OK);
	assert_string_equal(c.data, "/var/lib/quietbell");
	assert_string_equal(c.host, "127.0.0.1");
	assert_int_equal(c.port, 8787);
	assert_true(c.loopback);
	assert_null(c.tls_certificate);
	assert_null(c.authority[0]);
	assert_int_equal(c.behind_proxy, 0);
	assert_int_equal(c.clock, CONFIG_CLOCK_SYSTEM);
	assert_int_equal(c.rehearsal_seed, -1);
	assert_int_equal(c.log_level, LOG_INFO_);
	assert_int_equal(c.connections, 256);
	assert_int_equal(c.request_ns, 60 * NS_PER_S);
	assert_int_equal(c.answer_ns, 600 * NS_PER_S);
	config_free(&c);
	assert_null(c.data);
}

static void every_key_is_read(void **state)
{
	struct config c;
	struct qb_error e;
	(void)state;
	enum qb_status st =
	    parse("data: d\n"
	          "listen: '[::1]:0'\n"
	          "tls: {certificate: c.pem, key: k.pem}\n"
	          "behind_proxy: true\n"
	          "authority: [bell.example, 'bell.example:8787']\n"
	          "clock: rehearsal\n"
	          "rehearsal_seed: 7\n"
	          "log: {level: warning}\n"
	          "limits: {connections: 64, event_streams: 8, body_bytes: 70000, body_memory_bytes: 2000000,\n"
	          "         request: 20 s, answer: 2 min, drain: 0 s}\n",
	          &c, &e);
	if (st != QB_OK)
		fail_msg("%s: %s", e.where, e.what);
	assert_string_equal(c.host, "[::1]");
	assert_int_equal(c.port, 0);
	assert_true(c.loopback);
	assert_string_equal(c.tls_certificate, "c.pem");
	assert_string_equal(c.tls_key, "k.pem");
	assert_int_equal(c.behind_proxy, 1);
	assert_string_equal(c.authority[1], "bell.example:8787");
	assert_null(c.authority[2]);
	assert_int_equal(c.clock, CONFIG_CLOCK_REHEARSAL);
	assert_int_equal(c.rehearsal_seed, 7);
	assert_int_equal(c.log_level, LOG_WARN_);
	assert_int_equal(c.connections, 64);
	assert_int_equal(c.event_streams, 8);
	assert_int_equal(c.body_bytes, 70000);
	assert_int_equal(c.body_memory_bytes, 2000000);
	assert_int_equal(c.request_ns, 20 * NS_PER_S);
	assert_int_equal(c.answer_ns, 120 * NS_PER_S);
	assert_int_equal(c.drain_ns, 0);
	config_free(&c);
}

static void bad_values_name_file_line_key_and_mend(void **state)
{
	static const struct {
		const char *text;
		enum qb_status status;
		const char *says[3]; /* parts of the one line */
	} cases[] = {
	    {"listen: 127.0.0.1:1\n", QB_FORMAT, {"q.yaml", "'data' is missing"}},
	    {"data: d\ncolour: red\n", QB_FORMAT, {"q.yaml:2", "unknown key 'colour'"}},
	    {"data: d\nlog: {level: info, file: x}\n", QB_FORMAT, {"q.yaml:2", "unknown key 'file'"}},
	    {"data: d\nlog: loud\n", QB_FORMAT, {"q.yaml:2: log", "'loud'", "a map"}},
	    {"data: d\nlog: {level: loud}\n", QB_FORMAT, {"q.yaml:2: log.level", "'loud'", "debug|info|warning|error"}},
	    {"data: [a]\n", QB_FORMAT, {"q.yaml:1: data", "(a list)", "one line of text"}},
	    {"data: d\nlisten: 8787\n", QB_FORMAT, {"q.yaml:2: listen", "'8787'", "127.0.0.1:8787"}},
	    {"data: d\nlisten: 127.0.0.1:65536\n", QB_FORMAT, {"q.yaml:2: listen", "65536"}},
	    {"data: d\nlisten: 127.0.0.1:-1\n", QB_FORMAT, {"q.yaml:2: listen"}},
	    {"data: d\nlisten: host.example:80\n", QB_FORMAT, {"q.yaml:2: listen", "numeric address"}},
	    {"data: d\nlisten: '[::1:80'\n", QB_FORMAT, {"q.yaml:2: listen"}},
	    {"data: d\nbehind_proxy: yes\n", QB_FORMAT, {"q.yaml:2: behind_proxy", "'yes'", "true or false"}},
	    {"data: d\nclock: sundial\n", QB_FORMAT, {"q.yaml:2: clock", "'sundial'", "system|rehearsal"}},
	    {"data: d\nclock: sys\n", QB_FORMAT, {"q.yaml:2: clock", "'sys'"}},
	    {"data: d\nlimits: {connections: 3}\n", QB_RANGE, {"q.yaml:2: limits.connections", "'3'", "4 to 4096"}},
	    {"data: d\nlimits: {connections: 1e2}\n", QB_FORMAT, {"q.yaml:2: limits.connections", "whole number"}},
	    {"data: d\nlimits: {request: 0.5 s}\n", QB_RANGE, {"q.yaml:2: limits.request", "'0.5 s'", "1 s to 600 s"}},
	    {"data: d\nlimits: {request: 30}\n", QB_FORMAT, {"q.yaml:2: limits.request", "a duration"}},
	    {"data: d\nauthority: bell.example\n", QB_FORMAT, {"q.yaml:2: authority", "a list"}},
	    {"data: d\nauthority: []\n", QB_RANGE, {"q.yaml:2: authority", "1 to 16"}},
	    {"data: d\nauthority: [Bell.example]\n", QB_FORMAT, {"q.yaml:2: authority[0]", "lower case"}},
	    {"", QB_FORMAT, {"q.yaml", "empty"}},
	    {"- data\n", QB_FORMAT, {"q.yaml:1", "a map"}},
	};
	(void)state;
	for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
		struct config c;
		struct qb_error e;
		char line[900];
		enum qb_status st = parse(cases[i].text, &c, &e);
		qb_error_line(&e, line, sizeof line);
		if (st != cases[i].status || strchr(line, '\n') != NULL)
			fail_msg("'%s': status %d, %s", cases[i].text, (int)st, line);
		for (int k = 0; k < 3 && cases[i].says[k] != NULL; k++) {
			if (strstr(line, cases[i].says[k]) == NULL)
				fail_msg("'%s' is not in: %s", cases[i].says[k], line);
		}
		config_free(&c);
	}
}

static void unsafe_combinations_are_refused(void **state)
{
	static const struct {
		const char *text;
		enum qb_status status;
		const char *says;
	} cases[] = {
	    {"data: d\nlisten: 0.0.0.0:80\n", QB_REFUSED, "without TLS"},
	    {"data: d\nlisten: '[::]:80'\n", QB_REFUSED, "without TLS"},
	    {"data: d\nlisten: 192.0.2.1:80\nauthority: [a]\n", QB_REFUSED, "without TLS"},
	    {"data: d\nlisten: 192.0.2.1:80\nbehind_proxy: true\n", QB_FORMAT, "'authority' is missing"},
	    {"data: d\nlisten: 192.0.2.1:80\nbehind_proxy: true\nauthority: [a]\n", QB_OK, ""},
	    {"data: d\nlisten: 192.0.2.1:80\ntls: {certificate: c, key: k}\nauthority: [a]\n", QB_OK, ""},
	    {"data: d\nbehind_proxy: true\n", QB_FORMAT, "'authority' is missing"},
	    {"data: d\ntls: {certificate: c}\n", QB_FORMAT, "belong together"},
	    {"data: d\ntls: {key: c}\n", QB_FORMAT, "belong together"},
	    {"data: d\nlisten: 192.0.2.1:80\ntls: {certificate: c, key: k}\nauthority: [a]\nclock: rehearsal\n",
	     QB_REFUSED, "rehearsal clock"},
	    {"data: d\nrehearsal_seed: 4\n", QB_REFUSED, "rehearsal_seed"},
	    {"data: d\nrehearsal_seed: -1\n", QB_OK, ""},
	    {"data: d\nlimits: {connections: 20, event_streams: 11}\n", QB_RANGE, "half of limits.connections"},
	};
	(void)state;
	for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
		struct config c;
		struct qb_error e;
		char line[900];
		enum qb_status st = parse(cases[i].text, &c, &e);
		if (st != cases[i].status || strstr(qb_error_line(&e, line, sizeof line), cases[i].says) == NULL)
			fail_msg("'%s': status %d, %s", cases[i].text, (int)st, line);
		config_free(&c);
	}
}

static void values_in_force_are_shown(void **state)
{
	struct config c;
	struct qb_error e;
	struct buf b = {0};
	(void)state;
	assert_int_equal(parse("data: d\nclock: rehearsal\nlog: {level: error}\nauthority: [a, b]\n", &c, &e), QB_OK);
	config_show(&c, &b);
	assert_string_equal((const char *)b.data,
	                    "data d\nlisten 127.0.0.1:8787\nbehind_proxy false\nauthority a\nauthority b\n"
	                    "clock rehearsal\nrehearsal_seed -1\nlog.level error\nlimits.connections 256\n"
	                    "limits.event_streams 32\nlimits.body_bytes 67108864\n"
	                    "limits.body_memory_bytes 268435456\nlimits.request 60 s\nlimits.answer 600 s\n"
	                    "limits.drain 10 s\n");
	buf_free(&b);
	config_free(&c);
}

static void the_manual_page_is_the_tables(void **state)
{
	struct buf file = {0}, made = {0};
	struct qb_error e = {0};
	(void)state;
	man_page(&made);
	assert_int_equal(file_read("docs/man/quietbelld.8", 1 << 20, &file, &e), QB_OK);
	if (file.len != made.len || memcmp(file.data, made.data, made.len) != 0)
		fail_msg("docs/man/quietbelld.8 is old; build/quietbelld --man >docs/man/quietbelld.8");
	buf_free(&file);
	buf_free(&made);
}

static void the_sample_configuration_is_valid(void **state)
{
	struct config c;
	struct qb_error e = {0};
	(void)state;
	if (config_read("deploy/quietbelld.yaml", &c, &e) != QB_OK)
		fail_msg("%s: %s", e.where, e.what);
	assert_string_equal(c.data, "/var/lib/quietbell");
	config_free(&c);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(defaults_are_the_tables),
	    cmocka_unit_test(every_key_is_read),
	    cmocka_unit_test(bad_values_name_file_line_key_and_mend),
	    cmocka_unit_test(unsafe_combinations_are_refused),
	    cmocka_unit_test(values_in_force_are_shown),
	    cmocka_unit_test(the_manual_page_is_the_tables),
	    cmocka_unit_test(the_sample_configuration_is_valid),
	};
	return cmocka_run_group_tests(tests, NULL, NULL);
}
