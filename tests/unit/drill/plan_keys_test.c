/* docs/plan.md is written from the table of plan keys; this keeps the two in step, line by line. */
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/text.h"
#include "server/drill/plan.h"
#include "tests/near.h"

static void every_key_is_in_the_page(void **state)
{
	(void)state;
	struct buf page = {0};
	struct qb_error e = {0};
	int n, lines = 0;
	const struct plan_key *k = plan_keys(&n);
	assert_int_equal(file_read("docs/plan.md", 1 << 20, &page, &e), QB_OK);
	for (int i = 0; i < n; i++) {
		char *line = text_printf("\n| `%s` | %s | %s | %s | %s |\n", k[i].path, k[i].unit, k[i].range,
		                         k[i].fallback, k[i].prose);
		if (strstr((char *)page.data, line) == NULL)
			fail_msg("docs/plan.md lacks the line%s", line);
		qb_free(line);
	}
	char *end = strstr((char *)page.data, "\n## Distributions");
	assert_non_null(end);
	*end = '\0';
	for (const char *p = (char *)page.data; (p = strstr(p, "\n| `")) != NULL; p++)
		lines++;
	assert_int_equal(lines, n);
	buf_free(&page);
}

int main(void)
{
	const struct CMUnitTest tests[] = {cmocka_unit_test(every_key_is_in_the_page)};
	return cmocka_run_group_tests_name("drill/plan-keys", tests, NULL, NULL);
}
