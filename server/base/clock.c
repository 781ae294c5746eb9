/* GPS time and UTC. */
#include "server/base/clock.h"

#include <inttypes.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

#include "server/base/check.h"
#include "server/base/text.h"

#define GPS_EPOCH_UNIX INT64_C(315964800) /* 1980-01-06T00:00:00Z */
#define GPS_MAX_S      (INT64_C(1) << 33)

/* GPS second at which each leap second 23:59:60 begins (IERS Bulletin C series; checked against Astropy). */
static const int64_t leaps[] = {46828800,  78364801,  109900802, 173059203,  252028804,  315187205,
                                346723206, 393984007, 425520008, 457056009,  504489610,  551750411,
                                599184012, 820108813, 914803214, 1025136015, 1119744016, 1167264017};
#define N_LEAPS ((int)(sizeof leaps / sizeof leaps[0]))

static int64_t floor_div(int64_t a, int64_t b)
{
	return a / b - (a % b < 0);
}

int clock_leap_seconds(int64_t gps_ns)
{
	int n = 0;
	while (n < N_LEAPS && gps_ns >= leaps[n] * NS_PER_S)
		n++;
	return n;
}

int64_t clock_gps_from_unix(int64_t unix_s, int64_t ns)
{
	int64_t s = unix_s - GPS_EPOCH_UNIX;
	int n = 0;
	/* POSIX has no leap seconds: the second after leap n+1 has the POSIX value leaps[n] + 1 - (n + 1). */
	while (n < N_LEAPS && s >= leaps[n] - n)
		n++;
	return (s + n) * NS_PER_S + ns;
}

void clock_unix_from_gps(int64_t gps_ns, int64_t *unix_s, int64_t *ns, bool *in_leap)
{
	int64_t s = floor_div(gps_ns, NS_PER_S);
	int n = clock_leap_seconds(gps_ns);
	*in_leap = n > 0 && s == leaps[n - 1];
	*unix_s = s - n + GPS_EPOCH_UNIX;
	*ns = gps_ns - s * NS_PER_S;
}

static int64_t system_now(void *state)
{
	(void)state;
	struct timespec t;
	CHECK(clock_gettime(CLOCK_REALTIME, &t) == 0);
	return clock_gps_from_unix(t.tv_sec, t.tv_nsec);
}

struct clock_source clock_system(void)
{
	return (struct clock_source){.now_gps_ns = system_now};
}

int64_t clock_now(const struct clock_source *c)
{
	return c->now_gps_ns(c->state);
}

/* ".345" for the nanoseconds, or nothing when they are zero. */
static void fraction_text(int64_t ns, char out[static 12])
{
	if (ns == 0) {
		out[0] = '\0';
		return;
	}
	(void)snprintf(out, 12, ".%09" PRId64, ns);
	for (size_t i = strlen(out); i > 1 && out[i - 1] == '0'; i--)
		out[i - 1] = '\0';
}

static bool fraction_parse(const char *s, const char **end, int64_t *ns)
{
	*ns = 0;
	if (*s == '.') {
		int64_t scale = NS_PER_S / 10;
		const char *p = s + 1;
		for (; *p >= '0' && *p <= '9' && scale > 0; p++, scale /= 10)
			*ns += (*p - '0') * scale;
		if (p == s + 1)
			return false;
		s = p;
	}
	*end = s;
	return true;
}

const char *clock_gps_text(int64_t gps_ns, char *out, size_t size)
{
	char f[12];
	bool minus = gps_ns < 0;
	uint64_t v = minus ? -(uint64_t)gps_ns : (uint64_t)gps_ns;
	fraction_text((int64_t)(v % (uint64_t)NS_PER_S), f);
	(void)snprintf(out, size, "%s%" PRIu64 "%s", minus ? "-" : "", v / (uint64_t)NS_PER_S, f);
	return out;
}

bool clock_gps_parse(const char *s, int64_t *gps_ns)
{
	int64_t whole = 0, ns;
	size_t digits = strspn(s, "0123456789");
	if (digits == 0 || digits > 10 || (digits > 1 && s[0] == '0'))
		return false;
	for (size_t i = 0; i < digits; i++)
		whole = whole * 10 + (s[i] - '0');
	const char *end;
	if (whole >= GPS_MAX_S || !fraction_parse(s + digits, &end, &ns) || *end != '\0')
		return false;
	*gps_ns = whole * NS_PER_S + ns;
	return true;
}

/* Days since 1970-01-01 of a proleptic Gregorian date, and back. */
static int64_t days_from_date(int64_t y, int64_t m, int64_t d)
{
	y -= m <= 2;
	int64_t era = floor_div(y, 400), yoe = y - era * 400;
	int64_t doy = (153 * (m + (m > 2 ? -3 : 9)) + 2) / 5 + d - 1;
	return era * 146097 + yoe * 365 + yoe / 4 - yoe / 100 + doy - 719468;
}

static void date_from_days(int64_t z, int64_t *y, int64_t *m, int64_t *d)
{
	z += 719468;
	int64_t era = floor_div(z, 146097), doe = z - era * 146097;
	int64_t yoe = (doe - doe / 1460 + doe / 36524 - doe / 146096) / 365;
	int64_t doy = doe - (365 * yoe + yoe / 4 - yoe / 100), mp = (5 * doy + 2) / 153;
	*d = doy - (153 * mp + 2) / 5 + 1;
	*m = mp < 10 ? mp + 3 : mp - 9;
	*y = yoe + era * 400 + (*m <= 2);
}

const char *clock_utc_text(int64_t gps_ns, char *out, size_t size)
{
	int64_t u, ns, y, m, d;
	bool leap;
	clock_unix_from_gps(gps_ns, &u, &ns, &leap);
	int64_t days = floor_div(u, 86400), t = u - days * 86400;
	date_from_days(days, &y, &m, &d);
	char f[12];
	fraction_text(ns, f);
	(void)snprintf(out, size,
	               "%04" PRId64 "-%02" PRId64 "-%02" PRId64 "T%02" PRId64 ":%02" PRId64 ":%02" PRId64 "%sZ", y, m,
	               d, t / 3600, t / 60 % 60, leap ? 60 : t % 60, f);
	return out;
}

static bool digits_at(const char *s, size_t n, int64_t *v)
{
	*v = 0;
	for (size_t i = 0; i < n; i++) {
		if (s[i] < '0' || s[i] > '9')
			return false;
		*v = *v * 10 + (s[i] - '0');
	}
	return true;
}

bool clock_utc_parse(const char *s, int64_t *gps_ns)
{
	static const int month_days[] = {31, 29, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31};
	int64_t y, mo, d, h, mi, sec, ns;
	const char *end;
	if (strlen(s) < 20 || s[4] != '-' || s[7] != '-' || s[10] != 'T' || s[13] != ':' || s[16] != ':')
		return false;
	if (!digits_at(s, 4, &y) || !digits_at(s + 5, 2, &mo) || !digits_at(s + 8, 2, &d) ||
	    !digits_at(s + 11, 2, &h) || !digits_at(s + 14, 2, &mi) || !digits_at(s + 17, 2, &sec) ||
	    !fraction_parse(s + 19, &end, &ns) || strcmp(end, "Z") != 0)
		return false;
	if (y < 1980 || y > 2250 || mo < 1 || mo > 12 || d < 1 || d > month_days[mo - 1] || h > 23 || mi > 59 ||
	    sec > 60)
		return false;
	bool leap_year = (y % 4 == 0 && y % 100 != 0) || y % 400 == 0;
	if (mo == 2 && d == 29 && !leap_year)
		return false;
	int64_t u = days_from_date(y, mo, d) * 86400 + h * 3600 + mi * 60 + (sec == 60 ? 59 : sec);
	int64_t gps = clock_gps_from_unix(u, ns);
	if (sec == 60) {
		gps += NS_PER_S;
		int64_t u2, ns2;
		bool leap;
		clock_unix_from_gps(gps, &u2, &ns2, &leap);
		if (!leap)
			return false;
	}
	if (gps < 0 || gps >= GPS_MAX_S * NS_PER_S)
		return false;
	*gps_ns = gps;
	return true;
}

const char *clock_people_text(int64_t gps_ns, char *out, size_t size)
{
	int64_t unix_s, ns;
	bool in_leap;
	struct tm local;
	char when[32], zone[16];
	clock_unix_from_gps(gps_ns, &unix_s, &ns, &in_leap);
	(void)clock_utc_text(gps_ns - ns, out, size);
	time_t t = (time_t)unix_s;
	tzset();
	if (localtime_r(&t, &local) == NULL || local.tm_gmtoff == 0)
		return out;
	long minutes = local.tm_gmtoff / 60;
	size_t n = strlen(out);
	(void)strftime(when, sizeof when, "%a %H:%M:%S", &local);
	(void)strftime(zone, sizeof zone, "%Z", &local);
	(void)snprintf(out + n, size - n, " (%s %s, %c%02ld:%02ld)", when, zone, minutes < 0 ? '-' : '+',
	               labs(minutes) / 60, labs(minutes) % 60);
	return out;
}
