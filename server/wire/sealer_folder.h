/*
 * Sealer messages as files, for machines with no network between them: to-00000000.qbs, to-00000001.qbs ... for the
 * sealer and from-... from it. Each is written whole under another name first, so that whoever carries the folder never
 * carries half a message.
 */
#ifndef QB_WIRE_SEALER_FOLDER_H
#define QB_WIRE_SEALER_FOLDER_H

#include "server/base/err.h"
#include "server/wire/sealer_frame.h"

/* side: "to" or "from". Errors: QB_IO */
enum qb_status sealer_folder_put(const char *folder, const char *side, uint64_t number, enum sealer_message type,
                                 const struct buf *body, struct qb_error *e) QB_MUST_USE;
/* QB_NOT_FOUND when it has not come yet (without filling e); QB_FORMAT, QB_IO */
enum qb_status sealer_folder_get(const char *folder, const char *side, uint64_t number, enum sealer_message *type,
                                 struct buf *body, struct qb_error *e) QB_MUST_USE;

#endif
