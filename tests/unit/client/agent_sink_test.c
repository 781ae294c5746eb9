/* The file sink: one size whatever it holds, nothing under the final name before the end, private files. */
#include <dirent.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#include "client/agent/sink.h"
#include "server/base/alloc.h"
#include "server/base/buf.h"
#include "server/base/clock.h"
#include "server/base/json.h"
#include "server/base/text.h"
#include "tests/near.h"

#define N 1000

static char dir[64];

static int fresh_dir(void **state)
{
	(void)state;
	snprintf(dir, sizeof dir, "/tmp/agent-sink-XXXXXX");
	return mkdtemp(dir) == NULL;
}

static int drop_dir(void **state)
{
	(void)state;
	DIR *d = opendir(dir);
	struct dirent *entry;
	while ((entry = readdir(d)) != NULL) {
		char *path = text_printf("%s/%s", dir, entry->d_name);
		if (entry->d_name[0] != '.' || strlen(entry->d_name) > 2)
			unlink(path);
		qb_free(path);
	}
	closedir(d);
	return rmdir(dir);
}

static int files_in_dir(void)
{
	int n = 0;
	DIR *d = opendir(dir);
	struct dirent *entry;
	while ((entry = readdir(d)) != NULL)
		n += strcmp(entry->d_name, ".") != 0 && strcmp(entry->d_name, "..") != 0;
	closedir(d);
	return n;
}

static struct sink *open_sink(void)
{
	struct sink *s = NULL;
	struct qb_error e = {0};
	char *spec = text_printf("file:%s", dir);
	assert_int_equal(sink_open(spec, &s, &e), QB_OK);
	qb_free(spec);
	return s;
}

static struct sink_slot slot_of(int64_t n)
{
	return (struct sink_slot){.station = "tarn",
	                          .slot = n,
	                          .start_gps_ns = INT64_C(1300000000500000000),
	                          .rate_hz = 4096,
	                          .n_samples = N};
}

static void write_slot(struct sink *s, int64_t n, double gain)
{
	struct sink_slot at = slot_of(n);
	struct qb_error e = {0};
	double block[100];
	assert_int_equal(sink_begin(s, &at, &e), QB_OK);
	for (int i = 0; i < N; i += 100) {
		for (int k = 0; k < 100; k++)
			block[k] = gain * (i + k);
		assert_int_equal(sink_put(s, block, 100, &e), QB_OK);
	}
	assert_int_equal(sink_end(s, &e), QB_OK);
}

static void read_back(const char *name, struct buf *out)
{
	struct qb_error e = {0};
	char *path = text_printf("%s/%s", dir, name);
	struct stat info;
	assert_int_equal(stat(path, &info), 0);
	assert_int_equal(info.st_mode & 07777, 0600);
	assert_int_equal(file_read(path, 1 << 20, out, &e), QB_OK);
	qb_free(path);
}

static void null_and_live_have_one_size(void **state)
{
	(void)state;
	struct sink *s = open_sink();
	struct buf live = {0}, null = {0};
	write_slot(s, 7, 1.5);
	write_slot(s, 8, 0);
	sink_close(&s);
	assert_null(s);
	read_back("slot-000007.npy", &live);
	read_back("slot-000008.npy", &null);
	assert_int_equal(live.len, 128 + 8 * N);
	assert_int_equal(live.len, null.len);
	assert_memory_equal(live.data, null.data, 128);
	double value;
	memcpy(&value, live.data + 128 + 8 * 999, 8);
	assert_true(value == 1498.5);
	memcpy(&value, null.data + 128 + 8 * 999, 8);
	assert_true(value == 0);
	buf_free(&live);
	buf_free(&null);
}

/* The header's rules of NumPy's format description, version 1.0. */
static void header_is_npy(void **state)
{
	(void)state;
	struct sink *s = open_sink();
	struct buf b = {0};
	write_slot(s, 0, 1);
	sink_close(&s);
	read_back("slot-000000.npy", &b);
	assert_memory_equal(b.data, "\x93NUMPY\x01\x00", 8);
	size_t header = 10 + b.data[8] + 256u * b.data[9];
	assert_int_equal(header % 64, 0);
	assert_int_equal(b.data[header - 1], '\n');
	const char *dict = "{'descr': '<f8', 'fortran_order': False, 'shape': (1000,), } ";
	assert_memory_equal(b.data + 10, dict, strlen(dict));
	assert_int_equal(b.len, header + 8 * N);
	buf_free(&b);
}

static void sidecar(void **state)
{
	(void)state;
	struct sink *s = open_sink();
	struct buf b = {0};
	struct qb_error e = {0};
	json_t *doc = NULL;
	const char *text;
	int64_t start;
	double rate;
	write_slot(s, 12, 1);
	sink_close(&s);
	read_back("slot-000012.json", &b);
	assert_int_equal(json_read((const char *)b.data, b.len, "side-car", &doc, &e), QB_OK);
	assert_int_equal(json_gps(doc, "start_gps", "side-car", &start, &e), QB_OK);
	assert_int_equal(start, INT64_C(1300000000500000000));
	assert_int_equal(json_num(doc, "rate_hz", "side-car", &rate, &e), QB_OK);
	assert_true(rate == 4096);
	assert_int_equal(json_str(doc, "unit", "side-car", &text, &e), QB_OK);
	assert_string_equal(text, "counts");
	assert_int_equal(json_str(doc, "station", "side-car", &text, &e), QB_OK);
	assert_string_equal(text, "tarn");
	assert_int_equal(json_object_size(doc), 4);
	json_decref(doc);
	buf_free(&b);
}

static void half_a_slot_leaves_nothing(void **state)
{
	(void)state;
	struct sink *s = open_sink();
	struct sink_slot at = slot_of(3);
	struct qb_error e = {0};
	double block[100] = {1};
	assert_int_equal(sink_begin(s, &at, &e), QB_OK);
	assert_int_equal(sink_put(s, block, 100, &e), QB_OK);
	char *final = text_printf("%s/slot-000003.npy", dir);
	assert_int_equal(files_in_dir(), 1);
	assert_int_equal(access(final, F_OK), -1);
	qb_free(final);
	sink_close(&s);
	assert_int_equal(files_in_dir(), 0);
}

/* After a crash the unfinished file of the slot is there under a hidden name; the next run begins it anew. */
static void begins_anew_after_a_crash(void **state)
{
	(void)state;
	char *part = text_printf("%s/.slot-000003.part", dir);
	struct qb_error e = {0};
	struct buf b = {0};
	uint8_t rubbish[20000];
	memset(rubbish, 7, sizeof rubbish);
	assert_int_equal(file_write(part, 0600, rubbish, sizeof rubbish, &e), QB_OK);
	struct sink *s = open_sink();
	write_slot(s, 3, 2);
	sink_close(&s);
	assert_int_equal(access(part, F_OK), -1);
	read_back("slot-000003.npy", &b);
	assert_int_equal(b.len, 128 + 8 * N);
	buf_free(&b);
	qb_free(part);
}

static void refuses_other_kinds(void **state)
{
	(void)state;
	const char *const specs[] = {"file", "file:", "tape:/tmp/x", "", ":", "files:/tmp/x"};
	for (size_t i = 0; i < sizeof specs / sizeof specs[0]; i++) {
		struct sink *s = NULL;
		struct qb_error e = {0};
		assert_int_equal(sink_open(specs[i], &s, &e), QB_USAGE);
		assert_null(s);
		assert_true(e.what[0] != '\0');
	}
	struct sink *s = NULL;
	struct qb_error e = {0};
	assert_int_equal(sink_open("file:/proc/nowhere/at-all", &s, &e), QB_IO);
	assert_non_null(sink_help(0));
	assert_null(sink_help(99));
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test_setup_teardown(null_and_live_have_one_size, fresh_dir, drop_dir),
	    cmocka_unit_test_setup_teardown(header_is_npy, fresh_dir, drop_dir),
	    cmocka_unit_test_setup_teardown(sidecar, fresh_dir, drop_dir),
	    cmocka_unit_test_setup_teardown(half_a_slot_leaves_nothing, fresh_dir, drop_dir),
	    cmocka_unit_test_setup_teardown(begins_anew_after_a_crash, fresh_dir, drop_dir),
	    cmocka_unit_test_setup_teardown(refuses_other_kinds, fresh_dir, drop_dir),
	};
	return cmocka_run_group_tests(tests, NULL, NULL);
}
