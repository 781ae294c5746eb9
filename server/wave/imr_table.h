/* The table of calibrated coefficients, apart from the formulas because it is data: lambda00, 10, 01, 11, 21, 02
 * ... 23. */
#ifndef QB_WAVE_IMR_TABLE_H
#define QB_WAVE_IMR_TABLE_H

#include "server/wave/imr.h"

extern const double imr_table[IMR_COEFFICIENTS][11];

#endif
