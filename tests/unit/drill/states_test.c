/* Slot states from events: a table of what happened and what must come of it (audit A0, A14). */
#include <stdio.h>
#include <string.h>

#include "server/base/clock.h"
#include "server/drill/states.h"
#include "tests/near.h"

#define S(x)  ((int64_t)(x)*NS_PER_S)
#define START 1000
#define NEVER STATES_NEVER

/* Slot [1000, 1064) s, freeze at 984, drive 1020..1040 at each of three stations, two needed. */
struct scene {
	const char *name;
	bool live;
	bool ready[3];
	struct states_hold hold[2];
	struct states_stop stop[2];
	int n_holds, n_stops;
	const char *report[3]; /* "" none, else a state; "held+" means that samples had gone out */
	enum slot_state want;
	bool key;
	enum station_outcome station[3];
};

#define ALL_READY                                                                                                      \
	{                                                                                                              \
		true, true, true                                                                                       \
	}
#define PLAYED3                                                                                                        \
	{                                                                                                              \
		"played", "played", "played"                                                                           \
	}

static const struct scene scenes[] = {
    {.name = "all play, live", .live = true, .ready = ALL_READY, .report = PLAYED3, .want = SLOT_LIVE, .key = true},
    {.name = "all play, null", .ready = ALL_READY, .report = PLAYED3, .want = SLOT_NULL, .key = true},
    {.name = "one not ready, two play",
     .live = true,
     .ready = {true, false, true},
     .report = {"played", "", "played"},
     .want = SLOT_LIVE,
     .key = true,
     .station = {STATION_PLAYED, STATION_NOT_READY, STATION_PLAYED}},
    {.name = "two not ready",
     .live = true,
     .ready = {true, false, false},
     .report = {"", "", ""},
     .want = SLOT_SKIPPED,
     .station = {STATION_TOO_FEW, STATION_NOT_READY, STATION_NOT_READY}},
    {.name = "two not ready, null",
     .ready = {true, false, false},
     .report = {"", "", ""},
     .want = SLOT_SKIPPED,
     .station = {STATION_TOO_FEW, STATION_NOT_READY, STATION_NOT_READY}},
    {.name = "one held beforehand, two play",
     .live = true,
     .ready = ALL_READY,
     .hold = {{0, S(900), S(1100), S(950), NEVER}},
     .n_holds = 1,
     .report = {"", "played", "played"},
     .want = SLOT_LIVE,
     .key = true,
     .station = {STATION_HELD, STATION_PLAYED, STATION_PLAYED}},
    {.name = "two held beforehand",
     .live = true,
     .ready = ALL_READY,
     .hold = {{0, S(900), S(1100), S(950), NEVER}, {2, S(1063), S(1064), S(951), NEVER}},
     .n_holds = 2,
     .report = {"", "", ""},
     .want = SLOT_VETOED,
     .station = {STATION_HELD, STATION_TOO_FEW, STATION_HELD}},
    {.name = "all held beforehand, null",
     .ready = ALL_READY,
     .hold = {{STATES_ALL, S(1000), S(1001), S(984), NEVER}},
     .n_holds = 1,
     .report = {"", "", ""},
     .want = SLOT_VETOED,
     .station = {STATION_HELD, STATION_HELD, STATION_HELD}},
    {.name = "hold ends when the slot starts",
     .live = true,
     .ready = ALL_READY,
     .hold = {{STATES_ALL, S(900), S(1000), S(950), NEVER}},
     .n_holds = 1,
     .report = PLAYED3,
     .want = SLOT_LIVE,
     .key = true},
    {.name = "hold starts when the slot ends",
     .live = true,
     .ready = ALL_READY,
     .hold = {{STATES_ALL, S(1064), S(1100), S(950), NEVER}},
     .n_holds = 1,
     .report = PLAYED3,
     .want = SLOT_LIVE,
     .key = true},
    {.name = "hold lifted before the freeze",
     .live = true,
     .ready = ALL_READY,
     .hold = {{STATES_ALL, S(900), S(1100), S(950), S(983)}},
     .n_holds = 1,
     .report = PLAYED3,
     .want = SLOT_LIVE,
     .key = true},
    {.name = "hold lifted after the freeze",
     .live = true,
     .ready = ALL_READY,
     .hold = {{STATES_ALL, S(900), S(1100), S(950), S(985)}},
     .n_holds = 1,
     .report = {"", "", ""},
     .want = SLOT_VETOED,
     .station = {STATION_HELD, STATION_HELD, STATION_HELD}},
    {.name = "held and not ready: too few anyway",
     .live = true,
     .ready = {true, false, false},
     .hold = {{0, S(900), S(1100), S(950), NEVER}},
     .n_holds = 1,
     .report = {"", "", ""},
     .want = SLOT_SKIPPED,
     .station = {STATION_HELD, STATION_NOT_READY, STATION_NOT_READY}},
    {.name = "all held after the freeze, before the drive",
     .live = true,
     .ready = ALL_READY,
     .hold = {{STATES_ALL, S(1000), S(1100), S(1010), NEVER}},
     .n_holds = 1,
     .report = {"held", "held", "held"},
     .want = SLOT_VETOED,
     .key = true,
     .station = {STATION_VETOED, STATION_VETOED, STATION_VETOED}},
    {.name = "the same without reports",
     .live = true,
     .ready = ALL_READY,
     .hold = {{STATES_ALL, S(1000), S(1100), S(1010), NEVER}},
     .n_holds = 1,
     .report = {"", "", ""},
     .want = SLOT_VETOED,
     .key = true,
     .station = {STATION_VETOED, STATION_VETOED, STATION_VETOED}},
    {.name = "stopped in the middle",
     .live = true,
     .ready = ALL_READY,
     .stop = {{STATES_ALL, S(1030), NEVER}},
     .n_stops = 1,
     .report = {"stopped+", "stopped+", "stopped+"},
     .want = SLOT_ABORTED,
     .key = true,
     .station = {STATION_ABORTED, STATION_ABORTED, STATION_ABORTED}},
    {.name = "stopped in the middle, no reports",
     .live = true,
     .ready = ALL_READY,
     .stop = {{STATES_ALL, S(1030), NEVER}},
     .n_stops = 1,
     .report = {"", "", ""},
     .want = SLOT_ABORTED,
     .key = true,
     .station = {STATION_ABORTED, STATION_ABORTED, STATION_ABORTED}},
    {.name = "a null stopped in the middle drove nothing",
     .ready = ALL_READY,
     .stop = {{STATES_ALL, S(1030), NEVER}},
     .n_stops = 1,
     .report = {"stopped+", "stopped+", "stopped+"},
     .want = SLOT_VETOED,
     .key = true,
     .station = {STATION_ABORTED, STATION_ABORTED, STATION_ABORTED}},
    {.name = "stopped after the drive",
     .live = true,
     .ready = ALL_READY,
     .stop = {{STATES_ALL, S(1050), NEVER}},
     .n_stops = 1,
     .report = PLAYED3,
     .want = SLOT_LIVE,
     .key = true},
    {.name = "one stopped early, two play on",
     .live = true,
     .ready = ALL_READY,
     .stop = {{1, S(1005), NEVER}},
     .n_stops = 1,
     .report = {"played", "stopped", "played"},
     .want = SLOT_LIVE,
     .key = true,
     .station = {STATION_PLAYED, STATION_VETOED, STATION_PLAYED}},
    {.name = "two cut short, one plays: not a drill as planned",
     .live = true,
     .ready = ALL_READY,
     .stop = {{0, S(1030), NEVER}, {1, S(1030), NEVER}},
     .n_stops = 2,
     .report = {"stopped+", "stopped+", "played"},
     .want = SLOT_ABORTED,
     .key = true,
     .station = {STATION_ABORTED, STATION_ABORTED, STATION_PLAYED}},
    {.name = "two never begun, one plays",
     .live = true,
     .ready = ALL_READY,
     .report = {"failed", "failed", "played"},
     .want = SLOT_ABORTED,
     .key = true,
     .station = {STATION_SKIPPED, STATION_SKIPPED, STATION_PLAYED}},
    {.name = "standing stop before the freeze",
     .live = true,
     .ready = ALL_READY,
     .stop = {{STATES_ALL, S(10), NEVER}},
     .n_stops = 1,
     .report = {"", "", ""},
     .want = SLOT_VETOED,
     .station = {STATION_HELD, STATION_HELD, STATION_HELD}},
    {.name = "stop lifted in time",
     .live = true,
     .ready = ALL_READY,
     .stop = {{STATES_ALL, S(10), S(500)}},
     .n_stops = 1,
     .report = PLAYED3,
     .want = SLOT_LIVE,
     .key = true},
    {.name = "drivers failed before the drive",
     .live = true,
     .ready = ALL_READY,
     .report = {"failed", "skipped", "failed"},
     .want = SLOT_SKIPPED,
     .key = true,
     .station = {STATION_SKIPPED, STATION_SKIPPED, STATION_SKIPPED}},
    {.name = "drivers failed in the drive",
     .live = true,
     .ready = ALL_READY,
     .report = {"failed+", "failed+", "failed"},
     .want = SLOT_ABORTED,
     .key = true,
     .station = {STATION_ABORTED, STATION_ABORTED, STATION_SKIPPED}},
    {.name = "no report at all: energy can't be ruled out",
     .live = true,
     .ready = ALL_READY,
     .report = {"", "", ""},
     .want = SLOT_FAILED_DELIVERY,
     .key = true,
     .station = {STATION_UNREPORTED, STATION_UNREPORTED, STATION_UNREPORTED}},
    {.name = "no report of a null",
     .ready = ALL_READY,
     .report = {"", "", ""},
     .want = SLOT_SKIPPED,
     .key = true,
     .station = {STATION_UNREPORTED, STATION_UNREPORTED, STATION_UNREPORTED}},
    {.name = "late hold for a later stretch",
     .live = true,
     .ready = ALL_READY,
     .hold = {{STATES_ALL, S(1050), S(1100), S(1010), NEVER}},
     .n_holds = 1,
     .report = PLAYED3,
     .want = SLOT_LIVE,
     .key = true},
};

static struct play_report make_report(const char *word)
{
	struct play_report r = {.slot = 1, .station = "tarn"};
	bool begun = word[strlen(word) - 1] == '+';
	for (int s = 0; s < PLAY_STATES; s++) {
		if (strncmp(word, play_state_word((enum play_state)s), strlen(word) - begun) == 0)
			r.state = (enum play_state)s;
	}
	begun = begun || r.state == PLAY_PLAYED;
	r.played_from_ns = S(1020);
	r.played_to_ns = begun ? S(1030) : S(1020);
	r.samples = begun ? 40960 : 0;
	return r;
}

static void table(void **state)
{
	(void)state;
	for (size_t i = 0; i < sizeof scenes / sizeof scenes[0]; i++) {
		const struct scene *c = &scenes[i];
		struct play_report reports[3];
		struct states_verdict v;
		struct states_slot slot = {.start_ns = S(START),
		                           .end_ns = S(START + 64),
		                           .freeze_ns = S(START - 16),
		                           .live = c->live,
		                           .n_stations = 3,
		                           .stations_needed = 2};
		for (int j = 0; j < 3; j++) {
			slot.station[j] = (struct states_station){
			    .ready = c->ready[j], .drive_from_ns = S(1020), .drive_to_ns = S(1040)};
			if (c->report[j][0] != '\0') {
				reports[j] = make_report(c->report[j]);
				slot.station[j].report = &reports[j];
			}
		}
		states_judge(&slot, c->hold, (size_t)c->n_holds, c->stop, (size_t)c->n_stops, &v);
		if (v.state != c->want || v.key_released != c->key)
			fail_msg("%s: state %s (key %d), expected %s (key %d)", c->name, slot_state_word(v.state),
			         v.key_released, slot_state_word(c->want), c->key);
		for (int j = 0; j < 3; j++) {
			if (v.station[j] != c->station[j])
				fail_msg("%s: station %d %s, expected %s", c->name, j,
				         station_outcome_word(v.station[j]), station_outcome_word(c->station[j]));
		}
	}
}

/* What the service decides at the freeze must not depend on live or null, drive windows, or anything later. */
static void freeze_knows_nothing_sealed(void **state)
{
	(void)state;
	struct states_hold holds[2] = {{1, S(1000), S(1064), S(900), NEVER}, {0, S(1000), S(1064), S(985), NEVER}};
	struct states_stop stop = {2, S(990), NEVER};
	bool going[2][STATES_MAX_STATIONS];
	for (int live = 0; live < 2; live++) {
		struct states_slot slot = {.start_ns = S(1000),
		                           .end_ns = S(1064),
		                           .freeze_ns = S(984),
		                           .live = live == 1,
		                           .n_stations = 3,
		                           .stations_needed = 2};
		for (int j = 0; j < 3; j++)
			slot.station[j] = (struct states_station){.ready = true, .drive_from_ns = S(1000 + 20 * live)};
		assert_true(states_freeze(&slot, holds, 2, &stop, 1, going[live]));
	}
	assert_memory_equal(going[0], going[1], sizeof going[0]);
	assert_true(going[0][0] && !going[0][1] && going[0][2]);
}

static void words(void **state)
{
	(void)state;
	enum slot_state s;
	for (int i = 0; i < SLOT_STATES; i++) {
		assert_true(slot_state_parse(slot_state_word((enum slot_state)i), &s));
		assert_int_equal(s, i);
	}
	assert_false(slot_state_parse("Live", &s));
	assert_false(slot_state_parse("", &s));
}

int main(void)
{
	const struct CMUnitTest tests[] = {cmocka_unit_test(table), cmocka_unit_test(freeze_knows_nothing_sealed),
	                                   cmocka_unit_test(words)};
	return cmocka_run_group_tests_name("drill/states", tests, NULL, NULL);
}
