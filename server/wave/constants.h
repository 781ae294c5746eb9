/*
 * Constants of the signal room, SI. Masses always enter as GM, never G and M apart.
 *
 * Ref: CODATA 2018 (G), IAU 2015 Resolution B3 (nominal solar mass parameter), IAU 2012 (astronomical unit)
 */
#ifndef QB_WAVE_CONSTANTS_H
#define QB_WAVE_CONSTANTS_H

#define WAVE_C_M_PER_S    299792458.0
#define WAVE_GM_SUN_M3_S2 1.3271244e20
#define WAVE_SUN_S        (WAVE_GM_SUN_M3_S2 / (WAVE_C_M_PER_S * WAVE_C_M_PER_S * WAVE_C_M_PER_S))
#define WAVE_SUN_M        (WAVE_GM_SUN_M3_S2 / (WAVE_C_M_PER_S * WAVE_C_M_PER_S))
#define WAVE_MPC_M        3.0856775814913673e22
#define WAVE_EULER_GAMMA  0.5772156649015329
#define WAVE_PI           3.14159265358979323846
#define WAVE_RANGE_FACTOR 2.264777 /* horizon / average range; <w^3>^(-1/3), Finn & Chernoff 1993, recomputed */

#endif
