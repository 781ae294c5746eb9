/*
 * The tables of a bundle, as text: the service writes them, the verifier compares what it finds verbatim. Text only, so
 * that an auditor's library still knows nothing of SQLite.
 */
#ifndef QB_LEDGER_BUNDLE_SCHEMA_H
#define QB_LEDGER_BUNDLE_SCHEMA_H

#define BUNDLE_APPLICATION_ID 1363299908 /* "QBND" */
#define BUNDLE_FORMAT         "quietbell-bundle-1"

struct bundle_table {
	const char *name;
	const char *columns; /* what follows the name in CREATE TABLE */
};
extern const struct bundle_table bundle_tables[]; /* NULL-ended by name */

#endif
