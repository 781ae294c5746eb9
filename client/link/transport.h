/*
 * Signed requests to the service, and its problem documents turned into errors. The only user of libcurl.
 */
#ifndef QB_CLIENT_TRANSPORT_H
#define QB_CLIENT_TRANSPORT_H

#include "client/link/home.h"
#include "server/base/json.h"

struct link {
	struct home *home;    /* borrowed */
	void *curl;           /* owned */
	char *url;            /* owned; without a slash at its end */
	bool rehearsal;       /* the service's clock */
	int64_t now_gps_ns;   /* the service's, at link_open or link_refresh */
	int64_t until_gps_ns; /* of the last 409 with a time to wait for, else 0 */
	long http_status;     /* of the last answer */
	long timeout_s;       /* of a whole request; 0: REQUEST_TIMEOUT_S of transport.c */
};

/*
 * First contact: GET /v1/service, pins (or compares) the service's key.
 *
 * Given:    url   NULL: the home's
 * Errors:   QB_USAGE no service known; QB_UNREACHABLE; QB_CRYPTO another service key
 */
enum qb_status link_open(struct link *l, struct home *home, const char *url, struct qb_error *e) QB_MUST_USE;
void link_close(struct link *l);
/* Asks for the service's clock again (l->now_gps_ns). */
enum qb_status link_refresh(struct link *l, struct qb_error *e) QB_MUST_USE;

/*
 * Given:    path     with query, begins with /v1/
 *           body     JSON, or NULL for GET. Signed when the home is unlocked, else sent unsigned.
 * Returned: *out     the document, owned by the caller; out may be NULL
 * Errors:   QB_UNREACHABLE; the service's own error by its problem document
 */
enum qb_status link_get(struct link *l, const char *path, json_t **out, struct qb_error *e) QB_MUST_USE;
enum qb_status link_post(struct link *l, const char *path, const json_t *body, json_t **out,
                         struct qb_error *e) QB_MUST_USE;
/* An answer that is not JSON (the bundle): its bytes, at most limit. */
enum qb_status link_get_bytes(struct link *l, const char *path, size_t limit, struct buf *out,
                              struct qb_error *e) QB_MUST_USE;

/*
 * Composes an entry in the home's name at the service's time, signs it and makes the request body
 * {"entry", "signature"}; add what the route needs beyond it.
 *
 * Given:    campaign  16 bytes or NULL; extra is taken over (decref'd)
 * Returned: *body     owned by the caller; *text (may be NULL) the exact entry, owned by the caller
 */
enum qb_status link_entry(struct link *l, const char *type, const uint8_t *campaign, const char *why, json_t *extra,
                          json_t **body, char **text, struct qb_error *e) QB_MUST_USE;

#endif
