/* The verb `slot guess`: a sealed belief that a slot is live or null, given before it starts. */
#include <math.h>
#include <string.h>

#include "client/cli/submit.h"
#include "server/base/alloc.h"
#include "server/base/text.h"

/* What is sealed. Every guess has the same size once it is sealed. */
static enum qb_status guess_content(struct cli_call *c, int64_t slot, char **out)
{
	static const char *const words[][2] = {{"live", "live"}, {"null", "null"}, {"dont-know", "dont_know"}};
	const char *word = NULL;
	double p;
	enum qb_status st = cli_option_double(c, "probability", NAN, &p);
	for (size_t i = 0; i < sizeof words / sizeof words[0]; i++) {
		if (strcmp(cli_arg(c, 2), words[i][0]) == 0)
			word = words[i][1];
	}
	if (st == QB_OK && word == NULL)
		st = qb_fail(&c->error, QB_USAGE, "GUESS", "live, null or dont-know", "is '%.30s'", cli_arg(c, 2));
	if (st == QB_OK && !isnan(p) && !(p >= 0 && p <= 1))
		st = qb_fail(&c->error, QB_USAGE, "--probability", "0 to 1, that the slot is live", "is %g", p);
	if (st != QB_OK)
		return st;
	json_t *doc = json_object();
	json_object_set_new(doc, "slot", json_integer(slot));
	json_object_set_new(doc, "guess", json_string(word));
	if (!isnan(p))
		json_object_set_new(doc, "probability_live", json_real(p));
	*out = json_text(doc);
	json_decref(doc);
	return QB_OK;
}

enum qb_status cli_guess(struct cli_call *c)
{
	struct campaign *k;
	struct custody_group *g = QB_NEW(struct custody_group);
	char *content = NULL;
	int64_t n = 0;
	struct submission s = {.record = RECORD_GUESS, .type = "guess", .label = "guess"};
	enum qb_status st = QB_OK;
	if (!text_i64(cli_arg(c, 1), &n))
		st = qb_fail(&c->error, QB_USAGE, "N", "give the slot's number", "'%.30s' is not a number",
		             cli_arg(c, 1));
	if (st == QB_OK)
		st = guess_content(c, n, &content);
	if (st == QB_OK)
		st = cli_campaign(c, cli_arg(c, 0), &k);
	if (st == QB_OK && (n < 0 || n >= k->n_slots))
		st = qb_fail(&c->error, QB_NOT_FOUND, "slot", "see quietbell slot list",
		             "the campaign has no slot %lld", (long long)n);
	if (st == QB_OK)
		st = campaign_certified_group(k, g, &c->error);
	if (st == QB_OK)
		st = submit_next_sequence(c, k, &s.sequence);
	if (st == QB_OK) {
		char *path = text_printf("/v1/campaigns/%s/guesses", k->name);
		json_t *extra = json_object();
		json_object_set_new(extra, "slot", json_integer(n));
		s.path = path;
		s.content = content;
		s.start_gps_ns = slots_start(&k->plan->slots, n);
		s.duration_ns = (uint64_t)k->plan->slots.slot_ns;
		st = submit_sealed(c, k, g, &s, extra);
		qb_free(path);
	}
	qb_free(content);
	qb_free(g);
	return st;
}
