/* Strict text conversions. */
#include "server/base/text.h"

#include <math.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <errno.h>

#include "server/base/alloc.h"
#include "server/base/check.h"

void hex_encode(char *out, const uint8_t *p, size_t n)
{
	static const char digits[] = "0123456789abcdef";
	for (size_t i = 0; i < n; i++) {
		out[2 * i] = digits[p[i] >> 4];
		out[2 * i + 1] = digits[p[i] & 15];
	}
	out[2 * n] = '\0';
}

static int nibble(char c)
{
	if (c >= '0' && c <= '9')
		return c - '0';
	if (c >= 'a' && c <= 'f')
		return c - 'a' + 10;
	return -1;
}

bool hex_decode(uint8_t *out, size_t n, const char *s)
{
	for (size_t i = 0; i < n; i++) {
		int hi = nibble(s[2 * i]);
		if (hi < 0)
			return false;
		int lo = nibble(s[2 * i + 1]);
		if (lo < 0)
			return false;
		out[i] = (uint8_t)(hi << 4 | lo);
	}
	return s[2 * n] == '\0';
}

static const char alphabet[] = "ABCDEFGHIJKLMNOPQRSTUVWXYZabcdefghijklmnopqrstuvwxyz0123456789+/";

char *base64_encode(const uint8_t *p, size_t n)
{
	CHECK(n < SIZE_MAX / 2);
	char *out = qb_alloc((n + 2) / 3 * 4 + 1, 1), *q = out;
	for (size_t i = 0; i < n; i += 3) {
		size_t m = n - i < 3 ? n - i : 3;
		uint32_t v = (uint32_t)p[i] << 16 | (m > 1 ? (uint32_t)p[i + 1] << 8 : 0) | (m > 2 ? p[i + 2] : 0);
		*q++ = alphabet[v >> 18];
		*q++ = alphabet[v >> 12 & 63];
		*q++ = m > 1 ? alphabet[v >> 6 & 63] : '=';
		*q++ = m > 2 ? alphabet[v & 63] : '=';
	}
	return out;
}

bool base64_decode(const char *s, struct buf *out)
{
	size_t n = strlen(s);
	if (n % 4 != 0)
		return false;
	for (size_t i = 0; i < n; i += 4) {
		uint32_t v = 0;
		int pad = 0;
		for (size_t j = 0; j < 4; j++) {
			char c = s[i + j];
			const char *at = c != '\0' ? strchr(alphabet, c) : NULL;
			if (c == '=' && i + 4 == n && j >= 2)
				pad++;
			else if (at == NULL || pad > 0)
				return false;
			v = v << 6 | (at != NULL && c != '=' ? (uint32_t)(at - alphabet) : 0);
		}
		/* The bits that padding leaves unused must be zero, or two texts would mean the same bytes. */
		if ((pad == 1 && (v & 0xff) != 0) || (pad == 2 && (v & 0xffff) != 0))
			return false;
		uint8_t b[3] = {(uint8_t)(v >> 16), (uint8_t)(v >> 8), (uint8_t)v};
		buf_put(out, b, (size_t)(3 - pad));
	}
	return true;
}

bool text_double(const char *s, double *out)
{
	size_t n = strspn(s, "0123456789+-.eE");
	if (n == 0 || s[n] != '\0' || n > 64 || s[0] == '+')
		return false;
	char *end;
	double v = strtod(s, &end);
	if (*end != '\0' || !isfinite(v))
		return false;
	*out = v;
	return true;
}

bool text_i64(const char *s, int64_t *out)
{
	size_t digits = strspn(s + (*s == '-'), "0123456789");
	if (digits == 0 || s[digits + (*s == '-')] != '\0' || (digits > 1 && s[*s == '-'] == '0'))
		return false;
	errno = 0;
	long long v = strtoll(s, NULL, 10);
	if (errno != 0)
		return false;
	*out = v;
	return true;
}

bool text_duration_ns(const char *s, int64_t *out)
{
	static const struct {
		const char *unit;
		double seconds;
	} units[] = {{"ms", 1e-3}, {"s", 1}, {"min", 60}, {"h", 3600}, {"d", 86400}, {"w", 604800}};
	size_t n = strspn(s, "0123456789.");
	char number[32];
	double v;
	if (n == 0 || n >= sizeof number)
		return false;
	memcpy(number, s, n);
	number[n] = '\0';
	const char *unit = s + n + strspn(s + n, " ");
	if (!text_double(number, &v))
		return false;
	for (size_t i = 0; i < sizeof units / sizeof units[0]; i++) {
		if (strcmp(unit, units[i].unit) == 0 && v * units[i].seconds < 4e9) {
			*out = (int64_t)llround(v * units[i].seconds * 1e9);
			return true;
		}
	}
	return false;
}

bool text_is_name(const char *s)
{
	if (*s < 'a' || *s > 'z')
		return false;
	size_t n = strspn(s, "abcdefghijklmnopqrstuvwxyz0123456789-");
	return s[n] == '\0' && n <= 63;
}

/* Length of the UTF-8 sequence at p (1..4), or 0 when it is not valid (overlong, surrogate, beyond U+10FFFF, cut). */
static size_t utf8_length(const unsigned char *p, size_t left)
{
	if (p[0] < 0x80)
		return 1;
	size_t n = p[0] >= 0xf0 ? 4 : p[0] >= 0xe0 ? 3 : 2;
	if (p[0] < 0xc2 || p[0] > 0xf4 || n > left)
		return 0;
	for (size_t i = 1; i < n; i++) {
		if ((p[i] & 0xc0) != 0x80)
			return 0;
	}
	if ((p[0] == 0xe0 && p[1] < 0xa0) || (p[0] == 0xed && p[1] > 0x9f) || (p[0] == 0xf0 && p[1] < 0x90) ||
	    (p[0] == 0xf4 && p[1] > 0x8f))
		return 0;
	return n;
}

bool text_is_utf8(const char *s, size_t n)
{
	const unsigned char *p = (const unsigned char *)s;
	for (size_t i = 0; i < n;) {
		if ((p[i] < 0x20 && p[i] != '\n' && p[i] != '\t' && p[i] != '\r') || p[i] == 0x7f)
			return false;
		size_t m = utf8_length(p + i, n - i);
		if (m == 0)
			return false;
		i += m;
	}
	return true;
}

bool text_is_line(const char *s, size_t max)
{
	size_t n = strlen(s);
	return n >= 1 && n <= max && strpbrk(s, "\n\r\t") == NULL && text_is_utf8(s, n);
}

char *text_printf(const char *fmt, ...)
{
	va_list ap;
	va_start(ap, fmt);
	int n = vsnprintf(NULL, 0, fmt, ap);
	va_end(ap);
	CHECK(n >= 0);
	char *out = qb_alloc((size_t)n + 1, 1);
	va_start(ap, fmt);
	(void)vsnprintf(out, (size_t)n + 1, fmt, ap);
	va_end(ap);
	return out;
}

uint64_t text_fnv1a(const char *s)
{
	uint64_t h = UINT64_C(0xcbf29ce484222325);
	for (; *s != '\0'; s++)
		h = (h ^ (unsigned char)*s) * UINT64_C(0x100000001b3);
	return h;
}

uint64_t splitmix64(uint64_t x)
{
	uint64_t z = x + UINT64_C(0x9e3779b97f4a7c15);
	z = (z ^ z >> 30) * UINT64_C(0xbf58476d1ce4e5b9);
	z = (z ^ z >> 27) * UINT64_C(0x94d049bb133111eb);
	return z ^ z >> 31;
}

double uniform_from_u64(uint64_t x)
{
	return ((double)(x >> 11) + 0.5) * 0x1p-53;
}
