/* People in the projection: which key counts when, who may vouch for whom, and who is one person. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <string.h>

#include <cmocka.h>

#include "server/base/alloc.h"
#include "server/view/view.h"

struct scene {
	struct view v;
	uint64_t seq;
};

static int64_t now(uint64_t seq)
{
	return 1400000000 * INT64_C(1000000000) + (int64_t)seq * 1000000000;
}

/* Applies an entry as if its signature, by this key, had been checked. Takes extra over. */
static enum qb_status apply_signed(struct scene *s, const char *type, const char *by, const uint8_t id[static 16],
                                   json_t *extra)
{
	struct qb_error e = {0};
	char *text;
	uint8_t hash[32] = {0};
	assert_int_equal(wire_entry_compose(type, by, NULL, now(s->seq), "-", extra, &text, &e), QB_OK);
	struct entry leaf = {.kind = ENTRY_PUBLIC,
	                     .seq = s->seq,
	                     .received_gps_ns = now(s->seq),
	                     .body = (const uint8_t *)text,
	                     .body_len = strlen(text)};
	memcpy(leaf.author, id, 16);
	enum qb_status st = view_apply(&s->v, &leaf, hash, &e);
	s->seq += st == QB_OK;
	qb_free(text);
	json_decref(extra);
	return st;
}

/* By the present key of the named party. */
static enum qb_status apply(struct scene *s, const char *type, const char *by, json_t *extra)
{
	const struct view_party *p = view_party_named(&s->v, by);
	assert_non_null(p);
	return apply_signed(s, type, by, p->key_id, extra);
}

static void make_keys(uint8_t tag, uint8_t sign[static 32], uint8_t exchange[static 32])
{
	memset(sign, tag, 32);
	memset(exchange, tag + 100, 32);
}

static json_t *keys_of(uint8_t tag)
{
	uint8_t sign[32], exchange[32];
	json_t *j = json_object();
	make_keys(tag, sign, exchange);
	json_object_set_new(j, "signing_key", json_hex_new(sign, 32));
	json_object_set_new(j, "exchange_key", json_hex_new(exchange, 32));
	return j;
}

static void id_of(uint8_t tag, uint8_t id[static 16])
{
	uint8_t sign[32], exchange[32];
	make_keys(tag, sign, exchange);
	sign_key_id(sign, id);
}

static void enrol(struct scene *s, const char *role, const char *name, uint8_t tag)
{
	uint8_t id[16];
	json_t *j = keys_of(tag);
	json_object_set_new(j, "role", json_string(role));
	json_object_set_new(j, "name", json_string(name));
	json_object_set_new(j, "invitation", json_integer(0));
	id_of(tag, id);
	assert_int_equal(apply_signed(s, "enrolment", name, id, j), QB_OK);
}

static enum qb_status vouch(struct scene *s, const char *by, const char *name, uint8_t tag)
{
	json_t *j = keys_of(tag);
	json_object_set_new(j, "name", json_string(name));
	return apply(s, "vouch", by, j);
}

static enum qb_status named(struct scene *s, const char *type, const char *by, const char *name, const char *person)
{
	json_t *j = json_object();
	json_object_set_new(j, "name", json_string(name));
	if (person != NULL)
		json_object_set_new(j, "person", json_string(person));
	return apply(s, type, by, j);
}

static bool acts(const struct scene *s, uint8_t tag)
{
	uint8_t id[16];
	id_of(tag, id);
	return view_party_acting(&s->v, id) != NULL;
}

static void set_up(struct scene *s)
{
	uint8_t id[16], sign[32], exchange[32];
	json_t *start = json_object(), *admin = keys_of(8);
	*s = (struct scene){0};
	make_keys(7, sign, exchange);
	id_of(7, id);
	json_object_set_new(start, "service_key", json_hex_new(sign, 32));
	json_object_set_new(start, "administrator_key", json_hex_new(exchange, 32));
	json_object_set_new(start, "clock", json_string("system"));
	assert_int_equal(apply_signed(s, "service-start", "service", id, start), QB_OK);
	json_object_set_new(admin, "role", json_string("administrator"));
	json_object_set_new(admin, "name", json_string("admin"));
	json_object_set_new(admin, "invitation", json_integer(0));
	assert_int_equal(apply_signed(s, "enrolment", "service", id, admin), QB_OK);
	enrol(s, "custodian", "ines", 1);
	enrol(s, "custodian", "okoro", 2);
	enrol(s, "reviewer", "asha", 3);
	enrol(s, "operator", "lund", 4);
}

static void a_replaced_key_is_known_and_counts_no_more(void **state)
{
	struct scene s;
	uint8_t id[16], proof[64] = {0}, sign[32], exchange[32];
	(void)state;
	set_up(&s);
	json_t *j = keys_of(20);
	json_object_set_new(j, "proof", json_hex_new(proof, 64));
	assert_int_equal(apply(&s, "key-rotation", "okoro", j), QB_OK);
	assert_true(acts(&s, 20));
	assert_false(acts(&s, 2));
	id_of(2, id);
	make_keys(2, sign, exchange);
	assert_string_equal(view_party_by_id(&s.v, id)->name, "okoro");
	assert_memory_equal(view_signing_key(&s.v, id), sign, 32);
	/* a leaf that the old key signs from now on has no author */
	struct entry leaf = {.kind = ENTRY_PUBLIC, .seq = s.seq, .body = (const uint8_t *)"{}", .body_len = 2};
	uint8_t key[32];
	struct qb_error e = {0};
	memcpy(leaf.author, id, 16);
	assert_int_not_equal(view_author_key(&s.v, &leaf, key, &e), QB_OK);
	id_of(20, leaf.author);
	assert_int_equal(view_author_key(&s.v, &leaf, key, &e), QB_OK);
	view_free(&s.v);
}

static void keys_that_replace_lost_ones_wait_for_two_colleagues(void **state)
{
	struct scene s;
	(void)state;
	set_up(&s);
	assert_int_equal(named(&s, "retirement", "admin", "okoro", NULL), QB_OK);
	assert_false(acts(&s, 2));
	enrol(&s, "custodian", "okoro", 22);
	assert_false(acts(&s, 22));
	assert_int_equal(vouch(&s, "okoro", "okoro", 22), QB_CRYPTO); /* oneself, with keys that count no more */
	assert_int_equal(vouch(&s, "ines", "okoro", 23), QB_OK);      /* other keys: of no effect */
	assert_int_equal(vouch(&s, "admin", "okoro", 22), QB_CRYPTO);
	assert_int_equal(vouch(&s, "ines", "okoro", 22), QB_OK);
	assert_int_equal(vouch(&s, "ines", "okoro", 22), QB_OK); /* twice: of no effect */
	assert_int_equal(view_party_named(&s.v, "okoro")->n_vouchers, 1);
	assert_false(acts(&s, 22));
	assert_int_equal(vouch(&s, "asha", "okoro", 22), QB_OK);
	assert_true(acts(&s, 22));
	assert_false(acts(&s, 2));
	assert_false(view_party_named(&s.v, "okoro")->retired);
	view_free(&s.v);
}

static void a_second_enrolment_starts_the_vouching_anew(void **state)
{
	struct scene s;
	(void)state;
	set_up(&s);
	enrol(&s, "custodian", "okoro", 22);
	assert_int_equal(vouch(&s, "ines", "okoro", 22), QB_OK);
	enrol(&s, "custodian", "okoro", 24);
	assert_int_equal(vouch(&s, "asha", "okoro", 24), QB_OK);
	assert_false(acts(&s, 24));
	assert_false(acts(&s, 22));
	assert_true(acts(&s, 2));
	assert_int_equal(vouch(&s, "asha", "okoro", 22), QB_OK); /* the keys of before */
	assert_false(acts(&s, 22));
	assert_int_equal(vouch(&s, "lund", "okoro", 24), QB_OK);
	assert_true(acts(&s, 24));
	view_free(&s.v);
}

static void one_person_is_one_voucher(void **state)
{
	struct scene s;
	struct qb_error e = {0};
	(void)state;
	set_up(&s);
	enrol(&s, "operator", "lund-night", 5);
	assert_int_equal(named(&s, "same-person", "admin", "lund-night", "lund"), QB_OK);
	enrol(&s, "custodian", "okoro", 22);
	assert_int_equal(vouch(&s, "lund", "okoro", 22), QB_OK);
	assert_int_equal(view_may_vouch(&s.v, "lund-night", "okoro", &e), QB_CONFLICT);
	assert_int_equal(vouch(&s, "lund-night", "okoro", 22), QB_OK);
	assert_false(acts(&s, 22));
	assert_int_equal(named(&s, "same-person", "admin", "ines", "okoro"), QB_OK);
	assert_int_equal(view_may_vouch(&s.v, "ines", "okoro", &e), QB_REFUSED);
	view_free(&s.v);
}

static void nobody_signs_in_another_name(void **state)
{
	struct scene s;
	uint8_t service[16], ines[16];
	json_t *j;
	(void)state;
	set_up(&s);
	enrol(&s, "custodian", "okoro", 22);
	id_of(7, service);
	id_of(1, ines);
	/* the service in ines's name, ines in asha's, and an enrolment that the service makes up */
	j = keys_of(22);
	json_object_set_new(j, "name", json_string("okoro"));
	assert_int_equal(apply_signed(&s, "vouch", "ines", service, json_incref(j)), QB_CRYPTO);
	assert_int_equal(apply_signed(&s, "vouch", "service", service, json_incref(j)), QB_CRYPTO);
	assert_int_equal(apply_signed(&s, "vouch", "asha", ines, j), QB_CRYPTO);
	j = keys_of(40);
	json_object_set_new(j, "role", json_string("custodian"));
	json_object_set_new(j, "name", json_string("okoro"));
	json_object_set_new(j, "invitation", json_integer(0));
	assert_int_equal(apply_signed(&s, "enrolment", "service", service, j), QB_CRYPTO);
	assert_int_equal(view_party_named(&s.v, "okoro")->n_vouchers, 0);
	view_free(&s.v);
}

/* Found by a fuzz target: a ledger with such an entry ended the reader's program. */
static void an_enrolment_is_for_a_role_that_there_is_and_for_oneself(void **state)
{
	struct scene s;
	uint8_t id[16];
	(void)state;
	set_up(&s);
	int before = s.v.n_parties;
	for (int known = 0; known < 2; known++) {
		const char *by = known ? "ines" : "mbeki";
		static const char *const roles[] = {"director", "service", "custodian"};
		for (int i = 0; i < 3; i++) {
			json_t *j = keys_of(known ? 1 : 50);
			json_object_set_new(j, "role", json_string(roles[i]));
			json_object_set_new(j, "name", json_string(i < 2 ? by : "petrov"));
			json_object_set_new(j, "invitation", json_integer(0));
			id_of(known ? 1 : 50, id);
			assert_int_equal(apply_signed(&s, "enrolment", by, id, j), QB_CRYPTO);
		}
	}
	assert_int_equal(s.v.n_parties, before);
	view_free(&s.v);
}

static void keys_are_remembered_up_to_a_bound(void **state)
{
	struct scene s;
	uint8_t proof[64] = {0};
	(void)state;
	set_up(&s);
	for (uint8_t i = 0; i < VIEW_KEYS_MAX + 2; i++) {
		json_t *j = keys_of((uint8_t)(30 + i));
		json_object_set_new(j, "proof", json_hex_new(proof, 64));
		assert_int_equal(apply(&s, "key-rotation", "asha", j), QB_OK);
	}
	assert_int_equal(view_party_named(&s.v, "asha")->n_past, VIEW_KEYS_MAX);
	assert_true(acts(&s, 30 + VIEW_KEYS_MAX - 1));
	view_free(&s.v);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(a_replaced_key_is_known_and_counts_no_more),
	    cmocka_unit_test(keys_that_replace_lost_ones_wait_for_two_colleagues),
	    cmocka_unit_test(a_second_enrolment_starts_the_vouching_anew),
	    cmocka_unit_test(one_person_is_one_voucher),
	    cmocka_unit_test(nobody_signs_in_another_name),
	    cmocka_unit_test(an_enrolment_is_for_a_role_that_there_is_and_for_oneself),
	    cmocka_unit_test(keys_are_remembered_up_to_a_bound),
	};
	return cmocka_run_group_tests(tests, NULL, NULL);
}
