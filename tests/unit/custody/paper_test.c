/* A paper copy comes back as it was, and a slip of the pen is found on its line. */
#include "tests/hex.h"

#include <stdio.h>
#include <stdlib.h>

#include "server/base/secret.h"
#include "server/custody/keyfile.h"
#include "server/custody/paper.h"

static void copy_of(size_t n, uint8_t fill, struct buf *text)
{
	uint8_t bytes[PAPER_BYTES_MAX];
	for (size_t i = 0; i < n; i++)
		bytes[i] = (uint8_t)(fill + i * 7);
	buf_clear(text);
	paper_encode(bytes, n, "share of custodian 2", text);
}

static enum qb_status decode(const struct buf *text, struct buf *out, struct qb_error *e)
{
	buf_clear(out);
	*e = (struct qb_error){0};
	return paper_decode((char *)text->data, text->len, out, e);
}

static void every_length_comes_back(void **state)
{
	(void)state;
	struct buf text = {0}, out = {0};
	struct qb_error e;
	static const size_t lengths[] = {1, 2, 11, 12, 13, 24, 240, 241, 1000, PAPER_BYTES_MAX};
	for (size_t q = 0; q < sizeof lengths / sizeof *lengths; q++) {
		copy_of(lengths[q], 3, &text);
		assert_true(text.len < PAPER_TEXT_MAX);
		assert_int_equal(decode(&text, &out, &e), QB_OK);
		assert_int_equal(out.len, lengths[q]);
		for (size_t i = 0; i < out.len; i++)
			assert_int_equal(out.data[i], (uint8_t)(3 + i * 7));
	}
	buf_free(&text);
	buf_free(&out);
}

/* Digits stand for line numbers only, letters for content only, and no letter looks like another or like a digit. */
static void only_clear_letters(void **state)
{
	(void)state;
	struct buf text = {0};
	assert_int_equal(strlen(PAPER_LETTERS), 16);
	for (const char *p = PAPER_LETTERS; *p != '\0'; p++) {
		assert_null(strchr("0123456789OQILBGSUVZ", *p));
		assert_true(p[1] == '\0' || p[0] < p[1]);
	}
	copy_of(240, 0, &text);
	size_t at = strlen("# share of custodian 2\n"), lines = 0;
	assert_memory_equal(text.data, "# share of custodian 2\n01  ", 27);
	for (char *line = strtok((char *)text.data + at, "\n"); line != NULL; line = strtok(NULL, "\n"), lines++) {
		assert_int_equal(strlen(line), 2 + 2 + 29 + 2 + 4);
		assert_int_equal(strspn(line, "0123456789"), 2);
		assert_int_equal(strspn(line + 2, PAPER_LETTERS " "), strlen(line) - 2);
	}
	assert_int_equal(lines, 21);
	buf_free(&text);
}

static void as_people_type_it(void **state)
{
	(void)state;
	struct buf text = {0}, typed = {0}, out = {0};
	struct qb_error e;
	copy_of(100, 9, &text);
	for (size_t i = 0; i < text.len;
	     i++) { /* small letters, no spaces, a dash or a dot here and there, Windows line ends */
		char ch = (char)text.data[i];
		if (ch == '\n')
			buf_text(&typed, " .\r\n\n");
		else if (i < 23)
			buf_u8(&typed, (uint8_t)ch);
		else if (ch != ' ')
			buf_printf(&typed, "%s%c", i % 11 == 0 && ch >= 'A' ? "-" : "",
			           ch >= 'A' && ch <= 'Z' && i % 3 != 0 ? ch + 32 : ch);
	}
	assert_int_equal(decode(&typed, &out, &e), QB_OK);
	assert_int_equal(out.len, 100);
	buf_clear(&typed);
	buf_put(&typed, text.data, text.len - 1); /* no end of line at the end */
	assert_int_equal(decode(&typed, &out, &e), QB_OK);
	buf_free(&text);
	buf_free(&typed);
	buf_free(&out);
}

static size_t line_start(const struct buf *text, int number)
{
	size_t at = 0;
	for (int line = 0; line < number; line++)
		at = (size_t)((uint8_t *)memchr(text->data + at, '\n', text->len - at) - text->data) + 1;
	return at;
}

/* Any letter of any line changed to any other: the line is named. */
static void the_wrong_line_is_named(void **state)
{
	(void)state;
	struct buf text = {0}, out = {0};
	struct qb_error e;
	char where[32];
	int cases = 0;
	copy_of(60, 1, &text);
	for (int number = 1; number <= 6; number++)
		for (size_t at = line_start(&text, number) + 2; at < text.len && text.data[at] != '\n'; at++) {
			uint8_t was = text.data[at];
			if (was == ' ')
				continue;
			for (const char *p = PAPER_LETTERS "08"; *p != '\0'; p++) {
				if ((uint8_t)*p == was)
					continue;
				text.data[at] = (uint8_t)*p;
				assert_int_equal(decode(&text, &out, &e), QB_FORMAT);
				snprintf(where, sizeof where, "line %d", number);
				assert_string_equal(e.where, where);
				assert_int_equal(out.len, 0);
				cases++;
			}
			text.data[at] = was;
		}
	assert_true(cases > 2500);
	buf_free(&text);
	buf_free(&out);
}

/* Two letters of a line in each other's place, or a line with a letter too few or too many. */
static void swapped_lost_and_doubled_letters(void **state)
{
	(void)state;
	struct buf text = {0}, changed = {0}, out = {0};
	struct qb_error e;
	copy_of(60, 1, &text);
	size_t from = line_start(&text, 3);
	for (size_t at = from + 4; text.data[at + 1] != '\n'; at++) {
		uint8_t a = text.data[at], b = text.data[at + 1];
		if (a != ' ') {
			buf_clear(&changed);
			buf_put(&changed, text.data, at);
			buf_put(&changed, text.data + at + 1, text.len - at - 1);
			assert_int_equal(decode(&changed, &out, &e), QB_FORMAT);
			assert_string_equal(e.where, "line 3");
			buf_clear(&changed);
			buf_put(&changed, text.data, at + 1);
			buf_put(&changed, text.data + at, text.len - at);
			assert_int_equal(decode(&changed, &out, &e), QB_FORMAT);
			assert_string_equal(e.where, "line 3");
		}
		if (a == b || a == ' ' || b == ' ')
			continue;
		text.data[at] = b;
		text.data[at + 1] = a;
		assert_int_equal(decode(&text, &out, &e), QB_FORMAT);
		assert_string_equal(e.where, "line 3");
		text.data[at] = a;
		text.data[at + 1] = b;
	}
	buf_free(&text);
	buf_free(&changed);
	buf_free(&out);
}

/* Lines in another order, left out, twice, from another copy, or too many. */
static void lines_of_their_own(void **state)
{
	(void)state;
	struct buf text = {0}, other = {0}, changed = {0}, out = {0};
	struct qb_error e;
	copy_of(60, 1, &text);
	copy_of(60, 2, &other);
	size_t l2 = line_start(&text, 2), l3 = line_start(&text, 3), l4 = line_start(&text, 4),
	       l6 = line_start(&text, 6);
	struct {
		size_t a, b, c, d, e, f;
		const char *where;
	} cuts[] = {
	    {0, l3, l4, text.len, 0, 0, "line 3"},           /* left out */
	    {0, l2, l3, l4, l2, text.len, "line 2"},         /* swapped */
	    {0, l3, l2, text.len, 0, 0, "line 3"},           /* twice */
	    {0, l6, 0, 0, 0, 0, "line 6"},                   /* cut off */
	    {0, text.len, l6, text.len, 0, 0, "paper copy"}, /* more than all */
	};
	for (size_t q = 0; q < sizeof cuts / sizeof *cuts; q++) {
		buf_clear(&changed);
		buf_put(&changed, text.data + cuts[q].a, cuts[q].b - cuts[q].a);
		buf_put(&changed, text.data + cuts[q].c, cuts[q].d - cuts[q].c);
		buf_put(&changed, text.data + cuts[q].e, cuts[q].f - cuts[q].e);
		assert_int_equal(decode(&changed, &out, &e), QB_FORMAT);
		assert_string_equal(e.where, cuts[q].where);
	}
	memcpy(text.data + l3, other.data + l3, l4 - l3); /* a good line of another copy */
	assert_int_equal(decode(&text, &out, &e), QB_FORMAT);
	assert_string_equal(e.where, "paper copy");
	assert_int_equal(out.len, 0);
	/* A line under another number: the check covers the number. */
	memcpy(text.data + l3 + 2, other.data + l2 + 2, l4 - l3 - 2);
	assert_int_equal(decode(&text, &out, &e), QB_FORMAT);
	assert_string_equal(e.where, "line 3");
	buf_free(&text);
	buf_free(&other);
	buf_free(&changed);
	buf_free(&out);
}

static void what_is_no_copy(void **state)
{
	(void)state;
	struct buf out = {0};
	struct qb_error e;
	static const char *const texts[] = {
	    "",     "\n\n# nothing\n", "hello",   "1", "01 ", "99999999999999999999 ACDE", "01 ACDE",
	    "ACDE", "-1 ACDE",         "01  \xff"};
	for (size_t q = 0; q < sizeof texts / sizeof *texts; q++) {
		e = (struct qb_error){0};
		assert_int_equal(paper_decode(texts[q], strlen(texts[q]), &out, &e), QB_FORMAT);
	}
	char *large = calloc(1, PAPER_TEXT_MAX + 1);
	assert_int_equal(paper_decode(large, PAPER_TEXT_MAX + 1, &out, &e), QB_FORMAT);
	assert_int_equal(paper_decode(large, 100, &out, &e), QB_FORMAT); /* zero bytes are no letters */
	free(large);
	assert_int_equal(out.len, 0);
}

/* What it is for: a share's key file, on paper and back, opens with its passphrase. */
static void a_key_file_survives(void **state)
{
	(void)state;
	struct secret *payload = secret_random(124), *back;
	struct buf file = {0}, text = {0}, again = {0};
	struct qb_error e;
	assert_int_equal(keyfile_encrypt(KEYFILE_SHARE, KEYFILE_INTERACTIVE, "a passphrase", payload, &file, NULL),
	                 QB_OK);
	paper_encode(file.data, file.len, NULL, &text);
	assert_int_equal(decode(&text, &again, &e), QB_OK);
	assert_int_equal(again.len, file.len);
	assert_int_equal(keyfile_decrypt(again.data, again.len, KEYFILE_SHARE, "a passphrase", true, &back, NULL),
	                 QB_OK);
	assert_memory_equal(secret_view(back), secret_view(payload), 124);
	secret_free(&payload);
	secret_free(&back);
	buf_free(&file);
	buf_free(&text);
	buf_free(&again);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(every_length_comes_back),
	    cmocka_unit_test(only_clear_letters),
	    cmocka_unit_test(as_people_type_it),
	    cmocka_unit_test(the_wrong_line_is_named),
	    cmocka_unit_test(swapped_lost_and_doubled_letters),
	    cmocka_unit_test(lines_of_their_own),
	    cmocka_unit_test(what_is_no_copy),
	    cmocka_unit_test(a_key_file_survives),
	};
	if (secret_setup(NULL) != QB_OK)
		return 1;
	return cmocka_run_group_tests(tests, NULL, NULL);
}
