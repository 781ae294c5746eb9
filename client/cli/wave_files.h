/*
 * Network and source files for the local calculators, the rig and the scan: one place that says where a file named
 * inside a network file is looked for.
 */
#ifndef QB_CLIENT_CLI_WAVE_FILES_H
#define QB_CLIENT_CLI_WAVE_FILES_H

#include "server/base/buf.h"
#include "server/wave/network.h"
#include "server/wave/source.h"

/* Files that the network names lie beside it. Errors: QB_IO, QB_FORMAT, QB_RANGE. The caller owns *out. */
enum qb_status network_file_read(const char *path, struct wave_network **out, struct qb_error *e) QB_MUST_USE;
enum qb_status source_file_read(const char *path, struct wave_source *out, struct qb_error *e) QB_MUST_USE;
/* A whole human-written file of at most 4 MiB, as text; QB_FORMAT when it holds a zero byte. */
enum qb_status text_file_read(const char *path, struct buf *out, struct qb_error *e) QB_MUST_USE;

#endif
