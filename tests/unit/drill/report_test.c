/* Play notes and reports: round trips, size limits, every truncation, bad content one by one. */
#include <math.h>
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/clock.h"
#include "server/base/text.h"
#include "server/drill/report.h"
#include "tests/near.h"

static struct play_note a_note(void)
{
	return (struct play_note){.slot = 999999,
	                          .station = "tarn",
	                          .number = 14,
	                          .at_gps_ns = INT64_C(1488888060123456789),
	                          .state = PLAY_PLAYING,
	                          .played_from_ns = INT64_C(1488888050000000001),
	                          .played_to_ns = INT64_C(1488888059999999999),
	                          .samples = 40960,
	                          .peak_counts = 12345.6789012345678};
}

static struct play_report a_report(void)
{
	struct play_report r = {.slot = 7,
	                        .station = "heron",
	                        .state = PLAY_STOPPED,
	                        .played_from_ns = INT64_C(1488888050000000000),
	                        .played_to_ns = INT64_C(1488888051000000000),
	                        .samples = 4096,
	                        .peak_counts = 0.1,
	                        .margin = 3.25,
	                        .calibration_id = "heron-2027a",
	                        .reason = "stopped by lund: \"lock lost\""};
	for (int i = 0; i < 64; i++)
		r.samples_hash[i] = (uint8_t)(i * 7);
	return r;
}

/* What was decoded encodes to the same bytes. */
static void same_bytes_again(const struct buf *want, const struct play_note *n, const struct play_report *r)
{
	struct buf b = {0};
	struct qb_error e = {0};
	assert_int_equal(n != NULL ? play_note_encode(n, &b, &e) : play_report_encode(r, &b, &e), QB_OK);
	assert_int_equal(b.len, want->len);
	assert_memory_equal(b.data, want->data, b.len);
	buf_free(&b);
}

static void note_round_trip(void **state)
{
	(void)state;
	struct buf b = {0};
	struct qb_error e = {0};
	struct play_note n = a_note(), back;
	for (int s = 0; s < PLAY_STATES; s++) {
		n.state = (enum play_state)s;
		buf_clear(&b);
		assert_int_equal(play_note_encode(&n, &b, &e), QB_OK);
		assert_true(b.len <= PLAY_NOTE_BYTES);
		assert_int_equal(play_note_decode(b.data, b.len, &back, &e), QB_OK);
		same_bytes_again(&b, &back, NULL);
		assert_int_equal(back.slot, n.slot);
		assert_int_equal(back.number, n.number);
		assert_int_equal(back.state, n.state);
		assert_int_equal(back.at_gps_ns, n.at_gps_ns);
		assert_int_equal(back.played_from_ns, n.played_from_ns);
		assert_int_equal(back.played_to_ns, n.played_to_ns);
		near_abs(back.peak_counts, n.peak_counts, 0);
	}
	/* The longest station name still fits. */
	memset(n.station, 'a', 63);
	n.station[63] = '\0';
	buf_clear(&b);
	assert_int_equal(play_note_encode(&n, &b, &e), QB_OK);
	for (size_t k = 0; k < b.len; k++) {
		struct qb_error cut = {0};
		assert_int_not_equal(play_note_decode(b.data, k, &back, &cut), QB_OK);
	}
	buf_free(&b);
}

static void report_round_trip(void **state)
{
	(void)state;
	struct buf b = {0};
	struct qb_error e = {0};
	struct play_report r = a_report(), back;
	assert_int_equal(play_report_encode(&r, &b, &e), QB_OK);
	assert_int_equal(play_report_decode(b.data, b.len, &back, &e), QB_OK);
	same_bytes_again(&b, NULL, &back);
	assert_string_equal(back.reason, r.reason);
	assert_string_equal(back.calibration_id, r.calibration_id);
	assert_memory_equal(back.samples_hash, r.samples_hash, 64);
	assert_int_equal(back.samples, r.samples);
	near_abs(back.margin, 3.25, 0);
	for (size_t k = 0; k < b.len; k++) {
		struct qb_error cut = {0};
		assert_int_not_equal(play_report_decode(b.data, k, &back, &cut), QB_OK);
	}
	/* The worst reason: every byte needs an escape, and it still fits. */
	memset(r.reason, '"', sizeof r.reason - 1);
	r.reason[sizeof r.reason - 1] = '\0';
	buf_clear(&b);
	assert_int_equal(play_report_encode(&r, &b, &e), QB_OK);
	assert_true(b.len <= PLAY_REPORT_BYTES);
	assert_int_equal(play_report_decode(b.data, b.len, &back, &e), QB_OK);
	assert_string_equal(r.reason, back.reason);
	buf_free(&b);
}

static void encoding_refuses(void **state)
{
	(void)state;
	struct buf b = {0};
	struct play_note n;
#define REFUSED(change)                                                                                                \
	do {                                                                                                           \
		struct qb_error e_ = {0};                                                                              \
		n = a_note();                                                                                          \
		change;                                                                                                \
		assert_int_equal(play_note_encode(&n, &b, &e_), QB_RANGE);                                             \
		assert_int_equal(b.len, 0);                                                                            \
	} while (0)
	REFUSED(n.slot = -1);
	REFUSED(n.station[0] = '\0');
	REFUSED(n.station[0] = 'T');
	REFUSED(n.number = 15);
	REFUSED(n.number = -1);
	REFUSED(n.samples = -1);
	REFUSED(n.peak_counts = -1);
	REFUSED(n.peak_counts = (double)NAN);
	REFUSED(n.peak_counts = (double)INFINITY);
	REFUSED(n.played_to_ns = n.played_from_ns - 1);
	REFUSED((n.state = PLAY_PLAYED, n.samples = 0));
	struct play_report r = a_report();
	struct qb_error e = {0};
	r.reason[0] = '\n';
	assert_int_equal(play_report_encode(&r, &b, &e), QB_RANGE);
	r = a_report();
	r.margin = (double)NAN;
	assert_int_equal(play_report_encode(&r, &b, &e), QB_RANGE);
	buf_free(&b);
}

/* Replaces the first `from` of a good document by `to` and expects a refusal. */
static void spoiled(bool report, const char *from, const char *to)
{
	struct buf b = {0};
	struct qb_error e = {0}, bad = {0};
	struct play_note n = a_note(), note;
	struct play_report r = a_report(), rep;
	assert_int_equal(report ? play_report_encode(&r, &b, &e) : play_note_encode(&n, &b, &e), QB_OK);
	char *at = strstr((char *)b.data, from);
	assert_non_null(at);
	char *text = text_printf("%.*s%s%s", (int)(at - (char *)b.data), (char *)b.data, to, at + strlen(from));
	enum qb_status st = report ? play_report_decode(text, strlen(text), &rep, &bad)
	                           : play_note_decode(text, strlen(text), &note, &bad);
	if (st != QB_FORMAT && st != QB_RANGE)
		fail_msg("accepted: %s", text);
	qb_free(text);
	buf_free(&b);
}

static void decoding_refuses(void **state)
{
	(void)state;
	spoiled(false, "\"slot\"", "\"slut\"");
	spoiled(false, "{", "{\"extra\":1,");
	spoiled(false, "{", "{\"slot\":999999,");
	spoiled(false, "999999,", "-1,");
	spoiled(false, "999999,", "9999999,");
	spoiled(false, "999999,", "\"7\",");
	spoiled(false, "999999,", "7.0,");
	spoiled(false, "tarn", "Tarn");
	spoiled(false, "tarn", "");
	spoiled(false, "playing", "resting");
	spoiled(false, "14", "15");
	spoiled(false, "1488888059.999999999", "1488888049");
	spoiled(false, "40960", "-40960");
	spoiled(false, "12345.6", "-12345.6");
	spoiled(false, "12345.6", "1e999");
	spoiled(true, "3.25", "-3.25");
	spoiled(true, "\"samples_hash\":\"00", "\"samples_hash\":\"0");
	spoiled(true, "\"samples_hash\":\"00", "\"samples_hash\":\"0G");
	spoiled(true, "heron-2027a", "heron\\n2027a");
	spoiled(true, "stopped by", "stopped\\u0000by");
	spoiled(true, "\"reason\":", "\"reasons\":");
	spoiled(true, "{", "[");
}

int main(void)
{
	const struct CMUnitTest tests[] = {cmocka_unit_test(note_round_trip), cmocka_unit_test(report_round_trip),
	                                   cmocka_unit_test(encoding_refuses), cmocka_unit_test(decoding_refuses)};
	return cmocka_run_group_tests_name("drill/report", tests, NULL, NULL);
}
