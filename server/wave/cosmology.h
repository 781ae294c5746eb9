/* Flat expanding universe with matter and a constant: distances and volumes. Ref: Hogg 1999 (astro-ph/9905116). */
#ifndef QB_WAVE_COSMOLOGY_H
#define QB_WAVE_COSMOLOGY_H

struct cosmology {
	double hubble_km_per_s_per_mpc; /* > 0 */
	double matter_density;          /* 0 .. 1 */
};
double cosmology_hubble_distance_mpc(const struct cosmology *c);             /* c / H0 */
double cosmology_expansion(const struct cosmology *c, double z);             /* E(z) */
double cosmology_comoving_distance_mpc(const struct cosmology *c, double z); /* z >= 0 */
double cosmology_luminosity_distance_mpc(const struct cosmology *c, double z);
double cosmology_redshift(const struct cosmology *c, double luminosity_distance_mpc);
double cosmology_volume_mpc3_per_redshift(const struct cosmology *c, double z); /* dV/dz over the whole sky */

#endif
