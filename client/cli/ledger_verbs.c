/* The noun `ledger`: the newest head, heads of colleagues, evidence of two histories, and checking a copy. */
#include <inttypes.h>
#include <string.h>

#include "client/cli/internal.h"
#include "client/link/heads.h"
#include "server/base/alloc.h"
#include "server/base/clock.h"
#include "server/base/text.h"

/* Who cosigned, and how far: the newest of each. A colleague who stays behind may be cut off, or shown something else.
 */
static json_t *cosigners(const struct follow *f)
{
	json_t *list = json_array();
	for (int i = 0; i < f->view.n_parties; i++) {
		const struct view_party *p = f->view.party[i];
		const struct head *newest = NULL;
		char utc[40];
		for (size_t k = 0; k <= f->n_others; k++) {
			const struct head *h = k < f->n_others ? &f->other[k] : &f->head;
			for (size_t j = 0; j < h->n_cosigners; j++) {
				const struct view_party *by = view_party_by_id(&f->view, h->cosigner[j].key_id);
				if (by == p && (newest == NULL || h->size > newest->size))
					newest = h;
			}
		}
		if (newest == NULL)
			continue;
		json_t *j = json_object();
		json_object_set_new(j, "by", json_string(p->name));
		json_object_set_new(j, "size", json_integer((json_int_t)newest->size));
		json_object_set_new(j, "time_utc", json_string(clock_utc_text(newest->time_gps_ns, utc, sizeof utc)));
		json_array_append_new(list, j);
	}
	return list;
}

static void print_head(struct cli_call *c, const struct follow *f, bool cosigned)
{
	struct ledger_hash root;
	char hex[65];
	size_t i;
	json_t *others = cosigners(f), *j;
	tree_root(&f->range, &root);
	hex_encode(hex, root.b, 32);
	if (cli_wants_json(c)) {
		json_t *doc = json_object();
		json_object_set_new(doc, "size", json_integer((json_int_t)f->n));
		json_object_set_new(doc, "root", json_string(hex));
		json_object_set_new(doc, "cosigned", json_boolean(cosigned));
		json_object_set(doc, "cosigners", others);
		cli_json(c, doc);
		json_decref(doc);
	} else {
		cli_print(c, "size  %" PRIu64 "\nroot  %s\n%s", f->n, hex, cosigned ? "cosigned by this party\n" : "");
		json_array_foreach(others, i, j)
		    cli_print(c, "seen by %-12s up to %lld, %s\n", json_string_value(json_object_get(j, "by")),
		              (long long)json_integer_value(json_object_get(j, "size")),
		              json_string_value(json_object_get(j, "time_utc")));
	}
	json_decref(others);
}

static enum qb_status write_head(struct cli_call *c, const char *path)
{
	struct buf text = {0};
	head_format(&c->follow.head, &text);
	enum qb_status st = file_write(path, 0644, text.data, text.len, &c->error);
	buf_free(&text);
	return st;
}

static enum qb_status run_head(struct cli_call *c)
{
	const char *out = cli_option(c, "out");
	enum qb_status st = cli_follow(c);
	const struct view_party *me = st == QB_OK ? view_party_by_id(&c->follow.view, c->home.key_id) : NULL;
	bool cosigns = me != NULL && (me->role == ROLE_CUSTODIAN || me->role == ROLE_ANALYST);
	if (st == QB_OK && cosigns)
		st = follow_cosign(&c->follow, &c->link, &c->error);
	if (st == QB_OK && out != NULL)
		st = write_head(c, out);
	if (st == QB_OK)
		print_head(c, &c->follow, cosigns);
	return st;
}

/* A head that a colleague sent by any way that the service does not keep. */
static enum qb_status run_compare(struct cli_call *c)
{
	bool offline = cli_option(c, "offline") != NULL;
	struct head *theirs = QB_NEW(struct head);
	enum qb_status st = cli_home(c, false);
	if (st == QB_OK && !c->home.has_service)
		st =
		    qb_fail(&c->error, QB_USAGE, c->home.dir, "talk to the service once", "this home knows no service");
	if (st == QB_OK)
		st = heads_file(cli_arg(c, 0), c->home.service_key, theirs, &c->error);
	if (st == QB_OK && offline) {
		st = follow_open(&c->follow, &c->home, &c->error);
		c->has_follow = st == QB_OK;
		if (st == QB_OK && theirs->size > c->follow.n)
			st =
			    qb_fail(&c->error, QB_NO, cli_arg(c, 0), "compare without --offline",
			            "can't be judged: this copy ends at %" PRIu64 " leaves, before the head's %" PRIu64,
			            c->follow.n, theirs->size);
	} else if (st == QB_OK) {
		st = cli_follow(c);
	}
	if (st == QB_OK)
		st = heads_compare(&c->follow, &c->home, theirs, cli_arg(c, 0), &c->error);
	if (st == QB_OK)
		cli_print(c,
		          "one history: the first %" PRIu64 " of the %" PRIu64 " leaves of this copy are that ledger\n",
		          theirs->size, c->follow.n);
	qb_free(theirs);
	return st;
}

/* For anybody to whom the evidence is shown; the home's pinned key, if it has one, must be the accused service's. */
static enum qb_status run_evidence(struct cli_call *c)
{
	struct buf b = {0};
	uint8_t key[32];
	char why[200], hex[65];
	struct home h = {0};
	enum qb_status st = file_read(cli_arg(c, 0), (size_t)1 << 20, &b, &c->error);
	if (st == QB_OK)
		st = heads_evidence_check((const char *)b.data, b.len, key, why, &c->error);
	/* whatever is wrong in the file's content, the answer is no */
	if (st != QB_OK && st != QB_IO)
		c->error.status = st = QB_NO;
	if (st == QB_OK && home_open(cli_option(c, "home"), false, &h, NULL) == QB_OK) {
		if (h.has_service && memcmp(h.service_key, key, 32) != 0)
			st = qb_fail(&c->error, QB_NO, cli_arg(c, 0), NULL,
			             "the heads are of another service than this home's");
		home_close(&h);
	}
	if (st == QB_OK) {
		hex_encode(hex, key, 32);
		cli_print(c, "the service with the key %s signed two heads that no one ledger has:\n%s\n", hex, why);
	}
	buf_free(&b);
	return st;
}

/* Checks a saved copy without the service: every place, signature and meaning again. */
static enum qb_status run_verify(struct cli_call *c)
{
	struct buf b = {0};
	struct follow f = {0};
	enum qb_status st = file_read(cli_arg(c, 0), (size_t)4 << 30, &b, &c->error);
	struct cursor at = cursor_over(b.data, b.len);
	while (st == QB_OK && at.left > 0) {
		uint32_t n = cursor_u32(&at);
		const uint8_t *p = cursor_take(&at, n);
		st = p != NULL
		         ? follow_take(&f, p, n, &c->error)
		         : qb_fail(&c->error, QB_NO, cli_arg(c, 0), NULL, "is truncated after leaf %" PRIu64, f.n);
	}
	/* whatever is wrong in the file's content, the answer is no */
	if (st == QB_OK)
		print_head(c, &f, false);
	else if (st != QB_IO)
		c->error.status = st = QB_NO;
	follow_close(&f);
	buf_free(&b);
	return st;
}

static enum qb_status run_list(struct cli_call *c)
{
	enum qb_status st = cli_follow(c);
	for (uint64_t i = 0; st == QB_OK && i < c->follow.n; i++) {
		struct entry leaf;
		struct wire_entry en;
		char utc[40];
		enum qb_status one = follow_entry(&c->follow, i, &leaf, &en, NULL);
		clock_utc_text(leaf.received_gps_ns, utc, sizeof utc);
		if (one != QB_OK) {
			cli_print(c, "%6" PRIu64 "  %-24s hidden\n", i, utc);
			continue;
		}
		cli_print(c, "%6" PRIu64 "  %-24s %-14s %s (%s)\n", i, utc, en.by, en.type->what, en.why);
		wire_entry_free(&en);
	}
	return st;
}

static const struct cli_option head_options[] = {
    {"out", "FILE", false, "write the signed head, for colleagues to compare"}, {NULL, NULL, false, NULL}};
static const struct cli_option compare_options[] = {
    {"offline", NULL, false, "compare with this home's copy, without the service"}, {NULL, NULL, false, NULL}};

const struct cli_verb cli_ledger_verbs[] = {
    {"ledger", "head", "", run_head, head_options,
     "fetches, verifies and (custodians, analysts) cosigns the newest head", "quietbell ledger head --out head.txt"},
    {"ledger", "compare", "FILE", run_compare, compare_options,
     "is a head that a colleague sent of the same history as this copy?", "quietbell ledger compare head-of-okoro.txt"},
    {"ledger", "evidence", "FILE", run_evidence, NULL,
     "checks a file that says that the service has shown two histories",
     "quietbell ledger evidence evidence-120-97.json"},
    {"ledger", "list", "", run_list, NULL, "lists every entry: when, who, what, why", "quietbell ledger list"},
    {"ledger", "verify", "FILE", run_verify, NULL, "checks a saved copy of the ledger",
     "quietbell ledger verify ~/.config/quietbell/ledger.bin"},
    {NULL, NULL, NULL, NULL, NULL, NULL, NULL}};
