/*
 * Arrays of samples on disk: NumPy format 1.0, little-endian float64, written in blocks and read through a memory map,
 * so that a day of samples needs no day of memory; and their side-cars.
 */
#ifndef QB_CLIENT_CLI_NPY_H
#define QB_CLIENT_CLI_NPY_H

#include <stddef.h>
#include <stdint.h>

#include "server/base/err.h"
#include "server/base/json.h"

struct npy_out;
/*
 * Given:    rows      0: a flat array of n; else (rows, n)
 * Returned: *out      to be filled with rows * n values (at least n) by npy_put, then npy_close
 * Errors:   QB_IO
 */
enum qb_status npy_create(const char *path, size_t rows, size_t n, struct npy_out **out,
                          struct qb_error *e) QB_MUST_USE;
enum qb_status npy_put(struct npy_out *out, const double *values, size_t n, struct qb_error *e) QB_MUST_USE;
/* The file takes its name only here, when it is complete; frees *out also on failure. NULL is fine. */
enum qb_status npy_close(struct npy_out **out, struct qb_error *e) QB_MUST_USE;
void npy_abandon(struct npy_out **out);

struct npy_in {
	const double *values; /* n of them */
	size_t n;
	void *map; /* owned: npy_unmap */
	size_t map_bytes;
};
/* A flat float64 array. Errors: QB_IO; QB_FORMAT for anything else. */
enum qb_status npy_map(const char *path, struct npy_in *in, struct qb_error *e) QB_MUST_USE;
void npy_unmap(struct npy_in *in);

/* What the side-car of an array says. */
struct npy_side {
	int64_t start_gps_ns;
	double rate_hz;
	const char *unit;
	const char *station; /* NULL: of no station */
};
/* `path` is the array's; the side-car has .json in place of .npy. */
enum qb_status npy_side_write(const char *path, const struct npy_side *side, struct qb_error *e) QB_MUST_USE;
/* Reads start and rate, and refuses another unit than side->unit. */
enum qb_status npy_side_read(const char *path, struct npy_side *side, struct qb_error *e) QB_MUST_USE;

#endif
