/* The noun `bundle`: export, offline verification with its checklist, unpacking into an audit folder. */
#include <errno.h>
#include <string.h>
#include <sys/stat.h>

#include "client/cli/bundle_verify.h"
#include "server/base/alloc.h"
#include "server/base/text.h"

#define BUNDLE_MAX ((size_t)2 << 30)

static enum qb_status run_export(struct cli_call *c)
{
	struct campaign *k;
	struct buf b = {0};
	enum qb_status st = cli_campaign(c, cli_arg(c, 0), &k);
	if (st != QB_OK)
		return st;
	char *path = text_printf("/v1/campaigns/%s/bundle", k->name);
	st = link_get_bytes(&c->link, path, BUNDLE_MAX, &b, &c->error);
	qb_free(path);
	if (st == QB_OK)
		st = file_write(cli_arg(c, 1), 0644, b.data, b.len, &c->error);
	if (st == QB_OK)
		cli_print(c, "%s: %zu bytes; check it with quietbell bundle verify\n", cli_arg(c, 1), b.len);
	buf_free(&b);
	return st;
}

static const char *check_word(const struct verify_check *x)
{
	return !x->done ? "not judged" : x->holds ? "PASS" : "FAIL";
}

static void print_checks(struct cli_call *c, const struct verified *v)
{
	for (int i = 0; i < v->n_checks; i++) {
		const struct verify_check *x = &v->check[i];
		cli_print(c, "%-10s  %2d. %s\n", check_word(x), i + 1, x->property);
		cli_print(c, "                checked by: %s\n", x->how);
		if (x->detail[0] != '\0')
			cli_print(c, "                %s %s\n", x->holds ? "found:" : "why:", x->detail);
	}
	cli_print(c, "\nNot checked, since no bundle can show it:\n");
	for (const char *const *s = verify_not_checked; *s != NULL; s++)
		cli_print(c, "  - %s\n", *s);
	cli_print(c, "\n");
	if (v->all)
		cli_print(c, "VERIFIED: campaign %s, %lld slots, %zu records, ledger of %llu entries\n", v->k->name,
		          (long long)v->k->n_slots, v->bundle->records.n, (unsigned long long)v->follow.n);
	else
		cli_print(c, "NOT VERIFIED: do not rely on this bundle\n");
}

static void json_checks(struct cli_call *c, const struct verified *v)
{
	json_t *doc = json_object(), *list = json_array(), *open = json_array();
	for (int i = 0; i < v->n_checks; i++) {
		const struct verify_check *x = &v->check[i];
		json_t *j = json_object();
		json_object_set_new(j, "number", json_integer(i + 1));
		json_object_set_new(j, "property", json_string(x->property));
		json_object_set_new(j, "checked_by", json_string(x->how));
		json_object_set_new(j, "result", json_string(check_word(x)));
		json_object_set_new(j, x->holds || !x->done ? "found" : "why", json_string(x->detail));
		json_array_append_new(list, j);
	}
	for (const char *const *s = verify_not_checked; *s != NULL; s++)
		json_array_append_new(open, json_string(*s));
	json_object_set_new(doc, "verified", json_boolean(v->all));
	json_object_set_new(doc, "campaign", v->k != NULL ? json_string(v->k->name) : json_null());
	json_object_set_new(doc, "checks", list);
	json_object_set_new(doc, "not_checked", open);
	cli_json(c, doc);
	json_decref(doc);
}

static enum qb_status run_verify(struct cli_call *c)
{
	struct verified *v = NULL;
	enum qb_status st = bundle_verify(cli_arg(c, 0), &v, &c->error);
	if (v != NULL && cli_wants_json(c))
		json_checks(c, v);
	else if (v != NULL)
		print_checks(c, v);
	verified_free(&v);
	return st;
}

static enum qb_status write_lines(struct cli_call *c, const char *dir, const char *name, const json_t *list)
{
	struct buf b = {0};
	size_t i;
	json_t *j;
	char *path = text_printf("%s/%s", dir, name);
	if (json_is_object(list)) {
		char *text = json_pretty(list);
		buf_text(&b, text);
		qb_free(text);
	}
	json_array_foreach(list, i, j)
	{
		char *text = json_text(j);
		buf_printf(&b, "%s\n", text);
		qb_free(text);
	}
	enum qb_status st = file_write(path, 0644, b.data != NULL ? b.data : (const uint8_t *)"", b.len, &c->error);
	buf_free(&b);
	qb_free(path);
	return st;
}

static enum qb_status run_unpack(struct cli_call *c)
{
	struct verified *v = NULL;
	struct bundle_audit a = {0};
	const char *dir = cli_arg(c, 1);
	enum qb_status st = bundle_verify(cli_arg(c, 0), &v, &c->error);
	if (st == QB_OK)
		st = bundle_audit_of(v, &a, &c->error);
	if (st == QB_OK && mkdir(dir, 0755) != 0 && errno != EEXIST)
		st = qb_fail(&c->error, QB_IO, dir, NULL, "can't be created: %s", strerror(errno));
	if (st == QB_OK)
		st = write_lines(c, dir, "settings.json", a.settings);
	if (st == QB_OK)
		st = write_lines(c, dir, "slots.jsonl", a.slots);
	if (st == QB_OK)
		st = write_lines(c, dir, "claims.jsonl", a.claims);
	if (st == QB_OK && json_array_size(a.guesses) > 0)
		st = write_lines(c, dir, "guesses.jsonl", a.guesses);
	if (st == QB_OK)
		st = write_lines(c, dir, "course.json", a.course);
	if (st == QB_OK)
		cli_print(c, "%s: settings, %zu slots, %zu claims, %zu guesses\n", dir, json_array_size(a.slots),
		          json_array_size(a.claims), json_array_size(a.guesses));
	bundle_audit_free(&a);
	verified_free(&v);
	return st;
}

const struct cli_verb cli_bundle_verbs[] = {
    {"bundle", "export", "CAMPAIGN FILE", run_export, NULL, "fetches the bundle of an opened campaign",
     "quietbell bundle export fells-spring campaign.bundle"},
    {"bundle", "verify", "FILE", run_verify, NULL, "verifies a bundle offline and prints the checklist",
     "quietbell bundle verify campaign.bundle"},
    {"bundle", "unpack", "FILE DIR", run_unpack, NULL, "verifies a bundle and writes an audit folder",
     "quietbell bundle unpack campaign.bundle audit-folder"},
    {NULL, NULL, NULL, NULL, NULL, NULL, NULL}};
