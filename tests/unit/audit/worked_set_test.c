/* The worked set of 60 slots and 95 claims, block by block against its independent result (tests/vectors/audit-small).
 */
#include "tests/audit_cases.h"

#include <stdio.h>

#include "server/audit/audit.h"

/* Every key of `want` must be in `got`, counts exactly, reals to 1e-9; keys in `later` belong to blocks not built yet.
 */
static void same(const json_t *got, const json_t *want, const char *path)
{
	static const char *const later[] = {"time_shift", "separation",    "firth_logit",  "logit",
	                                    "cloglog",    "points",        "isotonic50",   "isotonic_blocks",
	                                    "coverage50", "coverage90",    "cells",        "cells_chi2",
	                                    "cells_p",    "cells_p_exact", "cells_p_holm", "pairs"};
	char where[200];
	const char *key;
	json_t *v;
	size_t i;
	if (json_is_object(want)) {
		json_object_foreach((json_t *)(uintptr_t)want, key, v)
		{
			bool skip = false;
			for (i = 0; i < sizeof later / sizeof later[0]; i++)
				skip = skip || strcmp(later[i], key) == 0;
			(void)snprintf(where, sizeof where, "%s.%s", path, key);
			if (!skip)
				same(json_object_get(got, key), v, where);
		}
	} else if (json_is_array(want)) {
		if (json_array_size(got) != json_array_size(want))
			fail_msg("%s: %zu entries, expected %zu", path, json_array_size(got), json_array_size(want));
		json_array_foreach((json_t *)(uintptr_t)want, i, v)
		{
			(void)snprintf(where, sizeof where, "%s[%zu]", path, i);
			same(json_array_get(got, i), v, where);
		}
	} else if (json_is_real(want)) {
		const double g = json_number_value(got), w = json_number_value(want);
		if (!json_is_number(got) || !(fabs(g - w) <= 1e-9 * fmax(fabs(w), 1e-3)))
			fail_msg("%s: %.17g, expected %.17g", path, g, w);
	} else if (!json_equal(got, want)) {
		char *g = json_text(got), *w = json_text(want);
		fail_msg("%s: %s, expected %s", path, g, w);
	}
}

struct state {
	json_t *got, *want;
};

static int set_up(void **state)
{
	static struct state s;
	struct qb_error e = {0};
	struct audit_input *in = cases_small();
	assert_int_equal(audit_run(in, &s.got, &e), QB_OK);
	audit_input_free(&in);
	s.want = cases_json(CASES_SMALL "expected_audit.json");
	*state = &s;
	return 0;
}

static int tear_down(void **state)
{
	struct state *s = *state;
	json_decref(s->got);
	json_decref(s->want);
	return 0;
}

static void block_of_pipelines(const struct state *s, const char *block)
{
	const char *name;
	json_t *want;
	json_object_foreach(json_object_get(s->want, "pipelines"), name, want)
	{
		char path[120];
		(void)snprintf(path, sizeof path, "%s.%s", name, block);
		assert_non_null(json_object_get(want, block));
		same(json_object_get(json_object_get(json_object_get(s->got, "pipelines"), name), block),
		     json_object_get(want, block), path);
	}
}

static void top_level_blocks_agree(void **state)
{
	const struct state *s = *state;
	static const char *const keys[] = {"set",
	                                   "settings_used",
	                                   "slot_states",
	                                   "observing_livetime_s",
	                                   "background_livetime_s",
	                                   "largest_window_s",
	                                   "unexplained_groups",
	                                   "comparison"};
	for (size_t i = 0; i < sizeof keys / sizeof keys[0]; i++)
		same(json_object_get(s->got, keys[i]), json_object_get(s->want, keys[i]), keys[i]);
}

static void counts_and_matching_agree(void **state)
{
	block_of_pipelines(*state, "claims_in_file");
	block_of_pipelines(*state, "status_counts");
	block_of_pipelines(*state, "near_null_slot");
	block_of_pipelines(*state, "matching");
}

static void accidental_blocks_agree(void **state)
{
	block_of_pipelines(*state, "accidental");
	block_of_pipelines(*state, "null_slot_test");
}

static void efficiency_blocks_agree(void **state)
{
	block_of_pipelines(*state, "efficiency");
	block_of_pipelines(*state, "efficiency_uncrowded");
	block_of_pipelines(*state, "efficiency_by_far");
}

static void bins_and_bands_agree(void **state)
{
	block_of_pipelines(*state, "curves");
}

static void residuals_agree(void **state)
{
	block_of_pipelines(*state, "recovery_quantiles");
}

static void every_claim_has_its_expected_status(void **state)
{
	const struct state *s = *state;
	struct buf b = {0};
	struct qb_error e = {0};
	size_t i, n = 0;
	json_t *c;
	assert_int_equal(file_read(CASES_SMALL "expected_status.tsv", 1u << 20, &b, &e), QB_OK);
	json_array_foreach(json_object_get(s->got, "claims"), i, c)
	{
		const char *slot = json_string_value(json_object_get(c, "slot_id"));
		const char *flag = json_string_value(json_object_get(c, "flag"));
		char line[200];
		(void)snprintf(
		    line, sizeof line, "\n%s\t%s\t%s\t%s\t%s\n", json_string_value(json_object_get(c, "pipeline")),
		    json_string_value(json_object_get(c, "claim_id")), json_string_value(json_object_get(c, "status")),
		    slot != NULL ? slot : "", flag != NULL ? flag : "");
		if (strstr((const char *)b.data, line) == NULL)
			fail_msg("not in the expected table: %s", line);
		n++;
	}
	assert_int_equal(n, 95);
	buf_free(&b);
}

/* 14 of the 27 live drills were found by nobody; every pipeline's list is its own count of misses. */
static void missed_lists_agree_with_the_counts(void **state)
{
	const struct state *s = *state;
	const json_t *missed = json_object_get(s->got, "missed");
	const json_t *each = json_object_get(missed, "by_pipeline");
	assert_int_equal(json_array_size(json_object_get(missed, "by_all")), 14);
	assert_int_equal(json_array_size(json_object_get(each, "amber")), 27 - 9);
	assert_int_equal(json_array_size(json_object_get(each, "birch")), 27 - 13);
	assert_int_equal(json_array_size(json_object_get(each, "cedar")), 27 - 10);
	assert_int_equal(json_array_size(json_object_get(s->got, "unexplained")), 36);
}

/* 31 drills were played; intention to treat divides by all of them. */
static void intention_to_treat_counts_every_played_drill(void **state)
{
	const struct state *s = *state;
	const json_t *itt =
	    json_object_get(json_object_get(json_object_get(s->got, "pipelines"), "amber"), "intention_to_treat");
	assert_int_equal(json_integer_value(json_object_get(itt, "played")), 31);
	assert_int_equal(json_integer_value(json_object_get(itt, "found")), 9);
	assert_int_equal(json_integer_value(json_object_get(itt, "matched_any_played")), 11);
	near_rel(json_number_value(json_object_get(itt, "estimate")), 9.0 / 31.0, 1e-15);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(top_level_blocks_agree),
	    cmocka_unit_test(counts_and_matching_agree),
	    cmocka_unit_test(accidental_blocks_agree),
	    cmocka_unit_test(efficiency_blocks_agree),
	    cmocka_unit_test(bins_and_bands_agree),
	    cmocka_unit_test(residuals_agree),
	    cmocka_unit_test(every_claim_has_its_expected_status),
	    cmocka_unit_test(missed_lists_agree_with_the_counts),
	    cmocka_unit_test(intention_to_treat_counts_every_played_drill),
	};
	return cmocka_run_group_tests(tests, set_up, tear_down);
}
