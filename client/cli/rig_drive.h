/* What a directory of drives does to a station's strain, handed out in order of time; part of the rig. */
#ifndef QB_CLIENT_CLI_RIG_DRIVE_H
#define QB_CLIENT_CLI_RIG_DRIVE_H

#include <stddef.h>

#include "client/cli/rig.h"

struct rig_drives;
/* dir may be NULL or missing: silence. The caller frees *out with rig_drives_close. */
enum qb_status rig_drives_open(const char *dir, const struct wave_station *station, const struct rig_run *run,
                               struct rig_drives **out, struct qb_error *e) QB_MUST_USE;
/* Adds to n samples of strain, the first being sample `at` of the run; calls go forward in time. */
enum qb_status rig_drives_add(struct rig_drives *d, int64_t at, double *strain, size_t n,
                              struct qb_error *e) QB_MUST_USE;
int rig_drives_played(const struct rig_drives *d); /* so far */
void rig_drives_close(struct rig_drives **d);

#endif
