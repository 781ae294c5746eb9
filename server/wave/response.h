/*
 * Response of a station to a wave: where the sky is over it, the antenna functions, the delay from Earth's centre, and
 * the transfer of arms that are not short.
 *
 * Conventions (version 1): wave frame of Anderson, Brady, Creighton & Flanagan 2001 = Jaranowski, Krolak & Schutz 1998;
 * at polarisation 0, X points west and Y north. h = F+ h+ + Fx hx. Fourier kernel exp(-2 pi i f t).
 */
#ifndef QB_WAVE_RESPONSE_H
#define QB_WAVE_RESPONSE_H

#include <complex.h>
#include <stdint.h>

#include "server/wave/network.h"
#include "server/wave/source.h"

enum wave_frame {
	WAVE_PRECISE, /* celestial-to-terrestrial matrix (ERFA, IAU 2006/2000A), no polar motion, UT1 = UTC: the default
	               */
	WAVE_SIMPLE   /* J2000 coordinates used with mean sidereal time alone */
};

struct wave_earth {
	enum wave_frame frame;
	double to_celestial[3][3]; /* Earth-fixed -> celestial (precise), or identity (simple) */
	double sidereal_rad;       /* simple: Greenwich mean sidereal time; precise: 0 */
};
/* Earth's orientation at a GPS time; dut1_s = UT1 - UTC. */
void earth_at(int64_t gps_ns, double dut1_s, enum wave_frame frame, struct wave_earth *out);
/* Greenwich mean sidereal time, IAU 2006, rad in [0, 2 pi). */
double earth_sidereal_rad(int64_t gps_ns, double dut1_s);

struct wave_response {
	double f_plus, f_cross; /* long-wavelength */
	double delay_s;         /* arrival at the station minus arrival at Earth's centre */
	/* for finite arms: arm . e+ . arm, arm . ex . arm, and the cosine to the propagation direction, for x and y */
	double plus[2], cross[2], mu[2], travel_s;
};
void response_at(const struct wave_station *station, const struct wave_earth *earth, double right_ascension_rad,
                 double declination_rad, double polarization_rad, struct wave_response *out);

/* Round-trip transfer of one arm D(f, mu), T = L/c; Rakhmanov, Romano & Whelan 2008. With the common exp(-2 pi i f T).
 */
double complex arm_transfer(double f_hz, double mu, double travel_s);
/* Antenna functions at a frequency with finite arms, the common delay removed. */
void response_finite(const struct wave_response *r, double f_hz, double complex *f_plus, double complex *f_cross);

#endif
