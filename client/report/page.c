/* Building blocks of the page's HTML. */
#include "client/report/page.h"

#include <stdbool.h>
#include <string.h>

#include "client/report/figure.h"

void page_cell(struct buf *out, const char *cls, const char *text)
{
	buf_printf(out, *cls != '\0' ? "<td class=\"%s\">" : "<td>", cls);
	figure_escape(out, text);
	buf_text(out, "</td>");
}

/* Column heads are separated by '|'; a leading '<' aligns left. */
void page_table_begin(struct buf *out, const char *caption, const char *heads)
{
	buf_text(out, "<div class=\"scroll\"><table><caption>");
	figure_escape(out, caption);
	buf_text(out, "</caption><thead><tr>");
	while (*heads != '\0') {
		const bool left = *heads == '<';
		const size_t n = strcspn(heads + left, "|");
		buf_printf(out, "<th scope=\"col\"%s>%.*s</th>", left ? " class=\"t\"" : "", (int)n, heads + left);
		heads += left + n;
		heads += *heads == '|';
	}
	buf_text(out, "</tr></thead><tbody>\n");
}

void page_table_end(struct buf *out)
{
	buf_text(out, "</tbody></table></div>\n");
}

/* For columns whose head names the scale. */
const char *page_utc(char out[static FACT], double gps)
{
	char *end = strstr(facts_utc(out, gps), " UTC");
	if (end != NULL)
		*end = '\0';
	return out;
}

void page_section(struct buf *out, const char *id, const char *title, const char *lead)
{
	buf_printf(out, "<section id=\"%s\"><h2>%s</h2><p class=\"lead\">%s</p>\n", id, title, lead);
}

void page_cut_note(struct buf *out, size_t n, const char *file)
{
	if (n > PAGE_ROWS)
		buf_printf(out, "<p class=\"note\">The first %d of %zu are shown; all are in <code>%s</code>.</p>\n",
		           PAGE_ROWS, n, file);
}
