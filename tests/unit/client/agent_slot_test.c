/* A whole slot against a small service: what is played, noted, reported and erased, and that a null looks alike. */
#include "client/agent/slot.h"

#include <string.h>

#include "client/agent/fetch.h"
#include "client/agent/watch.h"
#include "tests/unit/client/agent_service.h"

/* Slot 0's samples as the sink has them; NULL when there is no file. */
static double *samples(void)
{
	char *path = text_printf("%s/slot-000000.npy", service->dir);
	struct buf b = {0};
	struct qb_error e = {0};
	double *out = NULL;
	if (access(path, F_OK) == 0) {
		assert_int_equal(file_read(path, 1 << 24, &b, &e), QB_OK);
		assert_int_equal(b.len, 128 + 8 * SERVICE_N);
		out = QB_NEW_ARRAY(double, SERVICE_N);
		memcpy(out, b.data + 128, 8 * SERVICE_N);
		buf_free(&b);
	}
	qb_free(path);
	return out;
}

static void run(int64_t slot)
{
	struct qb_error e = {0};
	bool filed = false;
	assert_int_equal(fetch_ahead(&service->driver, slot, &e), QB_OK);
	assert_int_equal(slot_run(&service->driver, slot, &filed, &e), QB_OK);
	assert_true(filed);
	assert_int_equal(service->n_reports, 1);
	assert_int_equal(service->n_notes, 2); /* at the start and at the end */
	assert_int_equal(service->report.slot, slot);
	assert_string_equal(service->report.station, "tarn");
}

static double peak(const double *x, int64_t from, int64_t to)
{
	double most = 0;
	for (int64_t i = from; i < to; i++)
		most = fmax(most, fabs(x[i]));
	return most;
}

static int64_t sample_of(double seconds)
{
	return (int64_t)llround(seconds * SERVICE_RATE);
}

static void assert_key_erased(int64_t slot)
{
	struct secret *scalar = NULL;
	assert_int_equal(prekeys_take(service->driver.prekeys, slot, &service->driver.home.key, &scalar, NULL),
	                 QB_NOT_FOUND);
}

/* Whoever has the lease plays: the other host leaves the slot, files nothing, and keeps no key of it. */
static void a_slot_of_the_other_host_is_left(void **state)
{
	(void)state;
	struct qb_error e = {0};
	bool filed = true;
	service_begin(1);
	service->host = "spare";
	assert_int_equal(fetch_ahead(&service->driver, 0, &e), QB_OK);
	assert_int_equal(slot_run(&service->driver, 0, &filed, &e), QB_OK);
	assert_false(filed);
	assert_int_equal(service->n_reports, 0);
	assert_int_equal(service->n_notes, 0);
	assert_key_erased(0);
	service_end();
	service_begin(1);
	service->host = "main";
	run(0);
	assert_int_equal(service->report.state, PLAY_PLAYED);
	service_end();
}

static void live_is_played_and_reported(void **state)
{
	(void)state;
	service_begin(1);
	run(0);
	const struct play_report *r = &service->report;
	const struct drill_recipe *recipe = &service->recipe[0];
	double *x = samples();
	uint8_t hash[64];
	assert_int_equal(r->state, PLAY_PLAYED);
	assert_string_equal(r->reason, "");
	assert_string_equal(r->calibration_id, "tarn-2027a");
	assert_true(r->margin > 1);
	near_abs((double)(r->played_from_ns - recipe->drive_from_ns) / 1e9, 0, 1 / SERVICE_RATE);
	near_abs((double)(r->played_to_ns - recipe->drive_to_ns) / 1e9, 0, 1 / SERVICE_RATE);
	int64_t from = sample_of((double)(r->played_from_ns - SERVICE_START) / 1e9), to = from + r->samples;
	assert_int_equal(to, sample_of((double)(r->played_to_ns - SERVICE_START) / 1e9));
	assert_true(peak(x, 0, from) == 0 && peak(x, to, SERVICE_N) == 0);
	assert_true(peak(x, from, to) == r->peak_counts && r->peak_counts > 0);
	blake2b_512(hash, x + from, (size_t)r->samples * sizeof *x);
	assert_memory_equal(hash, r->samples_hash, 64);
	assert_int_equal(service->note[0].number, 0);
	assert_int_equal(service->note[0].at_gps_ns, SERVICE_START);
	assert_int_equal(service->note[0].state, PLAY_WAITING);
	assert_int_equal(service->note_bytes, record_size(RECORD_PLAY_NOTE));
	assert_int_equal(service->report_bytes, record_size(RECORD_PLAY_REPORT));
	assert_key_erased(0);
	qb_free(x);
	service_end();
}

/* What goes out is what rendering gives, sample for sample. */
static void counts_are_the_rendered_ones(void **state)
{
	(void)state;
	service_begin(1);
	run(0);
	double *x = samples(), *want = QB_NEW_ARRAY(double, (size_t)service->report.samples);
	const struct drill_recipe *recipe = &service->recipe[0];
	assert_int_equal(render_drive(&service->network.stations[0], &recipe->source, SERVICE_RATE,
	                              recipe->drive_from_ns, (size_t)service->report.samples, want, NULL),
	                 QB_OK);
	int64_t from = sample_of((double)(service->report.played_from_ns - SERVICE_START) / 1e9);
	for (int64_t i = 0; i < service->report.samples; i++)
		assert_true(x[from + i] == want[i]);
	qb_free(x);
	qb_free(want);
	service_end();
}

static void null_asks_and_writes_alike(void **state)
{
	(void)state;
	service_begin(1);
	run(0);
	struct buf asked = service->asked;
	service->asked = (struct buf){0};
	int64_t count = service->report.samples;
	service_end();
	service_begin(0);
	run(0);
	double *x = samples();
	assert_int_equal(asked.len, service->asked.len);
	assert_memory_equal(asked.data, service->asked.data, asked.len);
	assert_int_equal(service->report.state, PLAY_PLAYED);
	assert_int_equal(service->report.samples, count);
	assert_true(service->report.peak_counts == 0 && service->report.margin == 0);
	for (int64_t i = 0; i < SERVICE_N; i++)
		assert_true(x[i] == 0 && !signbit(x[i]));
	assert_key_erased(0);
	qb_free(x);
	buf_free(&asked);
	service_end();
}

static void stop_silences(void **state)
{
	(void)state;
	service_begin(1);
	int64_t stop = SERVICE_START + 8 * NS_PER_S + NS_PER_S / 8;
	service->step[3] = stop;
	service->stopped_from_ns = stop;
	run(0);
	double *x = samples();
	int64_t at = sample_of(8.125), ramp = sample_of(0.25);
	assert_int_equal(service->report.state, PLAY_STOPPED);
	assert_string_equal(service->report.reason, "stopped");
	assert_true(peak(x, 0, at) > 0);
	assert_true(peak(x, at + ramp, SERVICE_N) == 0);
	assert_int_equal(service->report.played_to_ns, stop + NS_PER_S / 4);
	assert_key_erased(0);
	qb_free(x);
	service_end();
}

/* A hold that comes while the clock jumps past the whole drive still keeps it from being played. */
static void hold_between_two_looks(void **state)
{
	(void)state;
	service_begin(1);
	service->step[3] = SERVICE_START + 2 * NS_PER_S;
	service->held_from_ns = SERVICE_START + 3 * NS_PER_S;
	run(0);
	double *x = samples();
	assert_int_equal(service->report.state, PLAY_HELD);
	assert_int_equal(service->report.samples, 0);
	assert_true(peak(x, 0, SERVICE_N) == 0);
	qb_free(x);
	service_end();
}

static void not_going(void **state)
{
	(void)state;
	for (int why = 0; why < 3; why++) {
		const enum play_state want[] = {PLAY_SKIPPED, PLAY_HELD, PLAY_STOPPED};
		service_begin(1);
		service->not_going = true;
		service->held_from_ns = why == 1 ? 0 : STATES_NEVER;
		service->stopped_from_ns = why == 2 ? 0 : STATES_NEVER;
		run(0);
		double *x = samples();
		assert_int_equal(service->report.state, want[why]);
		assert_int_equal(service->report.samples, 0);
		assert_int_equal(service->n_keys, 0);
		assert_int_equal(service->note_bytes, record_size(RECORD_PLAY_NOTE));
		assert_true(peak(x, 0, SERVICE_N) == 0);
		assert_key_erased(0);
		qb_free(x);
		service_end();
	}
}

/* Held after the freeze and before the start: the key is not even asked for. */
static void held_after_the_freeze(void **state)
{
	(void)state;
	service_begin(1);
	service->held_from_ns = SERVICE_START - SERVICE_LEAD;
	run(0);
	assert_int_equal(service->report.state, PLAY_HELD);
	assert_int_equal(service->n_keys, 0);
	service_end();
}

static void assert_failed(const char *reason_part)
{
	double *x = samples();
	assert_int_equal(service->report.state, PLAY_FAILED);
	assert_int_equal(service->report.samples, 0);
	if (strstr(service->report.reason, reason_part) == NULL)
		fail_msg("the reason is '%s'", service->report.reason);
	assert_true(peak(x, 0, SERVICE_N) == 0);
	qb_free(x);
}

/* The service gives another key than the committed one: a null could be turned into a live that way. */
static void swapped_key(void **state)
{
	(void)state;
	service_begin(1);
	memcpy(service->slot_key[0], service->slot_key[1], SLOT_KEY_BYTES);
	run(0);
	assert_failed("not the one committed to in the ledger");
	service_end();
}

static void recipe_of_another_slot_station_campaign(void **state)
{
	(void)state;
	for (int what = 0; what < 4; what++) {
		const char *const reasons[] = {"another slot's", "another station's", "another campaign's",
		                               "another rate"};
		service_begin(1);
		struct drill_recipe r = service->recipe[0];
		if (what == 0)
			r = service->recipe[1];
		if (what == 1)
			snprintf(r.station, sizeof r.station, "heron");
		if (what == 2)
			r.campaign[0] ^= 1;
		if (what == 3)
			r.rate_hz *= 2;
		service_wrap(service, 0, &r);
		run(0);
		assert_failed(reasons[what]);
		service_end();
	}
}

static void beyond_a_limit(void **state)
{
	(void)state;
	for (int gain = 0; gain <= 1; gain++) {
		service_begin(gain);
		struct drill_recipe r;
		service_recipe(service, 0, gain, 1e-15, &r);
		service_wrap(service, 0, &r);
		run(0);
		assert_failed("beyond the limit 'peak'");
		assert_key_erased(0);
		service_end();
	}
}

static void calibration_out_of_date(void **state)
{
	(void)state;
	service_begin(1);
	service->network.stations[0].actuator.valid_to_gps_ns = SERVICE_START + SERVICE_SLOT - 1;
	run(0);
	assert_failed("calibration is not valid");
	service_end();
}

static void over_before_it_was_looked_at(void **state)
{
	(void)state;
	service_begin(1);
	service->step[0] = SERVICE_START + SERVICE_SLOT;
	service->n_steps = 1;
	run(0);
	assert_int_equal(service->report.state, PLAY_SKIPPED);
	assert_null(samples());
	assert_key_erased(0);
	service_end();
}

/* After a restart the notes that were filed before are not filed again, and the slot is played if it still can be. */
static void restarted_in_the_slot(void **state)
{
	(void)state;
	service_begin(1);
	service->step[0] = SERVICE_START + NS_PER_S;
	service->step[1] = SERVICE_START + SERVICE_SLOT;
	service->n_steps = 2;
	service->n_notes = 1;
	run(0);
	assert_int_equal(service->report.state, PLAY_PLAYED);
	service_end();
}

static void lost_answers(void **state)
{
	(void)state;
	service_begin(1);
	service->lose_answers = 2;
	run(0);
	assert_int_equal(service->report.state, PLAY_PLAYED);
	service_end();
}

static void system_clock(void **state)
{
	(void)state;
	service_begin_system(1);
	run(0);
	assert_int_equal(service->report.state, PLAY_PLAYED);
	service_end();
}

/* A short silence of the service is bridged with what the driver has; the note that was due waits and goes out. */
static void short_loss_of_contact(void **state)
{
	(void)state;
	service_begin_system(30);
	service->silent_from_ns = SERVICE_START - NS_PER_S;
	service->silent_to_ns = SERVICE_START + 17 * NS_PER_S;
	run(0);
	double *x = samples();
	assert_int_equal(service->report.state, PLAY_PLAYED);
	assert_int_equal(service->note[0].at_gps_ns, SERVICE_START);
	assert_int_equal(service->note[0].state, PLAY_WAITING);
	assert_true(peak(x, sample_of(7), sample_of(9)) > 0);
	qb_free(x);
	service_end();
}

static void long_loss_of_contact(void **state)
{
	(void)state;
	service_begin_system(1.7);
	service->silent_from_ns = SERVICE_START + 6 * NS_PER_S;
	service->silent_to_ns = SERVICE_START + 17 * NS_PER_S;
	run(0);
	double *x = samples();
	assert_int_equal(service->report.state, PLAY_FAILED);
	assert_string_equal(service->report.reason, "no contact with the service");
	double ended = (double)(service->report.played_to_ns - SERVICE_START) / 1e9;
	assert_true(ended > 7 && ended < 9);
	assert_true(peak(x, sample_of(7), sample_of(ended)) > 0);
	assert_true(peak(x, sample_of(ended), SERVICE_N) == 0);
	qb_free(x);
	service_end();
}

/* With the system's clock a slot is not played from somewhere after its start. */
static void too_late(void **state)
{
	(void)state;
	service_begin_system(30);
	service->step[0] = SERVICE_START + 2 * NS_PER_S;
	run(0);
	assert_int_equal(service->report.state, PLAY_SKIPPED);
	assert_int_equal(service->report.samples, 0);
	assert_int_equal(service->n_keys, 0);
	assert_null(samples());
	service_end();
}

static void write_state(const char *word)
{
	char *path = text_printf("%s/state", service->dir);
	assert_int_equal(file_write(path, 0600, word, strlen(word), NULL), QB_OK);
	qb_free(path);
}

static void station_not_observing(void **state)
{
	(void)state;
	service_begin(1);
	char *path = text_printf("%s/state", service->dir);
	service->driver.opt.state_file = path;
	assert_false(watch_observing(path));
	write_state("not-observing\n");
	assert_false(watch_observing(path));
	assert_int_equal(fetch_ahead(&service->driver, 0, NULL), QB_OK);
	assert_int_equal(service->driver.ready_to, 0);
	write_state("observing\n");
	assert_true(watch_observing(path));
	assert_int_equal(fetch_ahead(&service->driver, 0, NULL), QB_OK);
	assert_int_equal(service->driver.ready_to, SERVICE_SLOTS);
	write_state("not-observing");
	run(0);
	assert_failed("not observing");
	service->driver.opt.state_file = NULL;
	qb_free(path);
	service_end();
}

static void slot_answers_are_read_strictly(void **state)
{
	(void)state;
	const char *const good =
	    "{\"slot\":3,\"ended\":true,\"stations\":{\"tarn\":{\"held\":false,\"stopped\":true,\"stopped_gps\":"
	    "\"12.5\",\"going\":null,\"host\":null,\"reported\":false,\"notes\":2}}}";
	const char *const bad[] = {
	    "{\"slot\":4,\"ended\":false,\"stations\":{\"tarn\":{\"held\":false,\"stopped\":false,\"going\":null,"
	    "\"host\":null,"
	    "\"reported\":false,"
	    "\"notes\":2}}}",
	    "{\"slot\":3,\"ended\":true,\"stations\":{\"heron\":{}}}",
	    "{\"slot\":3,\"ended\":true,\"stations\":{\"tarn\":{\"stopped\":false,\"going\":null,\"host\":null,"
	    "\"reported\":false,"
	    "\"notes\":2}}}",
	    "{\"slot\":3,\"ended\":true,\"stations\":{\"tarn\":{\"held\":\"no\",\"stopped\":false,\"going\":null,"
	    "\"host\":null,"
	    "\"reported\":false,"
	    "\"notes\":2}}}",
	    "{\"slot\":3,\"ended\":true,\"stations\":{\"tarn\":{\"held\":false,\"stopped\":true,\"going\":null,"
	    "\"host\":null,"
	    "\"reported\":false,"
	    "\"notes\":2}}}",
	    "{\"slot\":3,\"ended\":true,\"stations\":{\"tarn\":{\"held\":false,\"stopped\":false,\"going\":1,\"host\":"
	    "null,"
	    "\"reported\":false,"
	    "\"notes\":2}}}",
	    "{\"slot\":3,\"ended\":true,\"stations\":{\"tarn\":{\"held\":false,\"stopped\":false,\"going\":true,"
	    "\"host\":\"main\","
	    "\"reported\":false,"
	    "\"notes\":16}}}",
	    "{\"slot\":3,\"stations\":{\"tarn\":{\"held\":false,\"stopped\":false,\"going\":null,\"host\":null,"
	    "\"reported\":false,"
	    "\"notes\":2}}}",
	    "{\"slot\":3,\"ended\":true,\"stations\":{\"tarn\":{\"held\":false,\"stopped\":false,\"going\":null,"
	    "\"host\":\"third\",\"reported\":false,\"notes\":2}}}",
	    "[]"};
	struct watch_slot w;
	struct qb_error e = {0};
	json_t *doc = json_loads(good, 0, NULL);
	assert_int_equal(watch_slot_parse(doc, 3, "tarn", &w, &e), QB_OK);
	assert_true(w.ended && watch_ended(&w) && w.stopped && !w.held && !w.reported && w.going == GOING_UNKNOWN &&
	            w.notes == 2);
	assert_int_equal(w.stopped_gps_ns, INT64_C(12500000000));
	json_decref(doc);
	for (size_t i = 0; i < sizeof bad / sizeof bad[0]; i++) {
		e = (struct qb_error){0};
		doc = json_loads(bad[i], 0, NULL);
		assert_int_not_equal(watch_slot_parse(doc, 3, "tarn", &w, &e), QB_OK);
		assert_true(e.what[0] != '\0');
		json_decref(doc);
	}
}

/* The campaign ends while the driver waits for the slot: it leaves, files nothing, asks for no key. */
static void ended_before_the_freeze(void **state)
{
	(void)state;
	bool filed;
	struct qb_error e = {0};
	service_begin(1);
	service->ended = true;
	assert_int_equal(slot_run(&service->driver, 0, &filed, &e), QB_OK);
	assert_false(filed);
	assert_int_equal(service->n_keys, 0);
	assert_int_equal(service->n_notes, 0);
	assert_int_equal(service->n_reports, 0);
	service_end();
}

static const struct CMUnitTest tests[] = {
    cmocka_unit_test(live_is_played_and_reported),
    cmocka_unit_test(a_slot_of_the_other_host_is_left),
    cmocka_unit_test(counts_are_the_rendered_ones),
    cmocka_unit_test(null_asks_and_writes_alike),
    cmocka_unit_test(stop_silences),
    cmocka_unit_test(hold_between_two_looks),
    cmocka_unit_test(not_going),
    cmocka_unit_test(held_after_the_freeze),
    cmocka_unit_test(swapped_key),
    cmocka_unit_test(recipe_of_another_slot_station_campaign),
    cmocka_unit_test(beyond_a_limit),
    cmocka_unit_test(calibration_out_of_date),
    cmocka_unit_test(over_before_it_was_looked_at),
    cmocka_unit_test(restarted_in_the_slot),
    cmocka_unit_test(lost_answers),
    cmocka_unit_test(system_clock),
    cmocka_unit_test(short_loss_of_contact),
    cmocka_unit_test(long_loss_of_contact),
    cmocka_unit_test(too_late),
    cmocka_unit_test(station_not_observing),
    cmocka_unit_test(slot_answers_are_read_strictly),
    cmocka_unit_test(ended_before_the_freeze),
};

SCENE_MAIN(tests)
