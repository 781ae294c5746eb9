/* The service's life: creating its data directory, opening it with a full check of the ledger, ticking, closing. */
#include "server/ops/ops.h"

#include <errno.h>
#include <string.h>
#include <sys/stat.h>

#include "server/base/alloc.h"
#include "server/base/check.h"
#include "server/base/text.h"
#include "server/ops/internal.h"

#define REHEARSAL_EPOCH_NS (INT64_C(1261872018) * NS_PER_S) /* 2020-01-01T00:00:00Z */
#define NONCE_KEEP_S       (3 * 60)

static char *path_in(const char *dir, const char *name)
{
	return text_printf("%s/%s", dir, name);
}

enum qb_status ops_key_new(const char *dir, const char *name, const struct secret *key, struct qb_error *e)
{
	char *path = path_in(dir, name);
	enum qb_status st = file_write(path, 0600, secret_view(key), secret_size(key), e);
	qb_free(path);
	return st;
}

enum qb_status ops_key_read(const char *dir, const char *name, struct secret **out, struct qb_error *e)
{
	char *path = path_in(dir, name);
	struct buf b = {0};
	struct stat s;
	enum qb_status st = QB_OK;
	if (stat(path, &s) == 0 && (s.st_mode & 077) != 0)
		st = qb_fail(e, QB_REFUSED, path, "chmod 600 it", "can be read by others");
	if (st == QB_OK)
		st = file_read(path, 64, &b, e);
	if (st == QB_OK && b.len != 32)
		st = qb_fail(e, QB_FORMAT, path, "restore it from a backup", "is not a 32-byte key");
	if (st == QB_OK)
		*out = secret_from(b.data, b.len);
	buf_wipe(&b);
	qb_free(path);
	return st;
}

/* The administrator is the first party: the service vouches for its key in the first two entries. */
static enum qb_status first_entries(struct ops *o, const char *admin_name, const uint8_t signing[static 32],
                                    const uint8_t exchange[static 32], struct qb_error *e)
{
	struct txn t;
	json_t *start = json_object(), *admin = json_object();
	json_object_set_new(start, "service_key", json_hex_new(o->service_key, 32));
	json_object_set_new(start, "administrator_key", json_hex_new(signing, 32));
	json_object_set_new(start, "clock", json_string(o->rehearsal_clock ? "rehearsal" : "system"));
	json_object_set_new(admin, "role", json_string("administrator"));
	json_object_set_new(admin, "name", json_string(admin_name));
	json_object_set_new(admin, "signing_key", json_hex_new(signing, 32));
	json_object_set_new(admin, "exchange_key", json_hex_new(exchange, 32));
	json_object_set_new(admin, "invitation", json_integer(0));
	enum qb_status st = txn_begin(&t, o, "init", e);
	if (st != QB_OK) {
		json_decref(start);
		json_decref(admin);
		return st;
	}
	st = txn_service_entry(&t, "service-start", NULL, "the service was created", start, NULL, NULL, e);
	if (st == QB_OK)
		st = txn_service_entry(&t, "enrolment", NULL, "named when the service was created", admin, NULL, NULL,
		                       e);
	else
		json_decref(admin);
	if (st == QB_OK)
		st = txn_commit(&t, e);
	txn_end(&t);
	return st;
}

static void ops_basics(struct ops *o, const char *data_dir)
{
	CHECK(pthread_mutex_init(&o->lock, NULL) == 0);
	CHECK(pthread_cond_init(&o->changed, NULL) == 0);
	o->data_dir = qb_strdup(data_dir);
}

enum qb_status ops_init(const char *data_dir, const char *admin_name, const uint8_t admin_signing[static 32],
                        const uint8_t admin_exchange[static 32], bool rehearsal_clock, struct qb_error *e)
{
	struct ops *o = QB_NEW(struct ops);
	ops_basics(o, data_dir);
	o->settings.system = clock_system();
	o->rehearsal_clock = rehearsal_clock;
	o->rehearsal_now_ns = REHEARSAL_EPOCH_NS;
	o->service_seed = secret_random(32);
	o->storage_key = secret_new(SCALAR_BYTES);
	group_scalar_random(secret_bytes(o->storage_key));
	sign_public(o->service_seed, o->service_key);
	sign_key_id(o->service_key, o->service_id);
	enum qb_status st = QB_OK;
	char *path = path_in(data_dir, "store.sqlite"), now[32];
	if (!text_is_name(admin_name))
		st = qb_fail(e, QB_FORMAT, "administrator's name", "use a-z, 0-9 and -", "is not a name");
	if (st == QB_OK && mkdir(data_dir, 0700) != 0 && errno != EEXIST)
		st = qb_fail(e, QB_IO, data_dir, NULL, "can't be created: %s", strerror(errno));
	if (st == QB_OK)
		st = store_open(path, true, &o->store, e);
	if (st == QB_OK)
		st = ops_key_new(data_dir, "service.key", o->service_seed, e);
	if (st == QB_OK)
		st = ops_key_new(data_dir, "storage.key", o->storage_key, e);
	if (st == QB_OK)
		st = store_setting_put(o->store, "clock", rehearsal_clock ? "rehearsal" : "system", e);
	if (st == QB_OK)
		st = store_setting_put(o->store, "rehearsal-now", clock_gps_text(o->rehearsal_now_ns, now, sizeof now),
		                       e);
	if (st == QB_OK)
		st = first_entries(o, admin_name, admin_signing, admin_exchange, e);
	qb_free(path);
	ops_close(&o);
	return st;
}

static enum qb_status replay(void *state, uint64_t seq, const uint8_t *frame, size_t n,
                             const uint8_t leaf_hash[static 32], struct qb_error *e)
{
	struct ops *o = state;
	struct ledger_hash h;
	struct entry en;
	hash_leaf(&h, frame, n);
	if (memcmp(h.b, leaf_hash, 32) != 0 || seq != o->size)
		return qb_fail(e, QB_FAULT, "ledger", "restore a backup", "stored leaf %llu was altered",
		               (unsigned long long)seq);
	enum qb_status st = entry_decode(frame, n, &en, e);
	if (st != QB_OK)
		return st;
	tree_append(&o->range, &h);
	if (o->size == o->cap) {
		o->cap = o->cap > 0 ? 2 * o->cap : 1024;
		o->leaf = qb_realloc(o->leaf, o->cap, sizeof *o->leaf);
	}
	o->leaf[o->size++] = h;
	return view_apply(&o->view, &en, h.b, e);
}

static enum qb_status check_head(struct ops *o, struct qb_error *e)
{
	struct buf text = {0};
	struct head h;
	struct ledger_hash root;
	enum qb_status st = store_head_get(o->store, o->size, &text, e);
	if (st == QB_OK)
		st = head_parse((const char *)text.data, text.len, &h, e);
	if (st == QB_OK)
		st = head_verify(&h, o->service_key, NULL, 0, NULL, e);
	tree_root(&o->range, &root);
	if (st == QB_OK && !hash_equal(&root, &h.root))
		st = qb_fail(e, QB_FAULT, "ledger", "restore a backup",
		             "the stored ledger does not have the root of its last head");
	buf_free(&text);
	return st;
}

static enum qb_status load_settings(struct ops *o, struct qb_error *e)
{
	struct buf b = {0};
	enum qb_status st = store_setting_get(o->store, "clock", &b, e);
	if (st == QB_OK)
		o->rehearsal_clock = strcmp((const char *)b.data, "rehearsal") == 0;
	if (st == QB_OK && o->rehearsal_clock != o->settings.rehearsal_clock)
		st = qb_fail(e, QB_FORMAT, "configuration: clock", "set it as it was at quietbelld init",
		             "this service was created with the %s clock", (const char *)b.data);
	if (st == QB_OK)
		st = store_setting_get(o->store, "rehearsal-now", &b, e);
	if (st == QB_OK && !clock_gps_parse((const char *)b.data, &o->rehearsal_now_ns))
		st = qb_fail(e, QB_FAULT, "store", NULL, "the rehearsal clock can't be read");
	buf_free(&b);
	return st;
}

/* A sealer that was running when the service died can't be taken up again. */
static enum qb_status close_dead_sealings(struct ops *o, struct qb_error *e)
{
	enum qb_status st = QB_OK;
	for (int i = 0; st == QB_OK && i < o->view.n_campaigns; i++) {
		struct campaign *c = o->view.campaign[i];
		if (c->state != C_SEALING)
			continue;
		struct txn t;
		if ((st = txn_begin(&t, o, "close-dead-sealing", e)) != QB_OK)
			break;
		json_t *extra = json_object();
		json_object_set_new(extra, "sealing_attempt", json_integer((json_int_t)c->sealing_attempt));
		st = txn_service_entry(&t, "sealing-failed", c, "the service was restarted while a sealer ran", extra,
		                       NULL, NULL, e);
		if (st == QB_OK)
			st = txn_commit(&t, e);
		txn_end(&t);
	}
	return st;
}

struct reopening {
	struct campaign *c;
};

/* Spot requests and claims are hidden entries; what the projection needs of them is read back here. */
static enum qb_status reload_hidden(void *state, const struct store_hidden *h, struct qb_error *e)
{
	struct campaign *c = ((struct reopening *)state)->c;
	struct wire_entry en;
	enum qb_status st = wire_entry_parse((const char *)h->entry, h->entry_n, &en, e);
	if (st != QB_OK)
		return st;
	if (strcmp(en.type->type, "claim") == 0)
		c->n_claims++;
	if (strcmp(en.type->type, "spot-request") == 0)
		(void)opening_add_spot(c, &en, h->commitment, h->author, h->received_gps_ns);
	wire_entry_free(&en);
	return QB_OK;
}

static enum qb_status reload_campaigns(struct ops *o, struct qb_error *e)
{
	enum qb_status st = QB_OK;
	for (int i = 0; st == QB_OK && i < o->view.n_campaigns; i++) {
		struct reopening r = {o->view.campaign[i]};
		st = store_hidden_all(o->store, r.c->id, reload_hidden, &r, e);
		if (st == QB_OK)
			st = opening_reload_positions(o, r.c, e);
		if (st == QB_OK)
			st = hidden_batch_time_load(o, r.c, e);
	}
	return st;
}

enum qb_status ops_open(const struct ops_settings *settings, struct ops **out, struct qb_error *e)
{
	struct ops *o = QB_NEW(struct ops);
	*out = NULL;
	ops_basics(o, settings->data_dir);
	o->settings = *settings;
	o->opened_ns = monotonic_ns();
	char *path = path_in(settings->data_dir, "store.sqlite");
	enum qb_status st = store_open(path, false, &o->store, e);
	if (st == QB_OK)
		st = ops_key_read(o->data_dir, "service.key", &o->service_seed, e);
	if (st == QB_OK)
		st = ops_key_read(o->data_dir, "storage.key", &o->storage_key, e);
	if (st == QB_OK) {
		sign_public(o->service_seed, o->service_key);
		sign_key_id(o->service_key, o->service_id);
		if (!group_mul_base(o->storage_point, secret_view(o->storage_key)))
			st = qb_fail(e, QB_FORMAT, "storage.key", "restore it from a backup", "is not a valid key");
	}
	if (st == QB_OK) {
		st = load_settings(o, e);
	}
	if (st == QB_OK)
		st = store_leaves(o->store, 0, UINT64_MAX, replay, o, e);
	if (st == QB_OK)
		st = check_head(o, e);
	if (st == QB_OK)
		st = reload_campaigns(o, e);
	if (st == QB_OK)
		st = close_dead_sealings(o, e);
	qb_free(path);
	if (st != QB_OK)
		ops_close(&o);
	*out = o;
	return st;
}

void ops_close(struct ops **op)
{
	struct ops *o = *op;
	if (o == NULL)
		return;
	pthread_mutex_lock(&o->lock);
	o->stopping = true;
	pthread_cond_broadcast(&o->changed);
	pthread_mutex_unlock(&o->lock);
	for (int i = 0; i < o->view.n_campaigns; i++)
		seal_job_stop(o->view.campaign[i]);
	view_free(&o->view);
	qb_free(o->leaf);
	qb_free(o->data_dir);
	secret_free(&o->service_seed);
	secret_free(&o->storage_key);
	store_close(&o->store);
	pthread_cond_destroy(&o->changed);
	pthread_mutex_destroy(&o->lock);
	qb_free(o);
	*op = NULL;
}

int64_t ops_now(struct ops *o)
{
	pthread_mutex_lock(&o->lock);
	int64_t now = now_locked(o);
	pthread_mutex_unlock(&o->lock);
	return now;
}

static void log_failure(struct ops *o, const char *event, const struct campaign *c, const struct qb_error *e)
{
	char line[900];
	log_event(o->settings.log, LOG_ERROR_, event, "campaign", c->name, "reason",
	          qb_error_line(e, line, sizeof line), NULL);
}

enum qb_status campaign_due(struct ops *o, struct campaign *c, struct qb_error *e)
{
	enum qb_status st = slots_anything_due(o, c) ? slots_due(o, c, e) : QB_OK;
	if (st == QB_OK && canary_due(c, now_locked(o)))
		st = canary_issue(o, c, e);
	if (st != QB_OK || !hidden_due(o, c, now_locked(o)))
		return st;
	struct txn t;
	if ((st = txn_begin(&t, o, "hidden-batch", e)) == QB_OK)
		st = hidden_batches(&t, c, false, e);
	if (st == QB_OK)
		st = txn_commit(&t, e);
	txn_end(&t);
	return st;
}

void ops_tick(struct ops *o)
{
	pthread_mutex_lock(&o->lock);
	for (int i = 0; i < o->view.n_campaigns; i++) {
		struct qb_error e = {0};
		if (campaign_due(o, o->view.campaign[i], &e) != QB_OK)
			log_failure(o, "tick-failed", o->view.campaign[i], &e);
	}
	pthread_mutex_unlock(&o->lock);
}

void ops_wait_change(struct ops *o, uint64_t *size, int64_t *now_gps_ns, int timeout_ms)
{
	struct timespec until;
	CHECK(clock_gettime(CLOCK_REALTIME, &until) == 0);
	until.tv_sec += timeout_ms / 1000;
	until.tv_nsec += (long)(timeout_ms % 1000) * 1000000L;
	if (until.tv_nsec >= NS_PER_S) {
		until.tv_sec++;
		until.tv_nsec -= NS_PER_S;
	}
	pthread_mutex_lock(&o->lock);
	uint64_t size0 = *size;
	int64_t clock0 = *now_gps_ns;
	while (!o->stopping && o->size == size0 && (!o->rehearsal_clock || o->rehearsal_now_ns == clock0)) {
		if (pthread_cond_timedwait(&o->changed, &o->lock, &until) != 0)
			break;
	}
	*size = o->size;
	*now_gps_ns = now_locked(o);
	pthread_mutex_unlock(&o->lock);
}

enum qb_status ops_party_by_key(struct ops *o, const uint8_t key_id[static 16], struct view_party *out,
                                struct qb_error *e)
{
	pthread_mutex_lock(&o->lock);
	const struct view_party *p = view_party_acting(&o->view, key_id);
	if (p != NULL)
		*out = *p;
	pthread_mutex_unlock(&o->lock);
	return p != NULL ? QB_OK : qb_fail(e, QB_NOT_FOUND, NULL, NULL, "the key is not enrolled");
}

enum qb_status ops_nonce_take(struct ops *o, const uint8_t key_id[static 16], const uint8_t nonce[static 16],
                              int64_t now_unix_s, struct qb_error *e)
{
	struct qb_error inner = {0};
	pthread_mutex_lock(&o->lock);
	enum qb_status st = store_begin(o->store, "nonce", &inner);
	if (st == QB_OK)
		st = store_nonce_put(o->store, key_id, nonce, now_unix_s + NONCE_KEEP_S, now_unix_s, &inner);
	if (st == QB_OK)
		st = store_commit(o->store, &inner);
	store_rollback(o->store);
	pthread_mutex_unlock(&o->lock);
	if (st == QB_CONFLICT)
		return qb_fail(e, QB_CRYPTO, "request", "sign it anew", "was sent before");
	if (st != QB_OK && e != NULL)
		*e = inner;
	return st;
}
