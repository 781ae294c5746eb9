/* The file of one-time keys: it survives a restart, an erased key is gone from the disk, nobody else can use it. */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#include "client/agent/prekeys.h"
#include "server/base/alloc.h"
#include "tests/near.h"

#define COUNT 5

static char dir[64], path[96];
static struct party_key me;

static int fresh(void **state)
{
	(void)state;
	struct qb_error e = {0};
	snprintf(dir, sizeof dir, "/tmp/agent-prekeys-XXXXXX");
	if (secret_setup(&e) != QB_OK || mkdtemp(dir) == NULL)
		return -1;
	snprintf(path, sizeof path, "%s/prekeys", dir);
	party_key_new(&me);
	return 0;
}

static int drop(void **state)
{
	(void)state;
	party_key_free(&me);
	unlink(path);
	return rmdir(dir);
}

static struct prekeys_for about(void)
{
	struct prekeys_for what = {.station = "tarn", .place = RECIPE_MAIN, .count = COUNT};
	memset(what.campaign, 0x42, sizeof what.campaign);
	return what;
}

static struct prekeys *make(void)
{
	struct prekeys_for what = about();
	struct prekeys *p = NULL;
	struct qb_error e = {0};
	assert_int_equal(prekeys_create(path, &what, &me, &e), QB_OK);
	assert_int_equal(prekeys_open(path, &what, &p, &e), QB_OK);
	return p;
}

static void survives_a_restart(void **state)
{
	(void)state;
	struct prekeys_for what = about();
	struct prekeys *p = make();
	struct qb_error e = {0};
	struct buf points = {0}, again = {0};
	assert_int_equal(prekeys_points(p, &points, &e), QB_OK);
	assert_int_equal(points.len, COUNT * POINT_BYTES);
	prekeys_close(&p);
	assert_null(p);
	assert_int_equal(prekeys_open(path, &what, &p, &e), QB_OK);
	assert_int_equal(prekeys_points(p, &again, &e), QB_OK);
	assert_memory_equal(points.data, again.data, points.len);
	for (int64_t i = 0; i < COUNT; i++) {
		struct secret *scalar = NULL;
		uint8_t point[POINT_BYTES];
		assert_int_equal(prekeys_take(p, i, &me, &scalar, &e), QB_OK);
		assert_true(group_mul_base(point, secret_view(scalar)));
		assert_memory_equal(point, points.data + i * POINT_BYTES, POINT_BYTES);
		for (int64_t j = 0; j < i; j++)
			assert_memory_not_equal(point, points.data + j * POINT_BYTES, POINT_BYTES);
		secret_free(&scalar);
	}
	prekeys_close(&p);
	buf_free(&points);
	buf_free(&again);
}

static void is_private_and_never_made_twice(void **state)
{
	(void)state;
	struct prekeys_for what = about();
	struct prekeys *p = make();
	struct qb_error e = {0};
	struct stat info;
	assert_int_equal(stat(path, &info), 0);
	assert_int_equal(info.st_mode & 07777, 0600);
	assert_int_equal(info.st_size, 128 + COUNT * (32 + 88));
	prekeys_close(&p);
	assert_int_equal(prekeys_create(path, &what, &me, &e), QB_CONFLICT);
	assert_int_equal(chmod(path, 0640), 0);
	e = (struct qb_error){0};
	assert_int_equal(prekeys_open(path, &what, &p, &e), QB_REFUSED);
	assert_null(p);
}

/* The bytes of the box are looked for in the file itself: none of them may be left. */
static void erasing_overwrites(void **state)
{
	(void)state;
	struct prekeys_for what = about();
	struct prekeys *p = make();
	struct qb_error e = {0};
	struct buf before = {0}, after = {0};
	struct secret *scalar = NULL;
	size_t at = 128 + COUNT * 32 + 2 * 88;
	assert_int_equal(file_read(path, 1 << 16, &before, &e), QB_OK);
	assert_int_equal(prekeys_erase(p, 2, &e), QB_OK);
	assert_int_equal(file_read(path, 1 << 16, &after, &e), QB_OK);
	assert_int_equal(before.len, after.len);
	for (size_t i = 0; i < after.len; i++) {
		if (i >= at && i < at + 88)
			assert_int_equal(after.data[i], 0);
		else
			assert_int_equal(after.data[i], before.data[i]);
	}
	for (size_t i = 0; i + 16 <= after.len; i++)
		assert_memory_not_equal(after.data + i, before.data + at + 8, 16);
	assert_int_equal(prekeys_take(p, 2, &me, &scalar, &e), QB_NOT_FOUND);
	prekeys_close(&p);
	e = (struct qb_error){0};
	assert_int_equal(prekeys_open(path, &what, &p, &e), QB_OK);
	assert_int_equal(prekeys_take(p, 2, &me, &scalar, &e), QB_NOT_FOUND);
	assert_null(scalar);
	assert_int_equal(prekeys_erase(p, 2, &e), QB_OK);
	e = (struct qb_error){0};
	assert_int_equal(prekeys_take(p, 1, &me, &scalar, &e), QB_OK);
	secret_free(&scalar);
	prekeys_close(&p);
	buf_free(&before);
	buf_free(&after);
}

static void another_key_opens_nothing(void **state)
{
	(void)state;
	struct prekeys *p = make();
	struct party_key other;
	struct secret *scalar = NULL;
	struct qb_error e = {0};
	party_key_new(&other);
	assert_int_equal(prekeys_take(p, 0, &other, &scalar, &e), QB_CRYPTO);
	assert_null(scalar);
	party_key_free(&other);
	prekeys_close(&p);
}

static void refuse_open(const struct prekeys_for *what)
{
	struct prekeys *p = NULL;
	struct qb_error e = {0};
	assert_int_equal(prekeys_open(path, what, &p, &e), QB_FORMAT);
	assert_null(p);
}

static void other_campaign_station_place_count(void **state)
{
	(void)state;
	struct prekeys *p = make();
	prekeys_close(&p);
	struct prekeys_for what = about();
	what.campaign[15] ^= 1;
	refuse_open(&what);
	what = about();
	snprintf(what.station, sizeof what.station, "heron");
	refuse_open(&what);
	what = about();
	what.place = RECIPE_SPARE;
	refuse_open(&what);
	what = about();
	what.count++;
	refuse_open(&what);
}

/* A box moved to another slot's place must not open there. */
static void swapped_or_altered_boxes(void **state)
{
	(void)state;
	struct prekeys *p = make();
	struct prekeys_for what = about();
	struct qb_error e = {0};
	struct buf b = {0};
	struct secret *scalar = NULL;
	size_t boxes = 128 + COUNT * 32;
	prekeys_close(&p);
	assert_int_equal(file_read(path, 1 << 16, &b, &e), QB_OK);
	memcpy(b.data + boxes, b.data + boxes + 88, 88);
	b.data[boxes + 3 * 88 + 60] ^= 1;
	b.data[128 + 4 * 32] ^= 1; /* and one point */
	assert_int_equal(file_write(path, 0600, b.data, b.len, &e), QB_OK);
	assert_int_equal(prekeys_open(path, &what, &p, &e), QB_OK);
	for (int64_t i = 0; i < COUNT; i++) {
		enum qb_status want = i == 1 || i == 2 ? QB_OK : QB_CRYPTO;
		e = (struct qb_error){0};
		assert_int_equal(prekeys_take(p, i, &me, &scalar, &e), want);
		secret_free(&scalar);
	}
	prekeys_close(&p);
	assert_int_equal(truncate(path, 600), 0);
	refuse_open(&what);
	assert_int_equal(truncate(path, 20), 0);
	refuse_open(&what);
	buf_free(&b);
}

static void no_file(void **state)
{
	(void)state;
	struct prekeys_for what = about();
	struct prekeys *p = NULL;
	struct qb_error e = {0};
	assert_int_equal(prekeys_open(path, &what, &p, &e), QB_NOT_FOUND);
	what.count = 0;
	e = (struct qb_error){0};
	assert_int_equal(prekeys_create(path, &what, &me, &e), QB_RANGE);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test_setup_teardown(survives_a_restart, fresh, drop),
	    cmocka_unit_test_setup_teardown(is_private_and_never_made_twice, fresh, drop),
	    cmocka_unit_test_setup_teardown(erasing_overwrites, fresh, drop),
	    cmocka_unit_test_setup_teardown(another_key_opens_nothing, fresh, drop),
	    cmocka_unit_test_setup_teardown(other_campaign_station_place_count, fresh, drop),
	    cmocka_unit_test_setup_teardown(swapped_or_altered_boxes, fresh, drop),
	    cmocka_unit_test_setup_teardown(no_file, fresh, drop),
	};
	return cmocka_run_group_tests(tests, NULL, NULL);
}
