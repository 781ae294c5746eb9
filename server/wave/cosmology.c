/* Distances in a flat expanding universe by composite Gauss-Legendre quadrature. */
#include "server/wave/cosmology.h"

#include <math.h>

#include "server/wave/constants.h"

double cosmology_hubble_distance_mpc(const struct cosmology *c)
{
	return WAVE_C_M_PER_S / 1000 / c->hubble_km_per_s_per_mpc;
}

double cosmology_expansion(const struct cosmology *c, double z)
{
	double a = 1 + z;
	return sqrt(c->matter_density * a * a * a + 1 - c->matter_density);
}

double cosmology_comoving_distance_mpc(const struct cosmology *c, double z)
{
	/* 10-point nodes and weights on [-1, 1], symmetric */
	static const double x[5] = {0.1488743389816312, 0.4333953941292472, 0.6794095682990244, 0.8650633666889845,
	                            0.9739065285171717};
	static const double w[5] = {0.2955242247147529, 0.2692667193099963, 0.2190863625159820, 0.1494513491505806,
	                            0.0666713443086881};
	int panels = z < 1 ? 8 : 32;
	double sum = 0, h = z / panels / 2;
	for (int p = 0; p < panels; p++) {
		double mid = (2 * p + 1) * h;
		for (int i = 0; i < 5; i++)
			sum += w[i] * (1 / cosmology_expansion(c, mid - h * x[i]) +
			               1 / cosmology_expansion(c, mid + h * x[i]));
	}
	return cosmology_hubble_distance_mpc(c) * sum * h;
}

double cosmology_luminosity_distance_mpc(const struct cosmology *c, double z)
{
	return (1 + z) * cosmology_comoving_distance_mpc(c, z);
}

double cosmology_redshift(const struct cosmology *c, double d)
{
	/* Newton's method; D_L(z) is convex and rising, so it converges from the linear guess. */
	double z = d / cosmology_hubble_distance_mpc(c);
	if (!(d > 0))
		return 0;
	for (int i = 0; i < 60; i++) {
		double dc = cosmology_comoving_distance_mpc(c, z);
		double slope = dc + (1 + z) * cosmology_hubble_distance_mpc(c) / cosmology_expansion(c, z);
		double step = ((1 + z) * dc - d) / slope;
		z -= step;
		if (z < 0)
			z = 0;
		if (fabs(step) <= 1e-15 * (1 + z))
			break;
	}
	return z;
}

double cosmology_volume_mpc3_per_redshift(const struct cosmology *c, double z)
{
	double dc = cosmology_comoving_distance_mpc(c, z);
	return 4 * WAVE_PI * cosmology_hubble_distance_mpc(c) * dc * dc / cosmology_expansion(c, z);
}
