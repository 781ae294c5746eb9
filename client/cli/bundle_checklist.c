/*
 * The list that a verification goes through, in words that somebody can follow who is no cryptographer: what must hold,
 * how it is checked, and what no look at a bundle can tell.
 */
#include <stdarg.h>
#include <stdio.h>
#include <string.h>
#include <unistd.h>

#include "client/cli/bundle_verify.h"
#include "server/base/alloc.h"

static const struct {
	const char *property, *how;
	enum qb_status (*fn)(struct verified *v, struct qb_error *e);
} checks[] = {
    {"What is in the file fits the fingerprints that are in it",
     "one hash over all entries (RFC 9162); each record's own", verify_fingerprints},
    {"Every entry of the ledger is whole, in its place, and by whom it names",
     "each one's form, its author's signature (Ed25519) by the key of that time, who may say what", verify_ledger},
    {"There is one ledger, and most custodians vouch for it",
     "signatures of the service and of custodians on the hash over all entries", verify_head},
    {"The steps came in their order: sealed before played, closed before opened",
     "the place of each step in the ledger", verify_order},
    {"The key belongs to all custodians together, and too few of them can open nothing",
     "computed again from their signed messages; every custodian's signature on the result", verify_key},
    {"The draw was made where the plan says", "signatures of the machine, if the plan names one", verify_sealer},
    {"No sealed record was added, altered, exchanged or left out",
     "each record's proof; fingerprint, slot, station and author as in the ledger", verify_records},
    {"Claims, guesses and questions are what was handed in, when it was; none is missing",
     "fingerprints and promised times, authors' signatures, the number fixed at the closing", verify_hidden},
    {"What the stations were given to play is what was sealed", "fingerprints entered before anything was played",
     verify_recipes},
    {"Enough custodians opened, each one correctly",
     "the proof of each partial opening; the fingerprint of all contents", verify_opening},
    {"The campaign ended when and as the ledger says", "the closing entry, its author, time and reason", verify_ending},
    {"Every guess came before its slot", "promised times, places in the ledger, the slot in each sealed guess",
     verify_guesses},
    {"Nobody chose the draw",
     "everyone's random contribution against the earlier commitment; the seed is made of them all", verify_seed},
    {"What was opened is what was sealed", "every record sealed again from the seed: the same, byte for byte",
     verify_reseal},
    {"Every drill is what the plan draws from the seed", "drawn again: all numbers agree to 1e-6", verify_redraw},
};
#define N_CHECKS (int)(sizeof checks / sizeof checks[0])

const char *const verify_not_checked[] = {
    "That a key belongs to the person it is said to be of: compare fingerprints with the people themselves.",
    "That as many custodians as are needed did not meet and open something before: nothing can show that.",
    "That a station played what its driver reports: compare with the station's own recordings.",
    "That what people sealed is true: a claim, a guess, a note or a report is the word of its author.",
    "That a time of receipt is true to the second: it is the word of the service; compare with the receipts.",
    "That the plan is sensible: it is in the ledger as it was drafted, and is read there.",
    "Other campaigns in the same ledger: only form, author and signature of their entries.",
    NULL};

void verify_note(struct verified *v, const char *fmt, ...)
{
	va_list ap;
	va_start(ap, fmt);
	(void)vsnprintf(v->note, sizeof v->note, fmt, ap);
	va_end(ap);
}

/* One line of the list is done. */
static enum qb_status judge(struct verified *v, struct verify_check *c, enum qb_status got, const struct qb_error *one,
                            struct qb_error *e)
{
	bool general = strcmp(one->where, "bundle") == 0;
	c->done = true;
	c->holds = got == QB_OK;
	if (c->holds)
		(void)snprintf(c->detail, sizeof c->detail, "%s", v->note);
	else
		(void)snprintf(c->detail, sizeof c->detail, "%.100s%s%.280s", general ? "" : one->where,
		               general || one->where[0] == '\0' ? "" : ": ", one->what);
	v->note[0] = '\0';
	if (c->holds)
		return QB_OK;
	v->all = false;
	return qb_fail(e, QB_NO, "bundle", one->mend[0] != '\0' ? one->mend : "do not rely on it",
	               "not verified: %s: %.250s", c->property, c->detail);
}

enum qb_status bundle_verify(const char *path, struct verified **out, struct qb_error *e)
{
	struct verified *v = QB_NEW(struct verified);
	struct qb_error one = {0};
	*out = NULL;
	if (access(path, R_OK) != 0) {
		qb_free(v);
		return qb_fail(e, QB_IO, path, "check the path", "can't be read");
	}
	v->all = true;
	v->check[0] = (struct verify_check){.property = "The file is a bundle and nothing besides",
	                                    .how = "its tables, word for word; every page and row in its place"};
	enum qb_status st = bundle_read(path, &v->bundle, &one);
	if (st == QB_OK)
		verify_note(v, "%d tables, %lld bytes", v->bundle->n_tables, (long long)v->bundle->bytes);
	st = judge(v, &v->check[v->n_checks++], st, &one, e);
	for (int i = 0; i < N_CHECKS; i++) {
		struct verify_check *c = &v->check[v->n_checks++];
		*c = (struct verify_check){.property = checks[i].property, .how = checks[i].how};
		if (!v->all)
			continue;
		one = (struct qb_error){0};
		st = judge(v, c, checks[i].fn(v, &one), &one, e);
	}
	*out = v;
	return st;
}

void verified_free(struct verified **vp)
{
	struct verified *v = *vp;
	if (v == NULL)
		return;
	for (size_t i = 0; v->content != NULL && i < v->bundle->records.n; i++)
		buf_wipe(&v->content[i]);
	qb_free(v->content);
	qb_free(v->opens);
	secret_free(&v->seed);
	follow_close(&v->follow);
	bundle_free(&v->bundle);
	qb_free(v);
	*vp = NULL;
}
