/* Who holds the shares, as `campaign show` prints it: failures with their blame, epochs, rehearsals, what is due. */
#include <stdio.h>
#include <string.h>

#include "client/cli/internal.h"
#include "server/base/clock.h"

static void show_failures(struct cli_call *c, const struct campaign *k)
{
	for (int i = 0; i < k->n_failures; i++) {
		const struct custody_failure *f = &k->failure[i];
		bool blame = f->excluded[0] != '\0';
		cli_print(c, "           %s, attempt %llu failed: %s%s%s (%s: %s)\n", campaign_attempt_word(f->kind),
		          (unsigned long long)f->attempt, f->excluded, blame ? " " : "", f->how, f->by, f->why);
	}
	if (k->stalled)
		cli_print(c, "           %d are left, %d are needed: draft a new plan with other custodians\n", k->n,
		          k->k + 1);
}

static void show_epochs(struct cli_call *c, const struct campaign *k)
{
	if (k->epoch > 1)
		cli_print(c, "           epoch %llu: reshared %llu time%s\n", (unsigned long long)k->epoch,
		          (unsigned long long)k->epoch - 1, k->epoch > 2 ? "s" : "");
	for (int i = 0; i < k->n_owed; i++) {
		if (k->owed[i].epoch > 0)
			cli_print(c, "           %s has not stated yet that the share of epoch %llu is erased\n",
			          k->owed[i].party->name, (unsigned long long)k->owed[i].epoch);
		else
			cli_print(c, "           %s has not stated yet that what a failed resharing dealt is erased\n",
			          k->owed[i].party->name);
	}
	if (k->reshare.under_way) {
		cli_print(c, "reshare    attempt %llu is under way, to %d of", (unsigned long long)k->reshare_attempt,
		          k->reshare.k);
		for (int i = 0; i < k->reshare.n; i++)
			cli_print(c, " %s", k->reshare.member[i].party->name);
		cli_print(c, "\n");
	}
	if (k->repair.under_way)
		cli_print(c, "repair     attempt %llu is under way, for %s\n", (unsigned long long)k->repair_attempt,
		          k->custodian[k->repair.lost].party->name);
}

void cli_show_custody(struct cli_call *c, const struct campaign *k)
{
	char when[40];
	show_failures(c, k);
	show_epochs(c, k);
	if (k->canary_seq == NO_SEQ)
		return;
	cli_print(c, "margin     %d: %d of %d opened the canary of %s, %d are needed\n", campaign_margin(k),
	          campaign_margin(k) + k->k, k->n, clock_utc_text(k->canary_ns, when, sizeof when), k->k);
	for (int i = 0; i < k->n; i++) {
		if (campaign_missed(k, i) >= 2)
			cli_print(c, "           %s missed %d rehearsals in a row\n", k->custodian[i].party->name,
			          campaign_missed(k, i));
	}
}
