/* The scan's bank of templates, and its defaults. */
#include "client/cli/scan.h"

#include "server/base/alloc.h"
#include "server/base/yaml.h"

const struct scan_settings scan_defaults = {.threshold = 5.5,
                                            .network_threshold = 7.5,
                                            .rate_hz = 2048,
                                            .design_noise = false,
                                            .threads = 2,
                                            .shifts = 20000,
                                            .slack_s = 0.005};

enum qb_status scan_bank_parse(const char *text, size_t n, const char *file, struct scan_bank *out, struct qb_error *e)
{
	struct yaml_doc *doc = NULL;
	*out = (struct scan_bank){0};
	enum qb_status st = yaml_parse(text, n, file, &doc, e);
	if (st == QB_OK)
		st = yaml_is(doc, doc->root, YAML_LIST, e);
	if (st == QB_OK && (doc->root->n_members < 1 || doc->root->n_members > SCAN_MAX_TEMPLATES))
		st = yaml_refuse(doc, doc->root, QB_RANGE, "a list of 1 to 1000 templates", e);
	if (st == QB_OK) {
		out->n = doc->root->n_members;
		out->templates = QB_NEW_ARRAY(struct wave_source, (size_t)out->n);
	}
	for (int i = 0; st == QB_OK && i < out->n; i++) {
		st = yaml_is(doc, doc->root->members[i], YAML_MAP, e);
		if (st == QB_OK)
			st = source_read_node(doc, doc->root->members[i], false, &out->templates[i], e);
	}
	yaml_doc_free(&doc);
	if (st != QB_OK)
		scan_bank_free(out);
	return st;
}

void scan_bank_free(struct scan_bank *bank)
{
	qb_free(bank->templates);
	*bank = (struct scan_bank){0};
}
