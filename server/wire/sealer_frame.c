/* Framed messages over a pipe or socket. */
#include "server/wire/sealer_frame.h"

#include <errno.h>
#include <unistd.h>

static bool write_all(int fd, const uint8_t *p, size_t n)
{
	while (n > 0) {
		ssize_t w = write(fd, p, n);
		if (w < 0 && errno == EINTR)
			continue;
		if (w <= 0)
			return false;
		p += w;
		n -= (size_t)w;
	}
	return true;
}

static bool read_all(int fd, uint8_t *p, size_t n)
{
	while (n > 0) {
		ssize_t r = read(fd, p, n);
		if (r < 0 && errno == EINTR)
			continue;
		if (r <= 0)
			return false;
		p += r;
		n -= (size_t)r;
	}
	return true;
}

bool sealer_write(int fd, enum sealer_message type, const void *body, size_t n)
{
	struct buf head = {0};
	buf_u32(&head, (uint32_t)type);
	buf_u64(&head, n);
	bool good = write_all(fd, head.data, head.len) && (n == 0 || write_all(fd, body, n));
	buf_free(&head);
	return good;
}

bool sealer_read(int fd, enum sealer_message *type, struct buf *body)
{
	uint8_t head[12];
	buf_clear(body);
	if (!read_all(fd, head, sizeof head))
		return false;
	struct cursor c = cursor_over(head, sizeof head);
	*type = (enum sealer_message)cursor_u32(&c);
	uint64_t n = cursor_u64(&c);
	if (n > SEALER_MESSAGE_MAX)
		return false;
	buf_zeros(body, n);
	return n == 0 || read_all(fd, body->data, n);
}
