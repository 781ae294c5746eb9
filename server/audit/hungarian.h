/*
 * The dense assignment problem in exact integers. Kept apart from the matching rules so that the one intricate
 * algorithm of the audit can be read, and tested, alone.
 */
#ifndef QB_AUDIT_HUNGARIAN_H
#define QB_AUDIT_HUNGARIAN_H

#include <stddef.h>

__extension__ typedef __int128 audit_wide;

/*
 * Assigns every row its own column so that the sum of weights is largest.
 *
 * Given:    weight     rows x columns, row by row, each from 0 to 2^100; rows <= columns
 * Returned: column_of  one column per row
 * Ref:      Kuhn 1955, Munkres 1957; shortest augmenting paths with potentials, rows^2 x columns steps
 */
void hungarian_assign(const audit_wide *weight, size_t rows, size_t columns, size_t *column_of);

#endif
