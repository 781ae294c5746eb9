/* Guesses of a bundle: late, misplaced and exchanged ones are found; unreadable and replaced ones are left out. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <stdio.h>
#include <string.h>

#include <cmocka.h>

#include "client/cli/bundle_verify.h"
#include "server/base/alloc.h"

#define START INT64_C(1487894418000000000)
#define SLOT  INT64_C(5000000000)
#define MAX   8

static const uint8_t campaign_id[16] = {1}, service_id[16] = {9};

struct scene {
	struct verified v;
	struct bundle b;
	struct campaign k;
	struct drill_plan plan;
	struct view_party party[2], *pointers[2];
	struct sealed_item item[MAX];
	struct bundle_hidden hidden[MAX];
	struct buf content[MAX], frame[MAX];
};

static void set_up(struct scene *s)
{
	*s = (struct scene){.plan.slots = {.start_gps_ns = START, .end_gps_ns = START + 6 * SLOT, .slot_ns = SLOT}};
	s->k.plan = &s->plan;
	s->k.n_slots = 6;
	memcpy(s->k.id, campaign_id, 16);
	for (int i = 0; i < 2; i++) {
		s->pointers[i] = &s->party[i];
		(void)snprintf(s->party[i].name, sizeof s->party[i].name, "%s", i == 0 ? "lund" : "noor");
		s->party[i].key_id[0] = (uint8_t)(i + 1);
	}
	s->v.bundle = &s->b;
	s->v.k = &s->k;
	s->v.follow.view.party = s->pointers;
	s->v.follow.view.n_parties = 2;
	s->v.follow.frame = s->frame;
	s->v.content = s->content;
	s->b.hidden = s->hidden;
	s->b.records.item = s->item;
}

/* A guess by party `who` about a slot, promised and entered at these times, with these sealed words. */
static void add(struct scene *s, int who, int64_t slot, int64_t received_ns, int64_t entered_ns, const char *words)
{
	size_t n = s->b.n_hidden++;
	char *text;
	struct qb_error e = {0};
	uint8_t id[64] = {(uint8_t)(n + 1)};
	json_t *extra = json_object();
	json_object_set_new(extra, "slot", json_integer(slot));
	json_object_set_new(extra, "sequence", json_integer((json_int_t)n));
	json_object_set_new(extra, "record_id", json_hex_new(id, 64));
	assert_int_equal(
	    wire_entry_compose("guess", s->party[who].name, campaign_id, received_ns, "", extra, &text, &e), QB_OK);
	json_decref(extra);
	struct bundle_hidden *h = &s->hidden[n];
	h->seq = (int64_t)n;
	h->received_gps_ns = received_ns;
	memcpy(h->author, s->party[who].key_id, 16);
	buf_text(&h->entry, text);
	qb_free(text);
	s->b.records.n = n + 1;
	struct record *r = &s->item[n].rec;
	memcpy(r->id, id, 64);
	r->header = (struct record_header){
	    .type = RECORD_GUESS, .index = n, .start_gps_ns = START + slot * SLOT, .duration_ns = (uint64_t)SLOT};
	memcpy(r->header.author, h->author, 16);
	buf_text(&s->content[n], words);
	uint8_t commitment[64] = {0};
	struct entry leaf = {.kind = ENTRY_HIDDEN,
	                     .seq = n,
	                     .received_gps_ns = entered_ns,
	                     .body = commitment,
	                     .body_len = ENTRY_COMMITMENT_BYTES};
	memcpy(leaf.author, service_id, 16);
	assert_int_equal(entry_encode(&leaf, &s->frame[n], &e), QB_OK);
	s->v.follow.n = n + 1;
}

static void tear_down(struct scene *s)
{
	for (size_t i = 0; i < MAX; i++) {
		buf_free(&s->hidden[i].entry);
		buf_free(&s->content[i]);
		buf_free(&s->frame[i]);
	}
}

static enum qb_status verify(struct scene *s)
{
	struct qb_error e = {0};
	s->v.note[0] = '\0';
	return verify_guesses(&s->v, &e);
}

static void a_guess_before_its_slot_holds(void **state)
{
	struct scene s;
	(void)state;
	set_up(&s);
	assert_int_equal(verify(&s), QB_OK);
	assert_string_equal(s.v.note, "no guesses");
	add(&s, 0, 0, START - 2, START - 1, "{\"slot\":0,\"guess\":\"live\"}");
	add(&s, 1, 0, START - 1, START, "{\"slot\":0,\"guess\":\"null\"}"); /* its batch came later */
	assert_int_equal(verify(&s), QB_OK);
	assert_string_equal(s.v.note, "2 guesses, 1 of them in the ledger before the slot, the others by the service's "
	                              "promise; 0 can't be read");
	tear_down(&s);
}

static void a_late_or_misplaced_one_is_found(void **state)
{
	(void)state;
	for (int i = 0; i < 7; i++) {
		struct scene s;
		set_up(&s);
		add(&s, 0, 1, START + SLOT - 1, START + SLOT, "{\"slot\":1,\"guess\":\"live\"}");
		assert_int_equal(verify(&s), QB_OK);
		struct record_header *h = &s.item[0].rec.header;
		if (i == 0)
			s.hidden[0].received_gps_ns++; /* the slot's first instant is too late */
		else if (i == 1)
			h->start_gps_ns += SLOT;
		else if (i == 2)
			h->duration_ns--;
		else if (i == 3)
			h->type = RECORD_MILESTONE;
		else if (i == 4)
			h->index++;
		else if (i == 5)
			h->author[0]++;
		else
			s.b.records.n = 0;
		assert_int_equal(verify(&s), QB_NO);
		tear_down(&s);
	}
	struct scene s;
	set_up(&s);
	add(&s, 0, 1, START, START - 1, "{\"slot\":1,\"guess\":\"live\"}"); /* entered before it was received */
	assert_int_equal(verify(&s), QB_NO);
	tear_down(&s);
}

static void the_newest_of_each_person_and_slot_stands(void **state)
{
	struct scene s;
	struct qb_error e = {0};
	json_t *list = json_array();
	(void)state;
	set_up(&s);
	add(&s, 0, 2, START, START, "{\"slot\":2,\"guess\":\"live\",\"probability_live\":0.75}");
	add(&s, 1, 2, START, START, "{\"slot\":2,\"guess\":\"live\"}");
	add(&s, 0, 2, START + 1, START + 1, "{\"slot\":2,\"guess\":\"null\",\"probability_live\":0}");
	add(&s, 0, 3, START, START, "{\"slot\":3,\"guess\":\"dont_know\"}");
	/* what can't be read, or is about another slot inside, or says more than it may */
	add(&s, 1, 4, START, START, "guess");
	add(&s, 1, 5, START, START, "{\"slot\":4,\"guess\":\"live\"}");
	add(&s, 0, 5, START, START, "{\"slot\":5,\"guess\":\"live\",\"probability_live\":1.5}");
	assert_int_equal(verify(&s), QB_OK);
	assert_non_null(strstr(s.v.note, "7 guesses"));
	assert_non_null(strstr(s.v.note, "3 can't be read"));
	assert_int_equal(bundle_guesses_of(&s.v, list, &e), QB_OK);
	assert_int_equal(json_array_size(list), 3);
	char *text = json_text(json_array_get(list, 1));
	assert_string_equal(text, "{\"analyst\":\"lund\",\"slot_id\":\"slot-000002\",\"guess\":\"null\","
	                          "\"probability_live\":0.0,\"recorded_gps\":\"1487894418.000000001\"}");
	qb_free(text);
	json_decref(list);
	tear_down(&s);
}

int main(void)
{
	const struct CMUnitTest tests[] = {cmocka_unit_test(a_guess_before_its_slot_holds),
	                                   cmocka_unit_test(a_late_or_misplaced_one_is_found),
	                                   cmocka_unit_test(the_newest_of_each_person_and_slot_stands)};
	return cmocka_run_group_tests(tests, NULL, NULL);
}
