/* Antenna functions, delays, Earth's orientation. */
#include "server/wave/response.h"

#include <erfa.h>
#include <math.h>
#include <string.h>

#include "server/base/clock.h"
#include "server/wave/constants.h"

#define GPS_EPOCH_JD   2444244.5
#define TT_MINUS_GPS_S 51.184

static double dot(const double a[3], const double b[3])
{
	return a[0] * b[0] + a[1] * b[1] + a[2] * b[2];
}

/* Two-part Julian dates of UT1 and TT; the day and the fraction apart, to keep digits. */
static void julian(int64_t gps_ns, double dut1_s, double ut1[2], double tt[2])
{
	int64_t day_ns = 86400 * NS_PER_S, utc_ns = gps_ns - clock_leap_seconds(gps_ns) * NS_PER_S;
	int64_t u = utc_ns / day_ns, t = gps_ns / day_ns;
	ut1[0] = GPS_EPOCH_JD + (double)u;
	ut1[1] = ((double)(utc_ns - u * day_ns) / 1e9 + dut1_s) / 86400;
	tt[0] = GPS_EPOCH_JD + (double)t;
	tt[1] = ((double)(gps_ns - t * day_ns) / 1e9 + TT_MINUS_GPS_S) / 86400;
}

double earth_sidereal_rad(int64_t gps_ns, double dut1_s)
{
	double ut1[2], tt[2];
	julian(gps_ns, dut1_s, ut1, tt);
	return eraGmst06(ut1[0], ut1[1], tt[0], tt[1]);
}

void earth_at(int64_t gps_ns, double dut1_s, enum wave_frame frame, struct wave_earth *out)
{
	double ut1[2], tt[2], to_terrestrial[3][3];
	memset(out, 0, sizeof *out);
	out->frame = frame;
	julian(gps_ns, dut1_s, ut1, tt);
	if (frame == WAVE_SIMPLE) {
		out->sidereal_rad = eraGmst06(ut1[0], ut1[1], tt[0], tt[1]);
		for (int i = 0; i < 3; i++)
			out->to_celestial[i][i] = 1;
		return;
	}
	eraC2t06a(tt[0], tt[1], ut1[0], ut1[1], 0, 0, to_terrestrial);
	for (int i = 0; i < 3; i++) {
		for (int j = 0; j < 3; j++)
			out->to_celestial[i][j] = to_terrestrial[j][i];
	}
}

static void turn(const struct wave_earth *earth, const double v[3], double out[3])
{
	for (int i = 0; i < 3; i++)
		out[i] = dot(earth->to_celestial[i], v);
}

void response_at(const struct wave_station *station, const struct wave_earth *earth, double ra, double dec, double psi,
                 struct wave_response *out)
{
	double g = earth->sidereal_rad - ra, sg = sin(g), cg = cos(g), sd = sin(dec), cd = cos(dec), sp = sin(psi),
	       cp = cos(psi);
	const double n[3] = {cd * cg, -cd * sg, sd};
	const double x[3] = {-cp * sg - sp * cg * sd, -cp * cg + sp * sg * sd, sp * cd};
	const double y[3] = {sp * sg - cp * cg * sd, sp * cg + cp * sg * sd, cp * cd};
	double r[3], arm[2][3];
	turn(earth, station->position_m, r);
	turn(earth, station->x_arm, arm[0]);
	turn(earth, station->y_arm, arm[1]);
	for (int i = 0; i < 2; i++) {
		double ax = dot(arm[i], x), ay = dot(arm[i], y);
		out->plus[i] = ax * ax - ay * ay;
		out->cross[i] = 2 * ax * ay;
		out->mu[i] = -dot(arm[i], n);
	}
	out->f_plus = (out->plus[0] - out->plus[1]) / 2;
	out->f_cross = (out->cross[0] - out->cross[1]) / 2;
	out->delay_s = -dot(n, r) / WAVE_C_M_PER_S;
	out->travel_s = station->arm_length_m / WAVE_C_M_PER_S;
}

static double sinc(double x)
{
	return fabs(x) < 1e-8 ? 1 : sin(WAVE_PI * x) / (WAVE_PI * x);
}

double complex arm_transfer(double f, double mu, double t)
{
	double x = WAVE_PI * f * t;
	return 0.5 *
	       (sinc(f * t * (1 - mu)) * cexp(-I * x * (3 + mu)) + sinc(f * t * (1 + mu)) * cexp(-I * x * (1 + mu)));
}

void response_finite(const struct wave_response *r, double f, double complex *f_plus, double complex *f_cross)
{
	double x = WAVE_PI * f * r->travel_s;
	double complex d[2];
	for (int i = 0; i < 2; i++) {
		double mu = r->mu[i], s1 = sinc(f * r->travel_s * (1 - mu)), s2 = sinc(f * r->travel_s * (1 + mu));
		/* arm_transfer times exp(+2 pi i f T) */
		d[i] = 0.5 * ((s1 * cos(x * (1 + mu)) + s2 * cos(x * (1 - mu))) +
		              I * (s2 * sin(x * (1 - mu)) - s1 * sin(x * (1 + mu))));
	}
	*f_plus = (r->plus[0] * d[0] - r->plus[1] * d[1]) / 2;
	*f_cross = (r->cross[0] * d[0] - r->cross[1] * d[1]) / 2;
}
