/* NumPy arrays and side-cars; see npy.h. */
#include "client/cli/npy.h"

#include <errno.h>
#include <fcntl.h>
#include <math.h>
#include <stdio.h>
#include <string.h>
#include <sys/mman.h>
#include <sys/stat.h>
#include <unistd.h>

#include "server/base/alloc.h"
#include "server/base/buf.h"
#include "server/base/check.h"
#include "server/base/text.h"

#define HEADER_BYTES 128
#define SIDE_MAX     ((size_t)64 << 10)

struct npy_out {
	FILE *f;
	char *path, *part;
	size_t left;
};

static enum qb_status io_fail(struct qb_error *e, const char *path, const char *what)
{
	return qb_fail(e, QB_IO, path, NULL, "%s: %s", what, strerror(errno));
}

enum qb_status npy_create(const char *path, size_t rows, size_t n, struct npy_out **out, struct qb_error *e)
{
	char header[HEADER_BYTES + 1], shape[64];
	if (rows > 0)
		(void)snprintf(shape, sizeof shape, "(%zu, %zu)", rows, n);
	else
		(void)snprintf(shape, sizeof shape, "(%zu,)", n);
	/* magic, version 1.0, length of the rest; the dictionary is padded with blanks and ends with a line feed */
	memset(header, ' ', HEADER_BYTES);
	memcpy(header, "\x93NUMPY\x01\x00\x76\x00", 10);
	int len =
	    snprintf(header + 10, HEADER_BYTES - 10, "{'descr': '<f8', 'fortran_order': False, 'shape': %s, }", shape);
	header[10 + len] = ' ';
	header[HEADER_BYTES - 1] = '\n';
	struct npy_out *o = QB_NEW(struct npy_out);
	*out = o;
	o->path = qb_strdup(path);
	o->part = text_printf("%s.part", path);
	o->left = n * (rows > 0 ? rows : 1);
	o->f = fopen(o->part, "wb");
	enum qb_status st = QB_OK;
	if (o->f == NULL)
		st = io_fail(e, path, "can't be made");
	else if (fwrite(header, 1, HEADER_BYTES, o->f) != HEADER_BYTES)
		st = io_fail(e, path, "can't be written");
	if (st != QB_OK)
		npy_abandon(out);
	return st;
}

enum qb_status npy_put(struct npy_out *out, const double *values, size_t n, struct qb_error *e)
{
	CHECK(n <= out->left);
	out->left -= n;
	if (fwrite(values, sizeof *values, n, out->f) != n)
		return io_fail(e, out->path, "can't be written");
	return QB_OK;
}

void npy_abandon(struct npy_out **out)
{
	struct npy_out *o = *out;
	if (o == NULL)
		return;
	if (o->f != NULL) {
		(void)fclose(o->f);
		(void)unlink(o->part);
	}
	qb_free(o->path);
	qb_free(o->part);
	qb_free(o);
	*out = NULL;
}

enum qb_status npy_close(struct npy_out **out, struct qb_error *e)
{
	struct npy_out *o = *out;
	enum qb_status st = QB_OK;
	if (o == NULL)
		return QB_OK;
	CHECK(o->left == 0);
	int closed = fclose(o->f);
	o->f = NULL;
	if (closed != 0 || rename(o->part, o->path) != 0) {
		st = io_fail(e, o->path, "can't be written");
		(void)unlink(o->part);
	}
	npy_abandon(out);
	return st;
}

/* The one dictionary that is accepted: what every writer of a flat float64 array makes. */
static bool flat_header(const char *dict, size_t *n)
{
	const char *shape = strstr(dict, "'shape':");
	unsigned long long count;
	char after[2];
	if (strstr(dict, "'descr': '<f8'") == NULL || strstr(dict, "'fortran_order': False") == NULL || shape == NULL)
		return false;
	if (sscanf(shape, "'shape': (%llu,%1[)]", &count, after) != 2)
		return false;
	*n = (size_t)count;
	return true;
}

static enum qb_status read_header(struct npy_in *in, const char *path, struct qb_error *e)
{
	const uint8_t *p = in->map;
	char dict[1024];
	size_t at = 0, n = 0;
	if (in->map_bytes >= 12 && memcmp(p, "\x93NUMPY", 6) == 0 && (p[6] == 1 || p[6] == 2))
		at = p[6] == 1 ? 10 + (size_t)(p[8] | p[9] << 8)
		               : 12 + ((size_t)p[8] | (size_t)p[9] << 8 | (size_t)p[10] << 16 | (size_t)p[11] << 24);
	size_t from = at > 0 && p[6] == 1 ? 10 : 12;
	if (at == 0 || at > in->map_bytes || at - from >= sizeof dict || at % sizeof(double) != 0)
		return qb_fail(e, QB_FORMAT, path, NULL, "is not a NumPy array");
	memcpy(dict, p + from, at - from);
	dict[at - from] = '\0';
	if (!flat_header(dict, &n))
		return qb_fail(e, QB_FORMAT, path, "save a one-dimensional float64 array",
		               "is not a flat array of float64");
	if (n > in->map_bytes / sizeof(double) || at + n * sizeof(double) != in->map_bytes)
		return qb_fail(e, QB_FORMAT, path, NULL, "is cut short or has bytes too many");
	in->values = (const double *)(const void *)(p + at);
	in->n = n;
	return QB_OK;
}

enum qb_status npy_map(const char *path, struct npy_in *in, struct qb_error *e)
{
	struct stat info;
	*in = (struct npy_in){0};
	int fd = open(path, O_RDONLY | O_CLOEXEC);
	if (fd < 0)
		return io_fail(e, path, "can't be read");
	enum qb_status st = QB_OK;
	if (fstat(fd, &info) != 0 || !S_ISREG(info.st_mode) || info.st_size == 0)
		st = qb_fail(e, QB_FORMAT, path, NULL, "is not a NumPy array");
	if (st == QB_OK) {
		in->map_bytes = (size_t)info.st_size;
		in->map = mmap(NULL, in->map_bytes, PROT_READ, MAP_PRIVATE, fd, 0);
		if (in->map == MAP_FAILED) {
			in->map = NULL;
			st = io_fail(e, path, "can't be mapped");
		}
	}
	(void)close(fd);
	if (st == QB_OK)
		st = read_header(in, path, e);
	if (st != QB_OK)
		npy_unmap(in);
	return st;
}

void npy_unmap(struct npy_in *in)
{
	if (in->map != NULL)
		(void)munmap(in->map, in->map_bytes);
	*in = (struct npy_in){0};
}

static char *side_path(const char *path)
{
	size_t n = strlen(path);
	if (n > 4 && strcmp(path + n - 4, ".npy") == 0)
		n -= 4;
	return text_printf("%.*s.json", (int)n, path);
}

enum qb_status npy_side_write(const char *path, const struct npy_side *side, struct qb_error *e)
{
	json_t *doc = json_object();
	char *name = side_path(path);
	if (side->station != NULL)
		json_object_set_new(doc, "station", json_string(side->station));
	json_object_set_new(doc, "start_gps", json_gps_new(side->start_gps_ns));
	json_object_set_new(doc, "rate_hz", json_real(side->rate_hz));
	json_object_set_new(doc, "unit", json_string(side->unit));
	char *text = json_pretty(doc);
	enum qb_status st = file_write(name, 0644, text, strlen(text), e);
	qb_free(text);
	qb_free(name);
	json_decref(doc);
	return st;
}

enum qb_status npy_side_read(const char *path, struct npy_side *side, struct qb_error *e)
{
	struct buf b = {0};
	json_t *doc = NULL;
	const char *unit;
	char *name = side_path(path);
	enum qb_status st = file_read(name, SIDE_MAX, &b, e);
	if (st == QB_OK)
		st = json_read(b.data != NULL ? (const char *)b.data : "", b.len, name, &doc, e);
	if (st == QB_OK)
		st = json_gps(doc, "start_gps", name, &side->start_gps_ns, e);
	if (st == QB_OK)
		st = json_num(doc, "rate_hz", name, &side->rate_hz, e);
	if (st == QB_OK)
		st = json_str(doc, "unit", name, &unit, e);
	if (st == QB_OK && strcmp(unit, side->unit) != 0)
		st = qb_fail(e, QB_FORMAT, name, NULL, "the unit is '%.40s'; accepted: %s", unit, side->unit);
	if (st == QB_OK && !(side->rate_hz >= 1 && side->rate_hz <= 1e6))
		st = qb_fail(e, QB_RANGE, name, NULL, "rate_hz is %g; accepted: 1 to 1000000", side->rate_hz);
	json_decref(doc);
	buf_free(&b);
	qb_free(name);
	return st;
}
