/* The sentences a review board reads first. Each is built from the document alone and claims no more than it holds. */
#include <math.h>
#include <stdio.h>
#include <string.h>

#include "client/report/facts.h"
#include "server/base/alloc.h"
#include "server/base/text.h"

static void say(json_t *list, const char *heading, char *sentence)
{
	json_t *pair = json_array();
	json_array_append_new(pair, json_string(heading));
	json_array_append_new(pair, json_string(sentence));
	json_array_append_new(list, pair);
	qb_free(sentence);
}

static const char *plural(double n, const char *one, const char *many)
{
	return n >= 1 && n < 2 ? one : many;
}

static void say_found(json_t *list, const json_t *doc)
{
	char percent[FACT], range[FACT];
	const double live = facts_number(doc, "comparison.union.live"),
	             found = facts_number(doc, "comparison.union.found");
	if (!(live > 0)) {
		say(list, "Found",
		    text_printf("No drill was played and verified, so no efficiency can be stated. Claims that "
		                "match no drill are still listed below."));
		return;
	}
	say(list, "Found",
	    text_printf(
	        "%.0f of %.0f verified live %s found by at least one pipeline: %s, and with %.0f %% confidence the "
	        "true efficiency for drills like these lies within %s.",
	        found, live, plural(live, "drill was", "drills were"),
	        facts_percent(percent, facts_number(doc, "comparison.union.estimate")),
	        100 * facts_number(doc, "settings_used.confidence"),
	        facts_range(range, facts_at(doc, "comparison.union.clopper_pearson"))));
}

static void say_missed(json_t *list, const json_t *doc)
{
	json_t *missed = facts_missed(doc);
	const size_t n = json_array_size(missed);
	const json_t *loudest = json_array_get(missed, 0);
	const double snr = facts_number(loudest, "network_snr");
	const char *were = plural((double)n, "drill was", "drills were");
	char text[FACT];
	if (n == 0 && facts_number(doc, "comparison.union.live") > 0)
		say(list, "Missed", text_printf("No live drill was missed by every pipeline."));
	else if (n > 0 && isfinite(snr))
		say(list, "Missed",
		    text_printf("%zu live %s found by nobody; the loudest of them, %s, had a network signal-to-noise "
		                "ratio of %s.",
		                n, were, facts_text(loudest, "slot_id"), facts_significant(text, snr, 3)));
	else if (n > 0)
		say(list, "Missed", text_printf("%zu live %s found by nobody.", n, were));
	json_decref(missed);
}

static void say_unexplained(json_t *list, const json_t *doc)
{
	const size_t claims = json_array_size(facts_at(doc, "unexplained"));
	const size_t together = json_array_size(facts_at(doc, "unexplained_groups.all_pipelines_times_gps"));
	const bool several = facts_pipeline(doc, 1) != NULL;
	if (claims == 0) {
		say(list, "Unexplained", text_printf("Every claim that counts matches a drill."));
		return;
	}
	if (!several || together == 0) {
		say(list, "Unexplained",
		    text_printf("%zu %s no drill%s. They are not called false: any of them may be real.", claims,
		                plural((double)claims, "claim matches", "claims match"),
		                several ? ", and no time was claimed by every pipeline" : ""));
		return;
	}
	say(list, "Unexplained",
	    text_printf("%zu %s no drill. At %zu %s every pipeline made such a claim: look at %s first, since a real "
	                "signal would look like this.",
	                claims, plural((double)claims, "claim matches", "claims match"), together,
	                plural((double)together, "time", "times"), plural((double)together, "it", "these")));
}

static void say_accident(json_t *list, const json_t *doc)
{
	char p[FACT], change[FACT];
	const double chance = facts_number(doc, "comparison.union_accidental_probability");
	const double plain = facts_number(doc, "comparison.union.estimate");
	if (!isfinite(chance) || !isfinite(plain))
		return;
	const double corrected = facts_element(doc, "comparison.union.corrected", 0);
	say(list, "By accident",
	    text_printf("The chance that a drill is matched by an unrelated claim of some pipeline is %s. Taking such "
	                "matches out "
	                "lowers the efficiency by %s percentage points.",
	                facts_percent(p, chance), facts_significant(change, 100 * (plain - corrected), 2)));
}

static void say_nulls(json_t *list, const json_t *doc)
{
	double near = 0, expected = 0, least = 1, nulls = 0;
	const char *name, *worst = "";
	char p[FACT], e[FACT];
	for (size_t i = 0; (name = facts_pipeline(doc, i)) != NULL; i++) {
		const json_t *t = facts_at(facts_pipeline_block(doc, name), "null_slot_test");
		nulls = facts_number(t, "null_slots");
		near += facts_number(t, "near_null_claims");
		expected += facts_number(t, "expected");
		if (facts_number(t, "p_too_many") <= least) {
			least = facts_number(t, "p_too_many");
			worst = name;
		}
	}
	if (!(nulls > 0))
		return;
	if (near <= 0)
		say(list, "Null slots",
		    text_printf(
		        "No unexplained claim lies near any of the %.0f null slots: nothing here suggests that the "
		        "silent drives disturbed the instrument or that anybody knew the schedule.",
		        nulls));
	else
		say(list, "Null slots",
		    text_printf(
		        "%.0f unexplained %s near a null slot, where chance alone would give %s. The smallest "
		        "probability of so many is %s (%s); a small one means that the silent drive disturbed the "
		        "instrument, or that somebody knew.",
		        near, plural(near, "claim lies", "claims lie"), facts_significant(e, expected, 2),
		        facts_p_value(p, least), worst));
}

static void say_aside(json_t *list, const json_t *doc)
{
	const double played = facts_number(doc, "comparison.union_intention_to_treat.played");
	const double matched = facts_number(doc, "comparison.union_intention_to_treat.matched_any_played");
	const double aside = played - facts_number(doc, "comparison.union.live");
	char low[FACT], high[FACT];
	if (!(aside > 0))
		return;
	say(list, "Set aside",
	    text_printf("%.0f more %s played but failed in delivery or %s aborted, and %s not in the numbers above. Of "
	                "all %.0f "
	                "played drills %s were found if none of those counts as found, and %s if those that were "
	                "claimed count.",
	                aside, plural(aside, "drill was", "drills were"), plural(aside, "was", "were"),
	                plural(aside, "is", "are"), played,
	                facts_percent(low, facts_number(doc, "comparison.union_intention_to_treat.estimate")),
	                facts_percent(high, matched / played)));
}

static void say_answers(json_t *list, const json_t *doc)
{
	size_t i;
	json_t *q;
	json_array_foreach((json_t *)(uintptr_t)facts_at(doc, "questions"), i, q)
	{
		const char *a = facts_text(q, "answer"), *who = facts_text(q, "pipeline");
		char range[FACT];
		say(list, "Asked in the plan",
		    text_printf(
		        "Does %s find at least %.4g %% of drills at network signal-to-noise ratio %.4g? %s; the data "
		        "bound the efficiency there to %s.",
		        strcmp(who, "any") == 0 ? "at least one pipeline" : who, 100 * facts_number(q, "at_least"),
		        facts_number(q, "efficiency_at_network_snr"),
		        strcmp(a, "yes") == 0  ? "Yes"
		        : strcmp(a, "no") == 0 ? "No"
		                               : "Not shown either way",
		        facts_range(range, facts_at(q, "interval"))));
	}
}

json_t *facts_summary(const json_t *doc)
{
	json_t *list = json_array();
	say_unexplained(list, doc);
	say_found(list, doc);
	say_missed(list, doc);
	say_answers(list, doc);
	say_aside(list, doc);
	say_accident(list, doc);
	say_nulls(list, doc);
	return list;
}

json_t *facts_limits(const json_t *doc)
{
	json_t *list = json_array();
	const char *const lines[] = {
	    "Efficiencies hold for drills like those played. They say nothing about sources of another kind or "
	    "loudness.",
	    "A match is a match in time. It does not show that the parameters were recognised; compare the residuals.",
	    "Clopper-Pearson intervals are guaranteed to cover at the stated confidence; Wilson intervals do so on "
	    "average.",
	    "Not computed in this document: fitted efficiency curves, sensitive time-volume, calibration of stated "
	    "false-alarm "
	    "rates, sky maps, latency, delivery checks and the guess market.",
	};
	for (size_t i = 0; i < sizeof lines / sizeof lines[0]; i++)
		json_array_append_new(list, json_string(lines[i]));
	size_t i;
	json_t *key;
	json_array_foreach((json_t *)(uintptr_t)facts_at(doc, "settings_used.not_understood"), i, key)
	{
		char *line =
		    text_printf("The setting %s was not understood and had no effect.", json_string_value(key));
		json_array_append_new(list, json_string(line));
		qb_free(line);
	}
	return list;
}
