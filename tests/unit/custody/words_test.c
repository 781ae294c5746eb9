/* The table of words has the properties that its users rely on, and both directions agree. */
#include "tests/hex.h"

#include <ctype.h>
#include <stdio.h>
#include <stdlib.h>

#include "server/base/secret.h"
#include "server/custody/party.h"
#include "server/custody/words.h"

static void lengths_letters_and_order(void **state)
{
	(void)state;
	for (int v = 0; v < WORDS_COUNT; v++) {
		const char *w = words_word((uint8_t)v);
		assert_true(strlen(w) >= WORDS_LETTERS_ENOUGH && strlen(w) <= WORDS_LETTERS_MAX);
		for (size_t i = 0; w[i] != '\0'; i++)
			assert_true(islower((unsigned char)w[i]));
		if (v > 0)
			assert_true(strcmp(words_word((uint8_t)(v - 1)), w) < 0); /* so all are different */
	}
}

static void first_four_letters_are_enough(void **state)
{
	(void)state;
	for (int a = 0; a < WORDS_COUNT; a++)
		for (int b = 0; b < a; b++)
			assert_int_not_equal(
			    strncmp(words_word((uint8_t)a), words_word((uint8_t)b), WORDS_LETTERS_ENOUGH), 0);
}

/* Smallest number of letters changed, added or left out between two words. */
static size_t distance(const char *a, const char *b)
{
	size_t row[WORDS_LETTERS_MAX + 1], n = strlen(b);
	for (size_t j = 0; j <= n; j++)
		row[j] = j;
	for (size_t i = 1; a[i - 1] != '\0'; i++) {
		size_t corner = row[0];
		row[0] = i;
		for (size_t j = 1; j <= n; j++) {
			size_t best = corner + (a[i - 1] != b[j - 1]);
			if (row[j] + 1 < best)
				best = row[j] + 1;
			if (row[j - 1] + 1 < best)
				best = row[j - 1] + 1;
			corner = row[j];
			row[j] = best;
		}
	}
	return row[n];
}

static void one_wrong_letter_never_makes_another_word(void **state)
{
	(void)state;
	assert_int_equal(distance("kettle", "cattle"), 2);
	assert_int_equal(distance("rope", "ropes"), 1);
	for (int a = 0; a < WORDS_COUNT; a++)
		for (int b = 0; b < a; b++)
			assert_true(distance(words_word((uint8_t)a), words_word((uint8_t)b)) >= 2);
}

static void every_byte_comes_back(void **state)
{
	(void)state;
	uint8_t all[WORDS_COUNT], back[WORDS_COUNT];
	struct buf b = {0};
	for (int v = 0; v < WORDS_COUNT; v++)
		all[v] = (uint8_t)(v * 7 + 3);
	words_put(all, sizeof all, &b);
	assert_int_equal(words_parse((char *)b.data, b.len, back, sizeof back, NULL), QB_OK);
	assert_memory_equal(all, back, sizeof all);
	buf_free(&b);
}

static enum qb_status parse(const char *text, uint8_t *out, size_t n, struct qb_error *e)
{
	*e = (struct qb_error){0};
	return words_parse(text, strlen(text), out, n, e);
}

static void read_as_people_write(void **state)
{
	(void)state;
	uint8_t out[3];
	struct qb_error e;
	assert_int_equal(parse("Acorn ANCHOR zinc", out, 3, &e), QB_OK);
	assert_true(out[0] == 0 && out[1] == 1 && out[2] == 255);
	assert_int_equal(parse("  acor-anch,\n zinc. ", out, 3, &e), QB_OK);
	assert_true(out[0] == 0 && out[1] == 1 && out[2] == 255);
	static const char *const wrong[] = {"acorn anchor",       "acorn anchor zinc zinc", "acorn anchot zinc",
	                                    "acorn anc zinc",     "acorn ancho zinc",       "acorn anchors zinc",
	                                    "acorn anchor z1nc",  "acorn anchorzinc acorn", "",
	                                    "acorn \xc3\xa9 zinc"};
	for (size_t q = 0; q < sizeof wrong / sizeof *wrong; q++)
		assert_int_equal(parse(wrong[q], out, 3, &e), QB_FORMAT);
	assert_int_equal(parse("acorn anchot zinc", out, 3, &e), QB_FORMAT);
	assert_non_null(strstr(e.what, "word 2, \"anchot\""));
	assert_int_equal(words_parse("acorn\0anchor zinc", 17, out, 3, NULL), QB_FORMAT);
}

static void a_fingerprint_as_words(void **state)
{
	(void)state;
	struct party_key key;
	struct party_public pub;
	uint8_t print[PARTY_FINGERPRINT_BYTES], back[PARTY_FINGERPRINT_BYTES];
	char text[PARTY_FINGERPRINT_TEXT], hex[3];
	struct buf b = {0};
	party_key_new(&key);
	party_key_public(&key, &pub);
	party_fingerprint_bytes(&pub, print);
	party_fingerprint(&pub, text);
	for (size_t i = 0; i < 16; i++) { /* the same bytes as in the digits */
		snprintf(hex, sizeof hex, "%02x", print[i]);
		assert_memory_equal(text + 2 * i + i / 2, hex, 2);
	}
	words_put(print, sizeof print, &b);
	assert_int_equal(words_parse((char *)b.data, b.len, back, sizeof back, NULL), QB_OK);
	assert_memory_equal(print, back, sizeof print);
	buf_free(&b);
	party_key_free(&key);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(lengths_letters_and_order),
	    cmocka_unit_test(first_four_letters_are_enough),
	    cmocka_unit_test(one_wrong_letter_never_makes_another_word),
	    cmocka_unit_test(every_byte_comes_back),
	    cmocka_unit_test(read_as_people_write),
	    cmocka_unit_test(a_fingerprint_as_words),
	};
	if (secret_setup(NULL) != QB_OK)
		return 1;
	return cmocka_run_group_tests(tests, NULL, NULL);
}
