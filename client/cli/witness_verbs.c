/* Who signs what could tell live from null at a station: by default exactly what the plan lists for it. */
#include <string.h>

#include "client/cli/internal.h"
#include "server/base/alloc.h"
#include "server/base/text.h"

enum qb_status cli_witness(struct cli_call *c)
{
	struct campaign *k;
	const char *station = cli_option(c, "station");
	json_t *channels = json_array(), *masked = json_array();
	enum qb_status st = cli_campaign(c, cli_arg(c, 0), &k);
	for (int i = 0; st == QB_OK && i < k->plan->n_witnesses; i++) {
		const struct plan_witness *w = &k->plan->witness[i];
		if (strcmp(w->station, station) != 0)
			continue;
		json_array_append_new(channels, json_string(w->channel));
		if (w->masked)
			json_array_append_new(masked, json_string(w->channel));
	}
	if (st == QB_OK)
		st = cli_option_names(c, "also", channels);
	if (st == QB_OK)
		st = cli_option_names(c, "also-masked", channels);
	if (st == QB_OK)
		st = cli_option_names(c, "also-masked", masked);
	if (st != QB_OK) {
		json_decref(channels);
		json_decref(masked);
		return st;
	}
	size_t n = json_array_size(channels), hidden = json_array_size(masked);
	json_t *extra = json_object();
	char *path = text_printf("/v1/campaigns/%s/witnesses", k->name);
	json_object_set_new(extra, "station", json_string(station));
	json_object_set_new(extra, "channels", channels);
	json_object_set_new(extra, "masked", masked);
	st = cli_post_entry(c, path, "witness-statement", k->id, cli_option(c, "reason"), extra, NULL, NULL);
	qb_free(path);
	if (st == QB_OK)
		cli_print(c, "signed for %s: %zu witness channels, %zu of them masked until the opening\n", station, n,
		          hidden);
	return st;
}
