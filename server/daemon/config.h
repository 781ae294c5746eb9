/*
 * The daemon's configuration: one table of keys (path, type, range, default, unit, prose), from which parsing, errors,
 * check-config and the manual page come.
 */
#ifndef QB_DAEMON_CONFIG_H
#define QB_DAEMON_CONFIG_H

#include <stdbool.h>
#include <stdint.h>

#include "server/base/buf.h"
#include "server/base/err.h"

#define CONFIG_AUTHORITIES 16

enum config_clock { CONFIG_CLOCK_SYSTEM, CONFIG_CLOCK_REHEARSAL };

/* Every member is int64_t or an owned string, as the table's type says. */
struct config {
	char *data;
	char *listen;
	char *tls_certificate, *tls_key; /* paths, NULL without TLS */
	int64_t behind_proxy;            /* 0 or 1 */
	char *authority[CONFIG_AUTHORITIES + 1];
	int64_t clock;          /* enum config_clock */
	int64_t rehearsal_seed; /* -1: none */
	int64_t log_level;      /* enum log_level */
	int64_t connections, event_streams, body_bytes, body_memory_bytes;
	int64_t request_ns, answer_ns, drain_ns;
	/* from listen */
	char host[80];
	int port;
	bool loopback;
};

/*
 * Given:    text, n   the file's content; file is its name for errors
 * Returned: *out      owned by the caller, also after an error (config_free)
 * Errors:   QB_FORMAT, QB_RANGE  one line: file, line, key, the value seen, what is accepted
 *           QB_REFUSED           values that are fine alone but unsafe together
 */
enum qb_status config_parse(const char *text, size_t n, const char *file, struct config *out,
                            struct qb_error *e) QB_MUST_USE;
enum qb_status config_read(const char *path, struct config *out, struct qb_error *e) QB_MUST_USE;
void config_free(struct config *c);

/* "host:port" into its parts; an IPv6 address stands in brackets. */
bool config_listen_split(const char *listen, char host[static 80], int *port, bool *loopback);

/* The keys as a section of a manual page (roff), and as plain text with the values in force. */
void config_roff(struct buf *out);
void config_show(const struct config *c, struct buf *out);

#endif
