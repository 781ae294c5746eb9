/*
 * The sinks' table and the one kind there is: files. Samples are streamed, never kept whole: a slot may be hours long.
 */
#include "client/agent/sink.h"

#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#include "server/base/alloc.h"
#include "server/base/buf.h"
#include "server/base/check.h"
#include "server/base/clock.h"
#include "server/base/json.h"
#include "server/base/text.h"

#define NPY_HEADER_BYTES 128

struct sink {
	const struct sink_kind *kind;
	char *dir;
	/* Of the slot in hand. */
	FILE *f;
	char *part, *final;
	struct sink_slot slot;
	char station[64];
	int64_t written;
};

struct sink_kind {
	const char *name, *help;
	enum qb_status (*open)(struct sink *s, const char *arg, struct qb_error *e);
	enum qb_status (*begin)(struct sink *s, struct qb_error *e);
	enum qb_status (*put)(struct sink *s, const double *counts, size_t n, struct qb_error *e);
	enum qb_status (*end)(struct sink *s, struct qb_error *e);
	void (*abandon)(struct sink *s);
};

/* ---- files ---- */

static enum qb_status io_fail(struct qb_error *e, const char *path, const char *what)
{
	return qb_fail(e, QB_IO, path, NULL, "%s: %s", what, strerror(errno));
}

static enum qb_status file_open(struct sink *s, const char *arg, struct qb_error *e)
{
	struct stat info;
	if (mkdir(arg, 0700) != 0 && errno != EEXIST)
		return io_fail(e, arg, "cannot make the directory");
	if (stat(arg, &info) != 0 || !S_ISDIR(info.st_mode))
		return qb_fail(e, QB_IO, arg, "give a directory", "is not a directory");
	s->dir = qb_strdup(arg);
	return QB_OK;
}

/* NumPy format 1.0 with a header of one fixed size. */
static void npy_header(int64_t n, uint8_t out[static NPY_HEADER_BYTES])
{
	memset(out, ' ', NPY_HEADER_BYTES);
	memcpy(out, "\x93NUMPY\x01\x00", 8);
	out[8] = NPY_HEADER_BYTES - 10;
	out[9] = 0;
	int len = snprintf((char *)out + 10, NPY_HEADER_BYTES - 10,
	                   "{'descr': '<f8', 'fortran_order': False, 'shape': (%lld,), }", (long long)n);
	CHECK(len > 0 && len < NPY_HEADER_BYTES - 11);
	out[10 + len] = ' ';
	out[NPY_HEADER_BYTES - 1] = '\n';
}

static void file_forget(struct sink *s)
{
	if (s->f != NULL)
		fclose(s->f);
	s->f = NULL;
	qb_free(s->part);
	qb_free(s->final);
	s->part = s->final = NULL;
}

static void file_abandon(struct sink *s)
{
	if (s->part != NULL)
		unlink(s->part);
	file_forget(s);
}

static enum qb_status file_begin(struct sink *s, struct qb_error *e)
{
	uint8_t header[NPY_HEADER_BYTES];
	enum qb_status st = QB_OK;
	npy_header(s->slot.n_samples, header);
	s->part = text_printf("%s/.slot-%06lld.part", s->dir, (long long)s->slot.slot);
	s->final = text_printf("%s/slot-%06lld.npy", s->dir, (long long)s->slot.slot);
	int fd = open(s->part, O_WRONLY | O_CREAT | O_TRUNC | O_CLOEXEC | O_NOFOLLOW, 0600);
	s->f = fd >= 0 ? fdopen(fd, "wb") : NULL;
	if (s->f == NULL) {
		st = io_fail(e, s->part, "cannot write");
		if (fd >= 0)
			close(fd);
	} else if (fwrite(header, sizeof header, 1, s->f) != 1) {
		st = io_fail(e, s->part, "cannot write");
	}
	if (st != QB_OK)
		file_abandon(s);
	return st;
}

static enum qb_status file_put(struct sink *s, const double *counts, size_t n, struct qb_error *e)
{
	_Static_assert(__BYTE_ORDER__ == __ORDER_LITTLE_ENDIAN__, "sample files are little-endian");
	return fwrite(counts, sizeof *counts, n, s->f) == n ? QB_OK : io_fail(e, s->part, "cannot write");
}

static enum qb_status sync_dir(const char *dir, struct qb_error *e)
{
	int fd = open(dir, O_RDONLY | O_DIRECTORY | O_CLOEXEC);
	enum qb_status st = fd >= 0 && fsync(fd) == 0 ? QB_OK : io_fail(e, dir, "cannot sync");
	if (fd >= 0)
		close(fd);
	return st;
}

/* The side-car first, so that whoever sees the samples finds it. */
static enum qb_status write_sidecar(const struct sink *s, struct qb_error *e)
{
	json_t *j = json_object();
	json_object_set_new(j, "start_gps", json_gps_new(s->slot.start_gps_ns));
	json_object_set_new(j, "rate_hz", json_real(s->slot.rate_hz));
	json_object_set_new(j, "unit", json_string("counts"));
	json_object_set_new(j, "station", json_string(s->station));
	char *text = json_pretty(j);
	char *path = text_printf("%s/slot-%06lld.json", s->dir, (long long)s->slot.slot);
	enum qb_status st = file_write(path, 0600, text, strlen(text), e);
	qb_free(path);
	qb_free(text);
	json_decref(j);
	return st;
}

static enum qb_status file_end(struct sink *s, struct qb_error *e)
{
	enum qb_status st = write_sidecar(s, e);
	if (st == QB_OK && (fflush(s->f) != 0 || fsync(fileno(s->f)) != 0))
		st = io_fail(e, s->part, "cannot write");
	if (st == QB_OK && rename(s->part, s->final) != 0)
		st = io_fail(e, s->final, "cannot rename");
	if (st == QB_OK)
		st = sync_dir(s->dir, e);
	if (st != QB_OK)
		file_abandon(s);
	else
		file_forget(s);
	return st;
}

static const struct sink_kind kinds[] = {
    {"file", "file:DIR   DIR/slot-NNNNNN.npy, float64 counts, one file a slot, with a .json side-car", file_open,
     file_begin, file_put, file_end, file_abandon},
};
#define N_KINDS ((int)(sizeof kinds / sizeof kinds[0]))

/* ---- all kinds ---- */

const char *sink_help(int i)
{
	return i >= 0 && i < N_KINDS ? kinds[i].help : NULL;
}

enum qb_status sink_open(const char *spec, struct sink **out, struct qb_error *e)
{
	const char *colon = strchr(spec, ':');
	for (int i = 0; colon != NULL && colon[1] != '\0' && i < N_KINDS; i++) {
		size_t n = (size_t)(colon - spec);
		if (strlen(kinds[i].name) != n || memcmp(kinds[i].name, spec, n) != 0)
			continue;
		struct sink *s = QB_NEW(struct sink);
		s->kind = &kinds[i];
		enum qb_status st = s->kind->open(s, colon + 1, e);
		if (st == QB_OK)
			*out = s;
		else
			sink_close(&s);
		return st;
	}
	return qb_fail(e, QB_USAGE, "--sink", "give file:DIR", "does not know '%.80s'", spec);
}

void sink_close(struct sink **s)
{
	if (*s == NULL)
		return;
	sink_abandon(*s);
	qb_free((*s)->dir);
	qb_free(*s);
	*s = NULL;
}

enum qb_status sink_begin(struct sink *s, const struct sink_slot *slot, struct qb_error *e)
{
	sink_abandon(s);
	s->slot = *slot;
	snprintf(s->station, sizeof s->station, "%s", slot->station);
	s->slot.station = s->station;
	s->written = 0;
	return s->kind->begin(s, e);
}

enum qb_status sink_put(struct sink *s, const double *counts, size_t n, struct qb_error *e)
{
	CHECK(s->f != NULL && (int64_t)n <= s->slot.n_samples - s->written);
	s->written += (int64_t)n;
	return s->kind->put(s, counts, n, e);
}

enum qb_status sink_end(struct sink *s, struct qb_error *e)
{
	CHECK(s->f != NULL && s->written == s->slot.n_samples);
	return s->kind->end(s, e);
}

void sink_abandon(struct sink *s)
{
	s->kind->abandon(s);
}
