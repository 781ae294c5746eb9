/* The noun `ledger`: the newest head, and checking a copy. */
#include <inttypes.h>
#include <string.h>

#include "client/cli/internal.h"
#include "server/base/alloc.h"
#include "server/base/clock.h"
#include "server/base/text.h"

static void print_head(struct cli_call *c, const struct follow *f, bool cosigned)
{
	struct ledger_hash root;
	char hex[65];
	tree_root(&f->range, &root);
	hex_encode(hex, root.b, 32);
	if (cli_wants_json(c)) {
		json_t *doc = json_object();
		json_object_set_new(doc, "size", json_integer((json_int_t)f->n));
		json_object_set_new(doc, "root", json_string(hex));
		json_object_set_new(doc, "cosigned", json_boolean(cosigned));
		cli_json(c, doc);
		json_decref(doc);
		return;
	}
	cli_print(c, "size  %" PRIu64 "\nroot  %s\n%s", f->n, hex, cosigned ? "cosigned by this party\n" : "");
}

static enum qb_status run_head(struct cli_call *c)
{
	enum qb_status st = cli_follow(c);
	const struct view_party *me = st == QB_OK ? view_party_by_id(&c->follow.view, c->home.key_id) : NULL;
	bool cosigns = me != NULL && (me->role == ROLE_CUSTODIAN || me->role == ROLE_ANALYST);
	if (st == QB_OK && cosigns)
		st = follow_cosign(&c->follow, &c->link, &c->error);
	if (st == QB_OK)
		print_head(c, &c->follow, cosigns);
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

const struct cli_verb cli_ledger_verbs[] = {
    {"ledger", "head", "", run_head, NULL, "fetches, verifies and (custodians, analysts) cosigns the newest head",
     "quietbell ledger head"},
    {"ledger", "list", "", run_list, NULL, "lists every entry: when, who, what, why", "quietbell ledger list"},
    {"ledger", "verify", "FILE", run_verify, NULL, "checks a saved copy of the ledger",
     "quietbell ledger verify ~/.config/quietbell/ledger.bin"},
    {NULL, NULL, NULL, NULL, NULL, NULL, NULL}};
