/* From a recipe to counts: the null's way is the live one's, limits refuse and never clip. */
#include "client/agent/drive.h"

#include <string.h>

#include "client/agent/cautions.h"
#include "tests/unit/client/agent_service.h"

static enum qb_status make(const struct drill_recipe *r, struct drive *out, struct qb_error *e)
{
	*e = (struct qb_error){0};
	return drive_make(r, &service->plan, 0, out, e);
}

static void null_has_the_live_ones_shape(void **state)
{
	(void)state;
	struct drive live, null;
	struct drill_recipe r;
	struct qb_error e;
	service_begin(1);
	assert_int_equal(make(&service->recipe[0], &live, &e), QB_OK);
	r = service->recipe[0];
	r.gain = 0;
	assert_int_equal(make(&r, &null, &e), QB_OK);
	assert_int_equal(live.n, null.n);
	assert_int_equal(live.at, null.at);
	assert_int_equal(live.from_ns, null.from_ns);
	assert_int_equal(live.to_ns, null.to_ns);
	assert_string_equal(live.calibration_id, null.calibration_id);
	assert_true(live.margin > 1 && null.margin == 0);
	double most = 0;
	for (size_t i = 0; i < live.n; i++) {
		most = fmax(most, fabs(live.counts[i]));
		assert_true(null.counts[i] == 0 && !signbit(null.counts[i]));
	}
	assert_true(most > 1);
	/* It begins and ends in silence: less than one count of the converter. */
	assert_true(fabs(live.counts[0]) < 1 && fabs(live.counts[live.n - 1]) < 1);
	drive_free(&live);
	assert_null(live.counts);
	drive_free(&null);
	service_end();
}

static void twice_the_strain_is_twice_the_counts(void **state)
{
	(void)state;
	struct drive a, b;
	struct drill_recipe r;
	struct qb_error e;
	service_begin(1);
	assert_int_equal(make(&service->recipe[0], &a, &e), QB_OK);
	service_recipe(service, 0, 1, 2e-22, &r);
	assert_int_equal(make(&r, &b, &e), QB_OK);
	assert_int_equal(a.n, b.n);
	for (size_t i = 0; i < a.n; i++)
		near_abs(b.counts[i], 2 * a.counts[i], 1e-9);
	near_rel(b.margin, a.margin / 2, 1e-9);
	drive_free(&a);
	drive_free(&b);
	service_end();
}

static void beyond_the_largest_drive(void **state)
{
	(void)state;
	struct drive d;
	struct qb_error e;
	service_begin(1);
	service->network.stations[0].actuator.slew_counts_per_s = 1e12; /* only the peak is to count */
	assert_int_equal(make(&service->recipe[0], &d, &e), QB_OK);
	double margin = d.margin;
	drive_free(&d);
	/* Just within, just beyond. */
	service->plan.largest_drive = 0.8 / margin * 1.001;
	assert_int_equal(make(&service->recipe[0], &d, &e), QB_OK);
	near_rel(d.margin, 1.001, 1e-6);
	drive_free(&d);
	service->plan.largest_drive = 0.8 / margin * 0.999;
	assert_int_equal(make(&service->recipe[0], &d, &e), QB_REFUSED);
	assert_non_null(strstr(e.what, "'peak'"));
	assert_null(d.counts);
	service->recipe[0].gain = 0;
	assert_int_equal(make(&service->recipe[0], &d, &e), QB_REFUSED);
	service_end();
}

static void within_an_excluded_band(void **state)
{
	(void)state;
	struct drive d;
	struct qb_error e;
	struct drill_recipe r;
	service_begin(1);
	service_recipe(service, 0, 1, 2e-21, &r); /* some counts of RMS */
	service->plan.n_excluded_bands = 1;
	service->plan.excluded_bands_hz[0][0] = 505;
	service->plan.excluded_bands_hz[0][1] = 515;
	assert_int_equal(make(&r, &d, &e), QB_OK);
	drive_free(&d);
	service->plan.excluded_bands_hz[0][0] = 145;
	service->plan.excluded_bands_hz[0][1] = 155;
	assert_int_equal(make(&r, &d, &e), QB_REFUSED);
	assert_non_null(strstr(e.what, "band"));
	service_end();
}

static void calibration(void **state)
{
	(void)state;
	struct drive d;
	struct qb_error e;
	service_begin(1);
	struct wave_actuator *a = &service->network.stations[0].actuator;
	a->valid_from_gps_ns = SERVICE_START;
	a->valid_to_gps_ns = SERVICE_START + SERVICE_SLOT;
	assert_int_equal(make(&service->recipe[0], &d, &e), QB_OK);
	drive_free(&d);
	a->valid_from_gps_ns = SERVICE_START + 1;
	assert_int_equal(make(&service->recipe[0], &d, &e), QB_REFUSED);
	a->present = false;
	assert_int_equal(make(&service->recipe[0], &d, &e), QB_REFUSED);
	service_end();
}

static void empty_window(void **state)
{
	(void)state;
	struct drive d;
	struct qb_error e;
	service_begin(1);
	service->recipe[0].drive_to_ns = service->recipe[0].drive_from_ns;
	assert_int_equal(make(&service->recipe[0], &d, &e), QB_RANGE);
	service_end();
}

static void says_cautions_and_limits(void **state)
{
	(void)state;
	struct buf text = {0};
	service_begin(1);
	service->plan.n_excluded_bands = 2;
	service->plan.excluded_bands_hz[0][0] = 495;
	service->plan.excluded_bands_hz[0][1] = 515;
	service->plan.excluded_bands_hz[1][0] = 995;
	service->plan.excluded_bands_hz[1][1] = 1030;
	cautions_text(&service->plan, 0, &text);
	const char *const parts[] = {"can break lock or damage hardware",
	                             "laser-safety authorities",
	                             "licensed staff prevail",
	                             "a working stop path",
	                             "largest drive 104858 counts",
	                             "slew 2e+07 counts/s",
	                             "Driven band 18 to 700 Hz",
	                             "Never driven: 495 to 515 Hz, 995 to 1030 Hz.",
	                             "Calibration tarn-2027a, valid from"};
	for (size_t i = 0; i < sizeof parts / sizeof parts[0]; i++) {
		if (strstr((const char *)text.data, parts[i]) == NULL)
			fail_msg("'%s' is not said", parts[i]);
	}
	buf_free(&text);
	service_end();
}

static const struct CMUnitTest tests[] = {
    cmocka_unit_test(null_has_the_live_ones_shape),
    cmocka_unit_test(twice_the_strain_is_twice_the_counts),
    cmocka_unit_test(beyond_the_largest_drive),
    cmocka_unit_test(within_an_excluded_band),
    cmocka_unit_test(calibration),
    cmocka_unit_test(empty_window),
    cmocka_unit_test(says_cautions_and_limits),
};

SCENE_MAIN(tests)
