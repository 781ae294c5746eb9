/* Strict text conversions, buffers and cursors: what must be refused is refused. */
#include "server/base/buf.h"
#include "server/base/alloc.h"
#include "server/base/text.h"
#include "tests/near.h"

#include <string.h>
#include <stdio.h>
#include <stdlib.h>
#include <sys/stat.h>
#include <unistd.h>

static void base64_is_canonical(void **state)
{
	/* RFC 4648 section 10 */
	static const char *const pairs[][2] = {{"", ""},
	                                       {"f", "Zg=="},
	                                       {"fo", "Zm8="},
	                                       {"foo", "Zm9v"},
	                                       {"foob", "Zm9vYg=="},
	                                       {"fooba", "Zm9vYmE="},
	                                       {"foobar", "Zm9vYmFy"}};
	static const char *const bad[] = {"Z", "Zg", "Zg=", "Zh==", "Zm9=", "Zg==Zg==", "Z g=", "Zg==\n", "Z-8="};
	(void)state;
	for (size_t i = 0; i < 7; i++) {
		struct buf b = {0};
		char *t = base64_encode((const uint8_t *)pairs[i][0], strlen(pairs[i][0]));
		assert_string_equal(t, pairs[i][1]);
		assert_true(base64_decode(t, &b));
		assert_int_equal(b.len, strlen(pairs[i][0]));
		assert_memory_equal(b.data != NULL ? b.data : (uint8_t *)"", pairs[i][0], b.len);
		qb_free(t);
		buf_free(&b);
	}
	for (size_t i = 0; i < sizeof bad / sizeof bad[0]; i++) {
		struct buf b = {0};
		assert_false(base64_decode(bad[i], &b));
		buf_free(&b);
	}
}

static void numbers_are_strict(void **state)
{
	double d;
	int64_t v;
	(void)state;
	assert_true(text_double("-1.5e-3", &d));
	near_abs(d, -0.0015, 0);
	static const char *const bad[] = {"", "nan", "inf", "0x10", "1,5", " 1", "1 ", "+1", "1e999", "--1", "1e"};
	for (size_t i = 0; i < sizeof bad / sizeof bad[0]; i++)
		assert_false(text_double(bad[i], &d));
	assert_true(text_i64("-9223372036854775808", &v) && v == INT64_MIN);
	assert_false(text_i64("9223372036854775808", &v));
	assert_false(text_i64("010", &v));
	assert_false(text_i64("1.5", &v));
	assert_true(text_duration_ns("1 h", &v) && v == INT64_C(3600000000000));
	assert_true(text_duration_ns("0.5 s", &v) && v == 500000000);
	assert_true(text_duration_ns("10min", &v) && v == INT64_C(600000000000));
	assert_false(text_duration_ns("1", &v));
	assert_false(text_duration_ns("-1 s", &v));
	assert_false(text_duration_ns("1 hour", &v));
}

static void utf8_is_checked(void **state)
{
	(void)state;
	assert_true(text_is_utf8("gr\xc3\xbc\xc3\x9f", 6));
	assert_false(text_is_utf8("\xc0\xaf", 2));         /* overlong */
	assert_false(text_is_utf8("\xed\xa0\x80", 3));     /* surrogate */
	assert_false(text_is_utf8("\xf4\x90\x80\x80", 4)); /* beyond U+10FFFF */
	assert_false(text_is_utf8("\xe2\x82", 2));         /* cut */
	assert_false(text_is_utf8("a\x1b[31m", 6));        /* terminal control */
	assert_true(text_is_name("fells-spring-2") && !text_is_name("2fells") && !text_is_name("Fells"));
}

static void cursors_stop_at_the_end(void **state)
{
	uint8_t bytes[] = {1, 2, 3, 4, 5};
	struct cursor c = cursor_over(bytes, sizeof bytes);
	(void)state;
	assert_int_equal(cursor_u32(&c), 0x04030201);
	assert_false(c.bad);
	assert_int_equal(cursor_u16(&c), 0);
	assert_true(c.bad);
	assert_int_equal(cursor_u8(&c), 0); /* stays bad: the last byte is not handed out any more */
	assert_null(cursor_take(&c, 0));
}

static void files_are_replaced_whole(void **state)
{
	struct buf b = {0};
	struct stat s;
	char dir[] = "/tmp/qb-test-XXXXXX";
	(void)state;
	assert_non_null(mkdtemp(dir));
	char *path = text_printf("%s/file", dir);
	assert_int_equal(file_write(path, 0600, "one", 3, NULL), QB_OK);
	assert_int_equal(file_write(path, 0600, "second", 6, NULL), QB_OK);
	assert_int_equal(stat(path, &s), 0);
	assert_int_equal(s.st_mode & 0777, 0600);
	assert_int_equal(file_read(path, 100, &b, NULL), QB_OK);
	assert_string_equal((char *)b.data, "second");
	buf_clear(&b);
	struct qb_error e = {0};
	assert_int_equal(file_read(path, 5, &b, &e), QB_FORMAT); /* over the bound */
	struct qb_error e2 = {0};
	char *missing = text_printf("%s/none/file", dir);
	assert_int_equal(file_write(missing, 0600, "x", 1, &e2), QB_IO);
	assert_non_null(strstr(e2.where, "none/file"));
	unlink(path);
	rmdir(dir);
	qb_free(path);
	qb_free(missing);
	buf_free(&b);
}

static void errors_keep_their_origin(void **state)
{
	struct qb_error e = {0};
	char line[900];
	(void)state;
	assert_int_equal(qb_fail(&e, QB_RANGE, "plan.yaml:3", "write a positive mass", "is %d\n", -3), QB_RANGE);
	assert_int_equal(qb_fail(&e, QB_IO, "elsewhere", NULL, "later"), QB_IO);
	assert_string_equal(qb_error_line(&e, line, sizeof line), "plan.yaml:3: is -3?; write a positive mass");
	assert_int_equal(qb_exit_status(QB_OK), 0);
	assert_int_equal(qb_exit_status(QB_NO), 1);
	assert_int_equal(qb_exit_status(QB_USAGE), 2);
	assert_int_equal(qb_exit_status(QB_FORMAT), 3);
	assert_int_equal(qb_exit_status(QB_REFUSED), 4);
	assert_int_equal(qb_exit_status(QB_UNREACHABLE), 5);
	assert_int_equal(qb_exit_status(QB_FAULT), 70);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(base64_is_canonical),      cmocka_unit_test(numbers_are_strict),
	    cmocka_unit_test(utf8_is_checked),          cmocka_unit_test(cursors_stop_at_the_end),
	    cmocka_unit_test(files_are_replaced_whole), cmocka_unit_test(errors_keep_their_origin),
	};
	return cmocka_run_group_tests(tests, NULL, NULL);
}
