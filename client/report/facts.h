/*
 * Reading an audit document for its readers: lookups that bear missing members, numbers in words, and the sentences of
 * the summary, which the page and the text share so that they can never disagree.
 */
#ifndef QB_CLIENT_REPORT_FACTS_H
#define QB_CLIENT_REPORT_FACTS_H

#include <stdbool.h>

#include "server/base/buf.h"
#include "server/base/json.h"

/* Member by a dotted path ("comparison.union.estimate"), or NULL. */
const json_t *facts_at(const json_t *doc, const char *path);
/* The same as a number (NaN when absent), as text ("" when absent), and element i of an array of numbers. */
double facts_number(const json_t *doc, const char *path);
const char *facts_text(const json_t *doc, const char *path);
double facts_element(const json_t *doc, const char *path, size_t i);
/* Names of the pipelines in plan order; NULL past the end. */
const char *facts_pipeline(const json_t *doc, size_t i);
/* Block of a pipeline by name. */
const json_t *facts_pipeline_block(const json_t *doc, const char *name);

/* Live drills found by nobody, loudest first; array owned by the caller. */
json_t *facts_missed(const json_t *doc);

/* Into a caller's buffer of FACT bytes; they return it. A number that is not known is an en dash. */
#define FACT 96
char *facts_percent(char out[static FACT], double fraction);          /* "48.1 %" */
char *facts_range(char out[static FACT], const json_t *pair);         /* "28.7 to 68.1 %", of [lower, upper] */
char *facts_significant(char out[static FACT], double x, int digits); /* "12.7", "0.00013" */
char *facts_p_value(char out[static FACT], double p);                 /* "0.042", "< 0.0001" */
char *facts_count(char out[static FACT], double n);                   /* "27" */
char *facts_plain(char out[static FACT], double x);                   /* "0.5", "95": as it was set */
char *facts_utc(char out[static FACT], double gps);                   /* "2027-01-22 21:02:09 UTC" */
char *facts_duration(char out[static FACT], double seconds);          /* "8.7 days", "3.2 hours" */

/*
 * The plain-words summary.
 *
 * Returned: array of [heading, sentence] pairs, owned by the caller
 */
json_t *facts_summary(const json_t *doc);
/* What the document does not answer, as sentences; array of strings, owned by the caller. */
json_t *facts_limits(const json_t *doc);

#endif
