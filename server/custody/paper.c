/* What is cut into lines: version u8 | length u24 | the bytes | check over all, 8 bytes. */
#include "server/custody/paper.h"

#include <stdio.h>
#include <string.h>

#include "server/base/check.h"
#include "server/base/secret.h"

#define PAPER_VERSION 1
#define HEAD_BYTES    4
#define WHOLE_BYTES   8
#define LINE_CHECK    2
_Static_assert(HEAD_BYTES + 1 + WHOLE_BYTES >= PAPER_LINE_BYTES, "the first line is always full");

static void whole_check(const uint8_t *p, size_t n, uint8_t out[static WHOLE_BYTES])
{
	struct transcript t;
	uint8_t h[64];
	transcript_begin(&t, "quietbell/1/paper/whole");
	transcript_field(&t, p, n);
	transcript_end(&t, h);
	memcpy(out, h, WHOLE_BYTES);
}

/*
 * CRC-16 with the polynomial of ITU-T V.41 (x^16 + x^12 + x^5 + 1, from all ones, most significant bit first) over the
 * line's number and bytes: it misses no change within four letters in a row, so no wrong letter and no two that changed
 * places. Without branches on the bytes.
 */
static void line_check(size_t number, const uint8_t *p, size_t n, uint8_t out[static LINE_CHECK])
{
	unsigned crc = 0xffff;
	for (size_t i = 0; i < n + 2; i++) {
		crc ^= (unsigned)(i == 0 ? number >> 8 & 0xff : i == 1 ? number & 0xff : p[i - 2]) << 8;
		for (int bit = 0; bit < 8; bit++)
			crc = (crc << 1 & 0xffff) ^ (0x1021 & (0U - (crc >> 15)));
	}
	out[0] = (uint8_t)(crc >> 8);
	out[1] = (uint8_t)crc;
}

/* The letter of a half byte by looking at all of them: which one is taken does not show in time or memory. */
static char letter(unsigned value)
{
	unsigned out = 0;
	for (unsigned i = 0; i < 16; i++)
		out |= (unsigned char)PAPER_LETTERS[i] & (((i ^ value) - 1U) >> 8 & 0xffU);
	return (char)out;
}

static void put_letters(const uint8_t *p, size_t n, struct buf *out)
{
	for (size_t i = 0; i < n; i++) {
		if (i > 0 && i % 2 == 0)
			buf_u8(out, ' ');
		buf_u8(out, (uint8_t)letter(p[i] >> 4));
		buf_u8(out, (uint8_t)letter(p[i] & 15U));
	}
}

void paper_encode(const uint8_t *p, size_t n, const char *title, struct buf *out)
{
	struct buf stream = {0};
	uint8_t check[WHOLE_BYTES];
	CHECK(n >= 1 && n <= PAPER_BYTES_MAX);
	buf_u32(&stream, PAPER_VERSION | (uint32_t)n << 8);
	buf_put(&stream, p, n);
	whole_check(p, n, check);
	buf_put(&stream, check, sizeof check);
	if (title != NULL)
		buf_printf(out, "# %s\n", title);
	for (size_t at = 0, number = 1; at < stream.len; at += PAPER_LINE_BYTES, number++) {
		size_t left = stream.len - at, part = left < PAPER_LINE_BYTES ? left : PAPER_LINE_BYTES;
		line_check(number, stream.data + at, part, check);
		buf_printf(out, "%02zu  ", number);
		put_letters(stream.data + at, part, out);
		buf_text(out, "  ");
		put_letters(check, LINE_CHECK, out);
		buf_u8(out, '\n');
	}
	buf_wipe(&stream);
}

static enum qb_status wrong_line(struct qb_error *e, size_t number, const char *mend, const char *what)
{
	char where[32];
	snprintf(where, sizeof where, "line %zu", number);
	return qb_fail(e, QB_FORMAT, where, mend, "%s", what);
}

/* One line as read: its number, and the half bytes of its letters. */
struct line {
	size_t number, letters;
	uint8_t byte[PAPER_LINE_BYTES + LINE_CHECK];
};

static bool skipped(char ch)
{
	return ch == ' ' || ch == '\t' || ch == '\r' || ch == '-' || ch == '.' || ch == ':' || ch == ',';
}

/* The letters in p[0..n), after the number. */
static enum qb_status read_letters(const char *p, size_t n, struct line *line, struct qb_error *e)
{
	char what[120];
	for (size_t i = 0; i < n; i++) {
		char ch = p[i] >= 'a' && p[i] <= 'z' ? (char)(p[i] - 'a' + 'A') : p[i];
		if (skipped(ch))
			continue;
		const char *found = ch == '\0' ? NULL : strchr(PAPER_LETTERS, ch);
		if (found == NULL) {
			snprintf(what, sizeof what, "character %zu is not one of the letters used", line->letters + 1);
			return wrong_line(e, line->number, "the letters are " PAPER_LETTERS, what);
		}
		if (line->letters == 2 * sizeof line->byte)
			return wrong_line(e, line->number, "copy it again from the paper", "it has too many letters");
		uint8_t value = (uint8_t)(found - PAPER_LETTERS);
		uint8_t *byte = &line->byte[line->letters / 2];
		*byte = (uint8_t)(line->letters % 2 == 0 ? value << 4 : *byte | value);
		line->letters++;
	}
	return QB_OK;
}

/* A line with its number, which must be the expected one. */
static enum qb_status read_line(const char *p, size_t n, size_t expected, struct line *line, struct qb_error *e)
{
	size_t at = 0;
	char what[120];
	*line = (struct line){.number = 0};
	while (at < n && skipped(p[at]))
		at++;
	size_t first = at;
	for (; at < n && p[at] >= '0' && p[at] <= '9' && line->number < 10000; at++)
		line->number = line->number * 10 + (size_t)(p[at] - '0');
	if (at == first)
		return wrong_line(e, expected, "begin every line with its number", "it has no number");
	if (line->number != expected) {
		snprintf(what, sizeof what, "it is missing; line %zu comes in its place", line->number);
		return wrong_line(e, expected, "give all lines in their order", what);
	}
	return read_letters(p + at, n - at, line, e);
}

/* The content of a line of `bytes` bytes, its check looked at, goes to stream. */
static enum qb_status take_line(const struct line *line, size_t bytes, struct buf *stream, struct qb_error *e)
{
	uint8_t check[LINE_CHECK];
	char what[120];
	if (line->letters != 2 * (bytes + LINE_CHECK)) {
		snprintf(what, sizeof what, "it has %zu letters, it must have %zu", line->letters,
		         2 * (bytes + LINE_CHECK));
		return wrong_line(e, line->number, "copy it again from the paper", what);
	}
	line_check(line->number, line->byte, bytes, check);
	if (memcmp(check, line->byte + bytes, LINE_CHECK) != 0)
		return wrong_line(e, line->number, "compare it with the paper letter by letter",
		                  "a letter is wrong: the last four do not fit the others");
	buf_put(stream, line->byte, bytes);
	return QB_OK;
}

static enum qb_status not_whole(struct qb_error *e, const char *mend, const char *what)
{
	return qb_fail(e, QB_FORMAT, "paper copy", mend, "%s", what);
}

/* From the first line on, how long the whole is; 0 before. */
static enum qb_status total_of(const struct buf *stream, size_t *total, struct qb_error *e)
{
	uint32_t head = (uint32_t)stream->data[0] | (uint32_t)stream->data[1] << 8 | (uint32_t)stream->data[2] << 16 |
	                (uint32_t)stream->data[3] << 24;
	if ((head & 0xff) != PAPER_VERSION || head >> 8 == 0 || head >> 8 > PAPER_BYTES_MAX)
		return not_whole(e, NULL, "it is not a paper copy of version 1");
	*total = HEAD_BYTES + (head >> 8) + WHOLE_BYTES;
	return QB_OK;
}

static bool is_blank(const char *p, size_t n)
{
	size_t at = 0;
	while (at < n && skipped(p[at]))
		at++;
	return at == n || p[at] == '#';
}

enum qb_status paper_decode(const char *text, size_t n, struct buf *out, struct qb_error *e)
{
	struct buf stream = {0};
	struct line line;
	size_t total = 0, expected = 1;
	uint8_t check[WHOLE_BYTES];
	enum qb_status s = QB_OK;
	if (n > PAPER_TEXT_MAX)
		return not_whole(e, NULL, "it is too long");
	for (size_t at = 0, end; s == QB_OK && at < n; at = end + 1) {
		const char *stop = memchr(text + at, '\n', n - at);
		end = stop == NULL ? n : (size_t)(stop - text);
		if (is_blank(text + at, end - at))
			continue;
		size_t left = total == 0 ? PAPER_LINE_BYTES : total - stream.len; /* the first line is always full */
		if (left == 0)
			s = not_whole(e, "leave out what follows the last line", "lines follow its last one");
		else
			s = read_line(text + at, end - at, expected, &line, e);
		if (s == QB_OK)
			s = take_line(&line, left < PAPER_LINE_BYTES ? left : PAPER_LINE_BYTES, &stream, e);
		if (s == QB_OK && total == 0)
			s = total_of(&stream, &total, e);
		expected++;
	}
	if (s == QB_OK && stream.len == 0)
		s = not_whole(e, NULL, "it has no lines");
	if (s == QB_OK && stream.len != total)
		s = wrong_line(e, expected, "give all lines in their order", "it is missing at the end");
	if (s == QB_OK) {
		whole_check(stream.data + HEAD_BYTES, total - HEAD_BYTES - WHOLE_BYTES, check);
		if (memcmp(check, stream.data + total - WHOLE_BYTES, sizeof check) != 0)
			s = not_whole(e, "take all lines from one copy", "every line fits, but not all together");
	}
	if (s == QB_OK)
		buf_put(out, stream.data + HEAD_BYTES, total - HEAD_BYTES - WHOLE_BYTES);
	buf_wipe(&stream);
	wipe(&line, sizeof line);
	return s;
}
