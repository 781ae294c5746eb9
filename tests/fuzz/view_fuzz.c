/*
 * The ledger of a host that enters what it likes: any run of well-formed entries by the people of a campaign, after a
 * start that takes it as far as the first byte says. Whatever comes, every reader of the projection has an answer.
 */
#include "tests/fuzz/parties_fixed.h"

#include "server/base/alloc.h"
#include "server/base/text.h"
#include "server/view/view.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

#define PEOPLE 13
static const struct {
	const char *name, *role;
} people[PEOPLE] = {{"office", "administrator"}, {"ines", "custodian"}, {"okoro", "custodian"},
                    {"marchetti", "custodian"},  {"asha", "reviewer"},  {"lund", "operator"},
                    {"mbeki", "liaison"},        {"hosta", "driver"},   {"hostb", "driver"},
                    {"hostc", "driver"},         {"noor", "analyst"},   {"vela", "custodian"},
                    {"orrin", "custodian"}};
#define SERVICE PEOPLE
static struct party_key key[PEOPLE + 1];
static struct party_public pub[PEOPLE + 1];
static uint8_t id[PEOPLE + 1][16];

struct step {
	int author;
	char *text;
};
static struct step start[40];
static int n_start, certified_at, sealed_at;
static char *message[12]; /* what real custodians sent, base64 */
static int n_messages;
static uint8_t campaign[16], signature[3][SIGN_BYTES];

static enum qb_status enter(struct view *v, uint64_t seq, int author, const char *text)
{
	struct entry en = {.seq = seq,
	                   .received_gps_ns = INT64_C(1487894418000000000) + (int64_t)seq * INT64_C(40000000000000),
	                   .body = (const uint8_t *)text,
	                   .body_len = strlen(text)};
	uint8_t leaf[32] = {(uint8_t)seq, (uint8_t)(seq >> 8), 1};
	struct qb_error e = {0};
	memcpy(en.author, id[author], 16);
	return view_apply(v, &en, leaf, &e);
}

static const char *name_of(int author)
{
	return author == SERVICE ? "service" : people[author].name;
}

static void put_hex(json_t *o, const char *member, const uint8_t *p, size_t n)
{
	char hex[129];
	hex_encode(hex, p, n);
	json_object_set_new(o, member, json_string(hex));
}

/* A step of the start, which must be accepted. Takes extra. */
static void begin_with(struct view *v, int author, const char *type, json_t *extra)
{
	struct step *s = &start[n_start];
	CHECK(n_start < 40);
	s->author = author;
	CHECK(wire_entry_compose(type, name_of(author), v->n_campaigns > 0 ? campaign : NULL,
	                         INT64_C(1487894418000000000), "", extra, &s->text, NULL) == QB_OK);
	CHECK(enter(v, (uint64_t)n_start, author, s->text) == QB_OK);
	n_start++;
	json_decref(extra);
}

static json_t *text_of_file(const char *path)
{
	struct buf b = {0};
	CHECK(file_read(path, 1 << 20, &b, NULL) == QB_OK);
	json_t *t = json_stringn((const char *)b.data, b.len);
	buf_free(&b);
	return t;
}

static void generate_key(struct view *v)
{
	struct campaign *c = v->campaign[0];
	struct custody_group g;
	uint8_t hash[64] = {1};
	for (uint32_t i = 1; i <= 3; i++) {
		struct buf b = {0};
		json_t *o = json_object();
		CHECK(deal_make(&c->context, i, &key[i], &b, NULL) == QB_OK);
		message[n_messages++] = base64_encode(b.data, b.len);
		json_object_set_new(o, "attempt", json_integer((json_int_t)c->attempt));
		json_object_set_new(o, "message", json_string(message[n_messages - 1]));
		put_hex(o, "contribution_commitment", hash, 64);
		begin_with(v, (int)i, "deal", o);
		buf_free(&b);
	}
	CHECK(c->has_group);
	g = c->group;
	for (int i = 0; i < 3; i++) {
		json_t *o = json_object();
		keygen_certificate_sign(&g, key[i + 1].seed, signature[i]);
		keygen_certificate_hash(&g, hash);
		json_object_set_new(o, "attempt", json_integer((json_int_t)c->attempt));
		put_hex(o, "certificate", hash, 64);
		put_hex(o, "certificate_signature", signature[i], SIGN_BYTES);
		begin_with(v, i + 1, "certify", o);
	}
	certified_at = n_start;
}

static void seal(struct view *v)
{
	struct campaign *c = v->campaign[0];
	struct record_header h = {.type = RECORD_CANARY, .epoch = (uint32_t)c->group.seal_epoch};
	struct buf b = {0};
	uint8_t zeros[64] = {0};
	memcpy(h.campaign, c->id, 16);
	CHECK(record_seal(&c->group, &h, "canary", 6, &b, NULL) == QB_OK);
	message[n_messages++] = base64_encode(b.data, b.len);
	json_t *o = json_pack("{s:I, s:s}", "attempt", (json_int_t)c->attempt, "record", message[n_messages - 1]);
	begin_with(v, SERVICE, "canary", o);
	CHECK(c->state == C_CERTIFIED);
	begin_with(v, SERVICE, "rehearsed", json_pack("{s:I}", "attempt", (json_int_t)c->attempt));
	o = json_pack("{s:i}", "sealing_attempt", 1);
	put_hex(o, "sealer_key", pub[0].exchange, 32);
	put_hex(o, "service_commitment", zeros, 64);
	put_hex(o, "host_signature", zeros, 64);
	begin_with(v, SERVICE, "sealing", o);
	buf_free(&b);
	sealed_at = n_start;
}

static void setup(void)
{
	struct view v = {0};
	CHECK(secret_setup(NULL) == QB_OK);
	for (uint8_t j = 0; j <= PEOPLE; j++) {
		uint8_t seed[32] = {j, 9}, scalar[32];
		group_scalar_from_u64(scalar, 2000U + j);
		CHECK(party_key_from(seed, scalar, &key[j], NULL) == QB_OK);
		party_key_public(&key[j], &pub[j]);
		sign_key_id(pub[j].sign, id[j]);
	}
	json_t *o = json_pack("{s:s}", "clock", "rehearsal");
	put_hex(o, "service_key", pub[SERVICE].sign, 32);
	put_hex(o, "administrator_key", pub[0].sign, 32);
	begin_with(&v, SERVICE, "service-start", o);
	for (int j = 0; j < PEOPLE; j++) {
		o = json_pack("{s:s, s:s, s:i}", "role", people[j].role, "name", people[j].name, "invitation", 0);
		put_hex(o, "signing_key", pub[j].sign, 32);
		put_hex(o, "exchange_key", pub[j].exchange, 32);
		int author = j;
		if (j == 0) { /* the service enrols the administrator */
			struct step *s = &start[n_start];
			s->author = SERVICE;
			CHECK(wire_entry_compose("enrolment", "service", NULL, INT64_C(1487894418000000000), "", o,
			                         &s->text, NULL) == QB_OK);
			CHECK(enter(&v, (uint64_t)n_start++, SERVICE, s->text) == QB_OK);
			json_decref(o);
		} else {
			begin_with(&v, author, "enrolment", o);
		}
	}
	o = json_object();
	put_hex(o, "nonce", id[0], 16);
	json_object_set_new(o, "plan", text_of_file("deploy/demo/short-plan.yaml"));
	json_object_set_new(o, "files", json_object());
	json_object_set_new(json_object_get(o, "files"), "short-network.yaml",
	                    text_of_file("deploy/demo/short-network.yaml"));
	json_object_set_new(json_object_get(o, "files"), "network.yaml", text_of_file("deploy/demo/network.yaml"));
	begin_with(&v, 0, "plan", o);
	CHECK(v.n_campaigns == 1);
	memcpy(campaign, v.campaign[0]->id, 16);
	generate_key(&v);
	seal(&v);
	view_free(&v);
}

/* ---- entries from bytes ---- */

static uint8_t take(const uint8_t **p, const uint8_t *end)
{
	return *p < end ? *(*p)++ : 0;
}

static json_t *a_name(uint8_t b)
{
	static const char *const words[] = {"tarn",  "heron",  "skerry",    "all",    "rehearsal",     "observing",
	                                    "amber", "nobody", "custodian", "driver", "administrator", "reviewer"};
	return json_string(b < PEOPLE ? people[b].name : words[b % (sizeof words / sizeof words[0])]);
}

static json_t *an_hex(const uint8_t **p, const uint8_t *end, size_t n)
{
	uint8_t bytes[96], b = take(p, end);
	char hex[193];
	memset(bytes, b, sizeof bytes);
	if (b <= PEOPLE)
		memcpy(bytes,
		       n == 16                 ? id[b]
		       : take(p, end) % 2 == 0 ? pub[b].sign
		                               : pub[b].exchange,
		       n == 16 ? 16 : 32);
	else if (b < 17 + 3 && n == 64 && b >= 17)
		memcpy(bytes, signature[b - 17], 64);
	else if (b < 60 && n == 16)
		memcpy(bytes, (uint8_t[32]){b, 0, 1}, 16); /* the opening that leaf b asked for */
	hex_encode(hex, bytes, n);
	return json_string(hex);
}

static json_t *a_message(const uint8_t **p, const uint8_t *end)
{
	uint8_t b = take(p, end), flip = take(p, end);
	struct buf raw = {0};
	if (b < 64)
		CHECK(base64_decode(message[b % n_messages], &raw));
	else
		buf_put(&raw, *p, (size_t)(end - *p) < b ? (size_t)(end - *p) : b);
	if (flip != 0 && raw.len > 0)
		raw.data[(size_t)flip * 7 % raw.len] ^= flip;
	char *text = base64_encode(raw.data, raw.len);
	json_t *t = json_string(text);
	qb_free(text);
	buf_free(&raw);
	return t;
}

static json_t *a_member(enum wire_member_kind kind, const uint8_t **p, const uint8_t *end)
{
	uint8_t b = take(p, end);
	json_t *list = NULL;
	switch (kind) {
	case WIRE_TEXT:
	case WIRE_LONG:
		return b < 200 ? a_name(b) : json_string("campaign: x\nphase: y\n");
	case WIRE_NAME:
		return a_name(b);
	case WIRE_INT:
		return json_integer(b == 255   ? INT64_C(1) << 53
		                    : b == 254 ? 0x7fffffff
		                    : b == 253 ? 0xffffffff
		                               : b - 1);
	case WIRE_GPS:
		return json_string(b == 255     ? "9000000000"
		                   : b == 254   ? "0"
		                   : b % 2 == 0 ? "1487894500"
		                                : "1487894418.5");
	case WIRE_HEX16:
		return an_hex(p, end, 16);
	case WIRE_HEX32:
		return an_hex(p, end, 32);
	case WIRE_HEX64:
		return an_hex(p, end, 64);
	case WIRE_HEX96:
		return an_hex(p, end, 96);
	case WIRE_BASE64:
		return a_message(p, end);
	case WIRE_NAMES:
		list = json_array();
		for (int i = 0; i < b % 40; i++)
			json_array_append_new(list, a_name(take(p, end)));
		return list;
	case WIRE_PAIRS:
		return json_pack("[[s,s]]", "1487894418", "1487894500");
	case WIRE_FILES:
		return json_object();
	}
	return json_null();
}

static void one_entry(struct view *v, uint64_t seq, const uint8_t **p, const uint8_t *end)
{
	int n_types;
	const struct wire_entry_type *all = wire_entry_types(&n_types), *type = &all[take(p, end) % n_types];
	int author = take(p, end) % (PEOPLE + 1);
	json_t *extra = json_object();
	char *text = NULL;
	for (const struct wire_member *m = type->members; m->key != NULL; m++)
		json_object_set_new(extra, m->key, a_member(m->kind, p, end));
	if (wire_entry_compose(type->type, name_of(author), type->needs_campaign ? campaign : NULL,
	                       INT64_C(1487894418000000000), "", extra, &text, NULL) == QB_OK)
		(void)enter(v, seq, author, text);
	qb_free(text);
	json_decref(extra);
}

/* All that clients and the service ask of a projection. */
static void read_it(const struct view *v, uint64_t seq)
{
	int64_t now = INT64_C(1487894418000000000) + (int64_t)seq * INT64_C(40000000000000);
	struct custody_group g;
	struct states_hold *holds;
	struct states_stop *stops;
	uint8_t out[64] = {0};
	for (int k = 0; k < v->n_campaigns; k++) {
		struct campaign *c = v->campaign[k];
		int order[CUSTODY_MAX], called = opening_rota(c, id[1], SCOPE_FULL, now, now + 1000, now + 500, order);
		CHECK(called >= 0 && called <= c->n && c->n <= CUSTODY_MAX && c->k <= c->n);
		(void)campaign_certified_group(c, &g, NULL);
		(void)campaign_margin(c);
		(void)campaign_word(c);
		(void)campaign_next_canary(c);
		for (int i = 0; i < c->n; i++)
			(void)campaign_missed(c, i);
		for (int i = 0; i < v->n_parties; i++) {
			const struct view_party *p = v->party[i];
			(void)campaign_role(c, p);
			(void)campaign_role_then(c, p, now);
			(void)campaign_silent(c, p->name, now);
			(void)campaign_owes(c, p->name);
			(void)view_eligible(v, c, p->name, DUTY_CUSTODIAN, NULL);
			(void)view_may_vouch(v, "ines", p->name, NULL);
			(void)view_keys_in_use(v, p);
		}
		campaign_output_statement(c, 0, out, out);
		campaign_controls(c, &holds, &stops);
		qb_free(holds);
		qb_free(stops);
	}
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
	struct view v = {0};
	const uint8_t *p = data, *end = data + size;
	if (n_start == 0)
		setup();
	uint8_t far = take(&p, end);
	int n = far % 4 == 0   ? certified_at - 6
	        : far % 4 == 1 ? certified_at - far / 4 % 6
	        : far % 4 == 2 ? certified_at
	                       : sealed_at;
	for (int i = 0; i < n; i++)
		CHECK(enter(&v, (uint64_t)i, start[i].author, start[i].text) == QB_OK);
	uint64_t seq = (uint64_t)n;
	for (; p < end && seq < (uint64_t)n + 24; seq++)
		one_entry(&v, seq, &p, end);
	read_it(&v, seq);
	view_free(&v);
	return 0;
}
