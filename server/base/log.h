/*
 * Structured log lines on a file descriptor: one line an event, `time=... level=... event=... key=value`, values quoted
 * when needed. There is no way to print bytes of a secret: values are text or integers that the caller names.
 */
#ifndef QB_BASE_LOG_H
#define QB_BASE_LOG_H

#include <stdint.h>

#include "server/base/clock.h"

enum log_level { LOG_DEBUG_, LOG_INFO_, LOG_WARN_, LOG_ERROR_ };

struct log {
	int fd;               /* -1: silent */
	enum log_level least; /* lower levels are dropped */
	struct clock_source clock;
};

/* Pairs of key, value as strings, ended by NULL: log_event(l, LOG_INFO_, "hold-placed", "station", "tarn", NULL). */
void log_event(const struct log *l, enum log_level level, const char *event, ...) __attribute__((sentinel));

#endif
