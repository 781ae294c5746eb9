/* Requests over libcurl. */
#include "client/link/transport.h"

#include <curl/curl.h>
#include <stdio.h>
#include <string.h>
#include <strings.h>
#include <time.h>

#include "server/base/alloc.h"
#include "server/base/clock.h"
#include "server/base/text.h"
#include "server/ledger/entry.h"
#include "server/wire/entries.h"
#include "server/wire/request.h"

#define ANSWER_MAX        ((size_t)64 << 20)
#define CONNECT_TIMEOUT_S 10
#define REQUEST_TIMEOUT_S 600

struct answer {
	struct buf body;
	size_t limit;
	bool over;
};

static size_t take(char *p, size_t size, size_t n, void *state)
{
	struct answer *a = state;
	if (a->body.len + size * n > a->limit) {
		a->over = true;
		return 0;
	}
	buf_put(&a->body, p, size * n);
	return size * n;
}

static struct curl_slist *add(struct curl_slist *list, const char *name, const char *value)
{
	char *line = text_printf("%s: %s", name, value);
	list = curl_slist_append(list, line);
	qb_free(line);
	return list;
}

/* Host and port as they will stand in the Host header, in lower case. */
static void authority_of(const char *url, char *out, size_t size)
{
	const char *p = strstr(url, "://");
	p = p != NULL ? p + 3 : url;
	(void)snprintf(out, size, "%.*s", (int)strcspn(p, "/"), p);
	for (char *c = out; *c != '\0'; c++)
		*c = *c >= 'A' && *c <= 'Z' ? (char)(*c + 32) : *c;
}

static struct curl_slist *sign(struct link *l, const char *method, const char *path, const void *body, size_t n,
                               struct curl_slist *list)
{
	char authority[300], *copy = qb_strdup(path), *query = strchr(copy, '?');
	uint8_t nonce[16];
	struct wire_signature_headers h;
	if (query != NULL)
		*query++ = '\0';
	authority_of(l->url, authority, sizeof authority);
	random_bytes(nonce, sizeof nonce);
	struct wire_request r = {.method = method,
	                         .authority = authority,
	                         .path = copy,
	                         .query = query != NULL ? query : "",
	                         .content_type = n > 0 ? "application/json" : NULL,
	                         .body = body,
	                         .body_n = n};
	wire_request_sign(&r, l->home->key.seed, l->home->key_id, time(NULL), nonce, &h);
	if (h.content_digest != NULL)
		list = add(list, "Content-Digest", h.content_digest);
	list = add(list, "Signature-Input", h.signature_input);
	list = add(list, "Signature", h.signature);
	wire_signature_headers_free(&h);
	qb_free(copy);
	return list;
}

static enum qb_status problem(struct link *l, long http, const struct buf *body, struct qb_error *e)
{
	static const struct {
		const char *word;
		enum qb_status status;
	} words[] = {{"format", QB_FORMAT},     {"range", QB_RANGE},          {"not-verified", QB_REFUSED},
	             {"refused", QB_REFUSED},   {"conflict", QB_CONFLICT},    {"not-found", QB_NOT_FOUND},
	             {"too-large", QB_REFUSED}, {"unauthorised", QB_REFUSED}, {"no", QB_NO}};
	static const char prefix[] = "urn:quietbell:problem:";
	json_t *doc = json_loadb((const char *)body->data, body->len, 0, NULL);
	const char *type = json_string_value(json_object_get(doc, "type"));
	const char *detail = json_string_value(json_object_get(doc, "detail"));
	const char *until = json_string_value(json_object_get(doc, "until_gps"));
	enum qb_status st = QB_REFUSED;
	if (until != NULL)
		(void)clock_gps_parse(until, &l->until_gps_ns);
	for (size_t i = 0; type != NULL && i < sizeof words / sizeof words[0]; i++) {
		if (strncmp(type, prefix, strlen(prefix)) == 0 && strcmp(type + strlen(prefix), words[i].word) == 0)
			st = words[i].status;
	}
	/* A refusal by the service is a refusal, also when our file was at fault: its exit status is 4. */
	if (st == QB_FORMAT || st == QB_RANGE || st == QB_NO)
		st = QB_REFUSED;
	st = qb_fail(e, st, "service", NULL, "%s (%ld)", detail != NULL ? detail : "no reason was given", http);
	json_decref(doc);
	return st;
}

static enum qb_status perform(struct link *l, const char *method, const char *path, const void *body, size_t n,
                              struct answer *a, struct qb_error *e)
{
	struct curl_slist *headers = NULL;
	char message[CURL_ERROR_SIZE] = "", *url = text_printf("%s%s", l->url, path);
	CURL *c = l->curl;
	l->until_gps_ns = 0;
	curl_easy_reset(c);
	if (n > 0)
		headers = add(headers, "Content-Type", "application/json");
	headers = add(headers, "Expect", "");
	if (l->home->unlocked)
		headers = sign(l, method, path, body, n, headers);
	curl_easy_setopt(c, CURLOPT_URL, url);
	curl_easy_setopt(c, CURLOPT_HTTPHEADER, headers);
	curl_easy_setopt(c, CURLOPT_WRITEFUNCTION, take);
	curl_easy_setopt(c, CURLOPT_WRITEDATA, a);
	curl_easy_setopt(c, CURLOPT_ERRORBUFFER, message);
	curl_easy_setopt(c, CURLOPT_NOSIGNAL, 1L);
	curl_easy_setopt(c, CURLOPT_CONNECTTIMEOUT,
	                 l->timeout_s > 0 && l->timeout_s < CONNECT_TIMEOUT_S ? l->timeout_s : (long)CONNECT_TIMEOUT_S);
	curl_easy_setopt(c, CURLOPT_TIMEOUT, l->timeout_s > 0 ? l->timeout_s : (long)REQUEST_TIMEOUT_S);
	curl_easy_setopt(c, CURLOPT_PROTOCOLS_STR, "http,https");
	curl_easy_setopt(c, CURLOPT_FOLLOWLOCATION, 0L);
	curl_easy_setopt(c, CURLOPT_PATH_AS_IS, 1L);
	if (strcmp(method, "POST") == 0) {
		curl_easy_setopt(c, CURLOPT_POSTFIELDSIZE_LARGE, (curl_off_t)n);
		curl_easy_setopt(c, CURLOPT_POSTFIELDS, body);
	}
	CURLcode code = curl_easy_perform(c);
	enum qb_status st = QB_OK;
	if (code != CURLE_OK && a->over)
		st = qb_fail(e, QB_FORMAT, url, NULL, "the answer is larger than expected");
	else if (code != CURLE_OK)
		st = qb_fail(e, QB_UNREACHABLE, l->url, "check that the service runs and the address is right",
		             "the service can't be reached: %s",
		             message[0] != '\0' ? message : curl_easy_strerror(code));
	else
		curl_easy_getinfo(c, CURLINFO_RESPONSE_CODE, &l->http_status);
	if (st == QB_OK && (l->http_status < 200 || l->http_status > 299))
		st = problem(l, l->http_status, &a->body, e);
	curl_slist_free_all(headers);
	qb_free(url);
	return st;
}

static enum qb_status exchange(struct link *l, const char *method, const char *path, const json_t *body, json_t **out,
                               struct qb_error *e)
{
	struct answer a = {.limit = ANSWER_MAX};
	char *text = body != NULL ? json_text(body) : NULL;
	json_t *doc = NULL;
	enum qb_status st = perform(l, method, path, text, text != NULL ? strlen(text) : 0, &a, e);
	if (st == QB_OK)
		st = json_read((const char *)a.body.data, a.body.len, "the service's answer", &doc, e);
	if (out != NULL)
		*out = doc;
	else
		json_decref(doc);
	qb_free(text);
	buf_wipe(&a.body); /* it may have carried a slot key */
	return st;
}

enum qb_status link_get(struct link *l, const char *path, json_t **out, struct qb_error *e)
{
	if (out != NULL)
		*out = NULL;
	return exchange(l, "GET", path, NULL, out, e);
}

enum qb_status link_post(struct link *l, const char *path, const json_t *body, json_t **out, struct qb_error *e)
{
	if (out != NULL)
		*out = NULL;
	return exchange(l, "POST", path, body, out, e);
}

enum qb_status link_get_bytes(struct link *l, const char *path, size_t limit, struct buf *out, struct qb_error *e)
{
	struct answer a = {.limit = limit};
	enum qb_status st = perform(l, "GET", path, NULL, 0, &a, e);
	if (st == QB_OK)
		*out = a.body;
	else
		buf_free(&a.body);
	return st;
}

static enum qb_status read_service(struct link *l, uint8_t key[static 32], struct qb_error *e)
{
	json_t *doc;
	const char *clock;
	enum qb_status st = link_get(l, "/v1/service", &doc, e);
	if (st == QB_OK)
		st = json_hex(doc, "service_key", "service", key, 32, e);
	if (st == QB_OK)
		st = json_gps(doc, "now_gps", "service", &l->now_gps_ns, e);
	if (st == QB_OK)
		st = json_str(doc, "clock", "service", &clock, e);
	if (st == QB_OK)
		l->rehearsal = strcmp(clock, "rehearsal") == 0;
	json_decref(doc);
	return st;
}

enum qb_status link_refresh(struct link *l, struct qb_error *e)
{
	uint8_t key[32];
	enum qb_status st = read_service(l, key, e);
	if (st == QB_OK && memcmp(key, l->home->service_key, 32) != 0)
		st = qb_fail(e, QB_CRYPTO, l->url, NULL, "the service shows another key than before");
	return st;
}

enum qb_status link_open(struct link *l, struct home *home, const char *url, struct qb_error *e)
{
	uint8_t key[32];
	*l = (struct link){.home = home};
	if (url == NULL)
		url = home->url;
	if (*url == '\0')
		return qb_fail(e, QB_USAGE, NULL, "give --service URL once", "no service is known yet");
	if (strncmp(url, "http://", 7) != 0 && strncmp(url, "https://", 8) != 0)
		return qb_fail(e, QB_USAGE, url, "write http://HOST:PORT or https://HOST:PORT",
		               "is not the address of a service");
	l->url = qb_strdup(url);
	size_t n = strlen(l->url);
	while (n > 0 && l->url[n - 1] == '/')
		l->url[--n] = '\0';
	l->curl = curl_easy_init();
	enum qb_status st =
	    l->curl != NULL ? read_service(l, key, e) : qb_fail(e, QB_FAULT, NULL, NULL, "libcurl can't be started");
	if (st == QB_OK)
		st = home_pin(home, l->url, key, e);
	if (st != QB_OK)
		link_close(l);
	return st;
}

void link_close(struct link *l)
{
	if (l->curl != NULL)
		curl_easy_cleanup(l->curl);
	qb_free(l->url);
	*l = (struct link){0};
}

enum qb_status link_entry(struct link *l, const char *type, const uint8_t *campaign, const char *why, json_t *extra,
                          json_t **body, char **text, struct qb_error *e)
{
	char *entry = NULL;
	uint8_t signature[SIGN_BYTES];
	*body = NULL;
	enum qb_status st = link_refresh(l, e);
	if (st == QB_OK)
		st = wire_entry_compose(type, l->home->name, campaign, l->now_gps_ns, why != NULL ? why : "", extra,
		                        &entry, e);
	json_decref(extra);
	if (st == QB_OK) {
		entry_sign_body(l->home->key.seed, entry, strlen(entry), signature);
		*body = json_object();
		json_object_set_new(*body, "entry", json_string(entry));
		json_object_set_new(*body, "signature", json_hex_new(signature, SIGN_BYTES));
	}
	if (text != NULL)
		*text = entry;
	else
		qb_free(entry);
	return st;
}
