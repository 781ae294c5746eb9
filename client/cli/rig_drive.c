/*
 * Drives to strain: only the part of a slot that is not silent is transformed, through the actuator's forward transfer,
 * to the rate and the grid of the recording.
 */
#include "client/cli/rig_drive.h"

#include <dirent.h>
#include <errno.h>
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "client/cli/npy.h"
#include "server/base/alloc.h"
#include "server/base/clock.h"
#include "server/base/text.h"
#include "server/wave/actuation.h"
#include "server/wave/fft.h"
#include "server/wave/spectrum.h"

#define FILES_MAX 1000000
#define SPAN_MAX  ((size_t)1 << 27) /* samples of one transform */
/* The recording is high-passed here: below it a pendulum would ring for minutes and tell nothing. */
#define HIGH_PASS_HZ 5.0
#define PAD_S        4.0 /* of silence around a drive: the tails of the high pass */

/* Strain caused by one drive, on the recording's grid. */
struct piece {
	int64_t at; /* sample of the run */
	size_t n;
	double *strain;
	struct piece *next;
};

struct rig_drives {
	const struct wave_station *station;
	const struct rig_run *run;
	char *dir;
	char **names; /* ascending */
	int n_names, next;
	int64_t next_at; /* first sample that the next file could touch */
	struct piece *pieces;
	int played;
};

static int by_name(const void *a, const void *b)
{
	return strcmp(*(char *const *)a, *(char *const *)b);
}

static bool is_slot(const char *name)
{
	size_t n = strlen(name);
	return n > 9 && strncmp(name, "slot-", 5) == 0 && strcmp(name + n - 4, ".npy") == 0;
}

static enum qb_status list_files(struct rig_drives *d, struct qb_error *e)
{
	DIR *dir = d->dir != NULL ? opendir(d->dir) : NULL;
	struct dirent *entry;
	if (dir == NULL)
		return d->dir == NULL || errno == ENOENT ? QB_OK
		                                         : qb_fail(e, QB_IO, d->dir, NULL, "%s", strerror(errno));
	int cap = 0;
	while ((entry = readdir(dir)) != NULL && d->n_names < FILES_MAX) {
		if (!is_slot(entry->d_name))
			continue;
		if (d->n_names == cap) {
			cap = cap > 0 ? 2 * cap : 64;
			d->names = qb_realloc(d->names, (size_t)cap, sizeof *d->names);
		}
		d->names[d->n_names++] = qb_strdup(entry->d_name);
	}
	(void)closedir(dir);
	if (d->n_names > 0)
		qsort(d->names, (size_t)d->n_names, sizeof *d->names, by_name);
	return QB_OK;
}

/* A drive's span with whole seconds of padding, so that both rates have a whole number of samples. */
struct span {
	size_t first, n;      /* samples of the file that are not silent */
	size_t length;        /* of the transform at the drive's rate */
	size_t lead;          /* silence before the drive, samples */
	size_t length_out;    /* at the recording's rate */
	int64_t start_gps_ns; /* of the transform */
};

static enum qb_status find_span(const struct npy_in *in, const struct npy_side *side, double rate_out, struct span *s,
                                const char *path, struct qb_error *e)
{
	size_t first = 0, last = in->n;
	while (first < in->n && in->values[first] == 0)
		first++;
	while (last > first && in->values[last - 1] == 0)
		last--;
	*s = (struct span){.first = first, .n = last - first};
	if (s->n == 0)
		return QB_OK;
	double seconds = ceil((double)s->n / side->rate_hz + 2 * PAD_S);
	if (side->rate_hz != floor(side->rate_hz) || rate_out != floor(rate_out))
		return qb_fail(e, QB_RANGE, path, NULL, "rates must be whole numbers of hertz");
	if (seconds * fmax(side->rate_hz, rate_out) > (double)SPAN_MAX)
		return qb_fail(e, QB_RANGE, path, "play shorter slots", "the drive is too long for the rig");
	s->length = (size_t)(seconds * side->rate_hz);
	s->length_out = (size_t)(seconds * rate_out);
	s->lead = (size_t)(PAD_S * side->rate_hz);
	s->start_gps_ns =
	    side->start_gps_ns + (int64_t)llround(((double)first - (double)s->lead) / side->rate_hz * 1e9);
	return QB_OK;
}

/* Transform, forward transfer, shift to the recording's grid, inverse transform at the recording's rate. */
static struct piece *make_piece(const struct rig_drives *d, const struct npy_in *in, const struct span *s)
{
	double rate = d->run->rate_hz, seconds = (double)s->length_out / rate;
	double at = (double)(s->start_gps_ns - d->run->start_gps_ns) / 1e9 * rate, whole = floor(at), part = at - whole;
	size_t bins_out = s->length_out / 2 + 1, bins_in = s->length / 2 + 1;
	double *x = fft_real_new(s->length), *y = fft_real_new(s->length_out);
	double complex *f = fft_complex_new(bins_in), *g = fft_complex_new(bins_out);
	memcpy(x + s->lead, in->values + s->first, s->n * sizeof *x);
	fft_forward(s->length, x, f);
	for (size_t k = 1; k < bins_in && k < bins_out; k++) {
		double hz = (double)k / seconds, pass = planck_taper((hz - HIGH_PASS_HZ) / HIGH_PASS_HZ);
		double turn = -2 * M_PI * fmod((double)k * part / (double)s->length_out, 1);
		if (pass > 0)
			g[k] = f[k] * actuator_forward(d->station, hz) * pass * (cos(turn) + I * sin(turn)) /
			       (double)s->length;
	}
	if (s->length_out % 2 == 0)
		g[bins_out - 1] = 0;
	fft_inverse(s->length_out, g, y);
	struct piece *p = QB_NEW(struct piece);
	*p = (struct piece){.at = (int64_t)whole, .n = s->length_out, .strain = QB_NEW_ARRAY(double, s->length_out)};
	memcpy(p->strain, y, s->length_out * sizeof *y);
	fft_free(x);
	fft_free(y);
	fft_free(f);
	fft_free(g);
	return p;
}

static enum qb_status take_file(struct rig_drives *d, const char *path, struct qb_error *e)
{
	struct npy_in in = {0};
	struct npy_side side = {.unit = "counts"};
	struct span s;
	enum qb_status st = npy_side_read(path, &side, e);
	if (st == QB_OK)
		st = npy_map(path, &in, e);
	if (st == QB_OK)
		st = find_span(&in, &side, d->run->rate_hz, &s, path, e);
	if (st == QB_OK && s.n > 0 && !d->station->actuator.present)
		st = qb_fail(e, QB_RANGE, d->station->name, "describe it in the network file",
		             "there is a drive but no actuator");
	if (st == QB_OK && s.n > 0) {
		struct piece *p = make_piece(d, &in, &s);
		p->next = d->pieces;
		d->pieces = p;
		d->played++;
	}
	npy_unmap(&in);
	return st;
}

/* When the next file begins, without reading its samples. */
static enum qb_status peek(struct rig_drives *d, struct qb_error *e)
{
	struct npy_side side = {.unit = "counts"};
	d->next_at = INT64_MAX;
	if (d->next >= d->n_names)
		return QB_OK;
	char *path = text_printf("%s/%s", d->dir, d->names[d->next]);
	enum qb_status st = npy_side_read(path, &side, e);
	if (st == QB_OK)
		d->next_at = (int64_t)floor(((double)(side.start_gps_ns - d->run->start_gps_ns) / 1e9 - PAD_S - 1) *
		                            d->run->rate_hz);
	qb_free(path);
	return st;
}

enum qb_status rig_drives_open(const char *dir, const struct wave_station *station, const struct rig_run *run,
                               struct rig_drives **out, struct qb_error *e)
{
	struct rig_drives *d = QB_NEW(struct rig_drives);
	*d = (struct rig_drives){.station = station, .run = run, .dir = dir != NULL ? qb_strdup(dir) : NULL};
	*out = d;
	enum qb_status st = list_files(d, e);
	if (st == QB_OK)
		st = peek(d, e);
	if (st != QB_OK)
		rig_drives_close(out);
	return st;
}

static void add_piece(const struct piece *p, int64_t at, double *strain, size_t n)
{
	int64_t from = p->at > at ? p->at : at, to = p->at + (int64_t)p->n;
	if (to > at + (int64_t)n)
		to = at + (int64_t)n;
	for (int64_t i = from; i < to; i++)
		strain[i - at] += p->strain[i - p->at];
}

enum qb_status rig_drives_add(struct rig_drives *d, int64_t at, double *strain, size_t n, struct qb_error *e)
{
	while (d->next_at < at + (int64_t)n) {
		char *path = text_printf("%s/%s", d->dir, d->names[d->next]);
		enum qb_status st = take_file(d, path, e);
		qb_free(path);
		d->next++;
		if (st == QB_OK)
			st = peek(d, e);
		if (st != QB_OK)
			return st;
	}
	for (struct piece **p = &d->pieces; *p != NULL;) {
		struct piece *one = *p;
		add_piece(one, at, strain, n);
		if (one->at + (int64_t)one->n <= at + (int64_t)n) {
			*p = one->next;
			qb_free(one->strain);
			qb_free(one);
		} else {
			p = &one->next;
		}
	}
	return QB_OK;
}

int rig_drives_played(const struct rig_drives *d)
{
	return d->played;
}

void rig_drives_close(struct rig_drives **out)
{
	struct rig_drives *d = *out;
	if (d == NULL)
		return;
	while (d->pieces != NULL) {
		struct piece *next = d->pieces->next;
		qb_free(d->pieces->strain);
		qb_free(d->pieces);
		d->pieces = next;
	}
	for (int i = 0; i < d->n_names; i++)
		qb_free(d->names[i]);
	qb_free(d->names);
	qb_free(d->dir);
	qb_free(d);
	*out = NULL;
}
