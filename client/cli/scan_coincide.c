/*
 * Candidates from coincident triggers, and how often shifted lists give such candidates by themselves.
 *
 * A shift moves the stations' lists against each other around the scan's circle by more than any signal could explain.
 * Loud signals would fill the background of all weaker ones with their chance meetings: the background of a candidate
 * is therefore counted without the triggers of louder candidates, and its rate is never below that of a louder one.
 */
#include <limits.h>
#include <math.h>
#include <stdlib.h>

#include "client/cli/scan.h"
#include "server/base/alloc.h"

#define CLUSTER_S 0.2  /* the loudest candidate in this time to either side stands for all */
#define LEAST_S   10.0 /* least shift between two stations */
#define YEAR_S    (365.25 * 86400)
#define TRIES     20 /* offsets looked at for one that is wide enough */
#define NO_OWNER  INT_MAX

struct index {
	size_t first[SCAN_MAX_TEMPLATES + 1]; /* of each template's triggers in a station's list */
};

struct event {
	double t_s, snr;
	int template, owner;
	int trigger[WAVE_MAX_STATIONS];
};
struct events {
	size_t n, cap;
	struct event *event;
};

struct search {
	const struct wave_network *network;
	const struct scan_settings *settings;
	const struct scan_list *lists;
	struct index *index; /* one a station */
	int templates;
	double seconds;
	double window_s[WAVE_MAX_STATIONS][WAVE_MAX_STATIONS];
};

static void make_index(const struct scan_list *l, int templates, struct index *out)
{
	size_t k = 0;
	for (int t = 0; t <= templates; t++) {
		while (k < l->n && l->trigger[k].template <t)
			k++;
		out->first[t] = k;
	}
}

static double around(double t, double circle)
{
	t = fmod(t, circle);
	return t < 0 ? t + circle : t;
}

/* The loudest trigger of `template` at station j within `half` of t, around the circle; or SCAN_NONE. */
static int loudest_near(const struct search *s, int j, int template, double t, double half)
{
	const struct scan_trigger *list = s->lists[j].trigger;
	size_t from = s->index[j].first[template], to = s->index[j].first[template + 1], lo = from, hi = to;
	int best = SCAN_NONE;
	if (from == to)
		return SCAN_NONE;
	while (lo < hi) {
		size_t mid = (lo + hi) / 2;
		if (list[mid].t_s < t - half)
			lo = mid + 1;
		else
			hi = mid;
	}
	for (size_t k = lo; k < to && list[k].t_s <= t + half; k++)
		best = best == SCAN_NONE || list[k].snr > list[best].snr ? (int)k : best;
	return best;
}

static int louder_first(const void *a, const void *b)
{
	const struct event *x = a, *y = b;
	if (x->snr != y->snr)
		return x->snr > y->snr ? -1 : 1;
	return x->t_s < y->t_s ? -1 : x->t_s > y->t_s;
}

/* The group around one anchor, which has to be its loudest member; false when it makes no candidate. */
static bool group(const struct search *s, const double *offset, int i, int k, struct event *out)
{
	const struct scan_trigger *anchor = &s->lists[i].trigger[k];
	double square = anchor->snr * anchor->snr;
	int members = 1;
	*out = (struct event){
	    .t_s = around(anchor->t_s + offset[i], s->seconds), .template = anchor->template, .owner = anchor->owner};
	for (int j = 0; j < s->network->n_stations; j++) {
		out->trigger[j] = j == i ? k : SCAN_NONE;
		if (j == i)
			continue;
		int other =
		    loudest_near(s, j, anchor->template, around(out->t_s - offset[j], s->seconds), s->window_s[i][j]);
		if (other == SCAN_NONE)
			continue;
		const struct scan_trigger *t = &s->lists[j].trigger[other];
		if (t->snr > anchor->snr || (t->snr == anchor->snr && j < i))
			return false;
		out->trigger[j] = other;
		out->owner = t->owner < out->owner ? t->owner : out->owner;
		square += t->snr * t->snr;
		members++;
	}
	out->snr = sqrt(square);
	return members > 1 && out->snr >= s->settings->network_threshold;
}

/* All candidates of one experiment, clustered in time, appended to `out`; `scratch` is reused. */
static void experiment(const struct search *s, const double *offset, struct events *scratch, struct events *out)
{
	struct event e;
	scratch->n = 0;
	for (int i = 0; i < s->network->n_stations; i++) {
		for (size_t k = 0; k < s->lists[i].n; k++) {
			if (!group(s, offset, i, (int)k, &e))
				continue;
			if (scratch->n == scratch->cap) {
				scratch->cap = scratch->cap > 0 ? 2 * scratch->cap : 64;
				scratch->event = qb_realloc(scratch->event, scratch->cap, sizeof e);
			}
			scratch->event[scratch->n++] = e;
		}
	}
	if (scratch->n > 1)
		qsort(scratch->event, scratch->n, sizeof e, louder_first);
	size_t begin = out->n;
	for (size_t k = 0; k < scratch->n; k++) {
		bool alone = true;
		for (size_t m = begin; alone && m < out->n; m++)
			alone = fabs(out->event[m].t_s - scratch->event[k].t_s) > CLUSTER_S;
		if (!alone)
			continue;
		if (out->n == out->cap) {
			out->cap = out->cap > 0 ? 2 * out->cap : 64;
			out->event = qb_realloc(out->event, out->cap, sizeof e);
		}
		out->event[out->n++] = scratch->event[k];
	}
}

/* Every trigger near a candidate, in whatever template, belongs to it. */
static void own(struct scan_list *lists, int stations, const struct events *found)
{
	for (int i = 0; i < stations; i++) {
		for (size_t k = 0; k < lists[i].n; k++) {
			struct scan_trigger *t = &lists[i].trigger[k];
			t->owner = NO_OWNER;
			for (size_t m = 0; m < found->n && t->owner == NO_OWNER; m++) {
				if (fabs(found->event[m].t_s - t->t_s) <= CLUSTER_S)
					t->owner = (int)m;
			}
		}
	}
}

/* Offsets of experiment k: multiples of square roots around the circle; false when two stations come too close. */
static bool offsets(const struct search *s, long k, double *out)
{
	static const double roots[WAVE_MAX_STATIONS] = {0,
	                                                1.4142135623730951,
	                                                1.7320508075688772,
	                                                2.2360679774997898,
	                                                2.6457513110645907,
	                                                3.3166247903554,
	                                                3.605551275463989,
	                                                4.123105625617661};
	for (int i = 0; i < s->network->n_stations; i++) {
		out[i] = s->seconds * fmod((double)k * roots[i], 1);
		for (int j = 0; j < i; j++) {
			double d = fabs(out[i] - out[j]);
			if (fmin(d, s->seconds - d) < LEAST_S)
				return false;
		}
	}
	return true;
}

static void background(const struct search *s, struct events *scratch, struct events *out, double *seconds)
{
	long k = 1, limit = (long)s->settings->shifts * TRIES;
	double offset[WAVE_MAX_STATIONS];
	*seconds = 0;
	for (int done = 0; done < s->settings->shifts && k < limit; k++) {
		if (!offsets(s, k, offset))
			continue;
		experiment(s, offset, scratch, out);
		*seconds += s->seconds;
		done++;
	}
}

/* Background as loud as the candidate, over its time. None as loud counts as one: a limit, and the rate is never 0. */
static void rate(struct scan_result *r, const struct events *found, const struct events *noise)
{
	double floor = 0;
	for (int c = 0; c < r->n; c++) {
		struct scan_candidate *x = &r->candidate[c];
		size_t louder = 0;
		for (size_t k = 0; k < noise->n; k++)
			louder += noise->event[k].snr >= found->event[c].snr && noise->event[k].owner >= c;
		x->far_is_limit = louder == 0;
		x->far_per_year =
		    r->background_s > 0 ? (double)(louder > 0 ? louder : 1) / r->background_s * YEAR_S : HUGE_VAL;
		x->far_per_year = floor = fmax(floor, x->far_per_year);
	}
}

void scan_coincide(const struct wave_network *network, const struct scan_settings *settings, struct scan_list lists[],
                   double seconds, struct scan_result *out)
{
	struct search s = {.network = network, .settings = settings, .lists = lists, .seconds = seconds};
	struct events scratch = {0}, found = {0}, noise = {0};
	const double none[WAVE_MAX_STATIONS] = {0};
	*out = (struct scan_result){0};
	for (int i = 0; i < network->n_stations; i++) {
		for (size_t k = 0; k < lists[i].n; k++)
			s.templates = lists[i].trigger[k].template >= s.templates ? lists[i].trigger[k].template + 1
			                                                          : s.templates;
		for (int j = 0; j < network->n_stations; j++)
			s.window_s[i][j] =
			    station_light_time_s(&network->stations[i], &network->stations[j]) + settings->slack_s;
	}
	s.index = QB_NEW_ARRAY(struct index, (size_t)network->n_stations);
	for (int i = 0; i < network->n_stations; i++)
		make_index(&lists[i], s.templates, &s.index[i]);
	experiment(&s, none, &scratch, &found);
	own(lists, network->n_stations, &found);
	background(&s, &scratch, &noise, &out->background_s);
	out->background_events = noise.n;
	out->n = (int)found.n;
	out->candidate = QB_NEW_ARRAY(struct scan_candidate, found.n);
	for (int c = 0; c < out->n; c++) {
		out->candidate[c].network_snr = found.event[c].snr;
		out->candidate[c].template = found.event[c].template;
		for (int i = 0; i < WAVE_MAX_STATIONS; i++)
			out->candidate[c].trigger[i] = i < network->n_stations ? found.event[c].trigger[i] : SCAN_NONE;
	}
	rate(out, &found, &noise);
	qb_free(scratch.event);
	qb_free(found.event);
	qb_free(noise.event);
	qb_free(s.index);
}

void scan_result_free(struct scan_result *r)
{
	qb_free(r->candidate);
	*r = (struct scan_result){0};
}
