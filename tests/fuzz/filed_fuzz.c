/* What drivers file: a note or report that is accepted, encoded again, is accepted as the same. */
#include <string.h>

#include "server/base/check.h"
#include "server/drill/report.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
	struct play_note note, note_again;
	struct play_report report, report_again;
	struct buf b = {0};
	if (play_note_decode(data, size, &note, NULL) == QB_OK) {
		CHECK(play_note_encode(&note, &b, NULL) == QB_OK);
		CHECK(play_note_decode(b.data, b.len, &note_again, NULL) == QB_OK);
		CHECK(note.slot == note_again.slot && note.samples == note_again.samples &&
		      note.state == note_again.state && strcmp(note.station, note_again.station) == 0);
		buf_clear(&b);
	}
	if (play_report_decode(data, size, &report, NULL) == QB_OK) {
		CHECK(play_report_encode(&report, &b, NULL) == QB_OK);
		CHECK(play_report_decode(b.data, b.len, &report_again, NULL) == QB_OK);
		CHECK(report.slot == report_again.slot && strcmp(report.reason, report_again.reason) == 0 &&
		      memcmp(report.samples_hash, report_again.samples_hash, 64) == 0);
	}
	buf_free(&b);
	return 0;
}
