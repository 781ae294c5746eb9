/* Frames on the sealer's pipe: whatever comes, a frame that is taken is written again as the same bytes. */
#include <string.h>
#include <sys/mman.h>
#include <unistd.h>

#include "server/base/check.h"
#include "server/wire/sealer_frame.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
	enum sealer_message type;
	struct buf body = {0};
	int in = memfd_create("in", 0), out = memfd_create("out", 0);
	CHECK(in >= 0 && out >= 0 && write(in, data, size) == (ssize_t)size && lseek(in, 0, SEEK_SET) == 0);
	while (sealer_read(in, &type, &body)) {
		uint8_t *again;
		off_t end = lseek(in, 0, SEEK_CUR);
		CHECK(ftruncate(out, 0) == 0 && lseek(out, 0, SEEK_SET) == 0);
		CHECK(sealer_write(out, type, body.data, body.len));
		off_t n = lseek(out, 0, SEEK_CUR);
		again = mmap(NULL, (size_t)n, PROT_READ, MAP_SHARED, out, 0);
		CHECK(again != MAP_FAILED && end >= n && memcmp(again, data + (end - n), (size_t)n) == 0);
		munmap(again, (size_t)n);
	}
	buf_free(&body);
	close(in);
	close(out);
	return 0;
}
