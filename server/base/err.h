/*
 * Status codes and the one error record that travels with them. The record is filled once, at the origin, with what is
 * wrong, where, and the mend; the layers above pass it on untouched.
 */
#ifndef QB_BASE_ERR_H
#define QB_BASE_ERR_H

#include <stddef.h>

enum qb_status {
	QB_OK = 0,
	QB_NO,          /* the answer is no: a verification failed, a plan breaks a rule, a slot is not open */
	QB_USAGE,       /* wrong command line */
	QB_FORMAT,      /* a file or message can't be parsed, an unknown key, a wrong type */
	QB_RANGE,       /* a value is outside its range */
	QB_IO,          /* reading or writing failed */
	QB_CRYPTO,      /* a signature, proof, tag or passphrase does not verify */
	QB_REFUSED,     /* the service refuses: role, state or rule */
	QB_CONFLICT,    /* the service refuses now: wrong time or state, try later or never */
	QB_NOT_FOUND,   /* no such campaign, slot, party ... */
	QB_UNREACHABLE, /* the service can't be reached */
	QB_FAULT        /* our own fault */
};

#define QB_MUST_USE     __attribute__((warn_unused_result))
#define QB_PRINTF(f, a) __attribute__((format(printf, f, a), nonnull(f)))

struct qb_error {
	enum qb_status status; /* QB_OK while nothing was reported */
	char what[400];
	char where[240]; /* file:line: key path, or route, or object; may be empty */
	char mend[240];
};

/*
 * Fills *e unless it already holds an error (the origin wins), and returns status so that a caller can write
 * `return qb_fail(e, QB_RANGE, where, mend, "...")`.
 *
 * Given:    e       may be NULL
 *           where   the place in words, may be NULL
 *           mend    what the reader should do, may be NULL
 *           fmt     what is wrong; control characters are replaced by '?'
 */
enum qb_status qb_fail(struct qb_error *e, enum qb_status status, const char *where, const char *mend, const char *fmt,
                       ...) QB_PRINTF(5, 6);

/* One line "what (where); mend" into out, always terminated, cut to size. Returns out. */
const char *qb_error_line(const struct qb_error *e, char *out, size_t size);

/* The exit status of a program that ends with this status: 0, 1, 2, 3, 4, 5 or 70 (docs/man/quietbell.1). */
int qb_exit_status(enum qb_status status);

/* A stable word for a status ("format", "range" ...), used in logs and problem documents. */
const char *qb_status_word(enum qb_status status);

#endif
