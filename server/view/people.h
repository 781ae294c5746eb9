/*
 * The part of the projection that is about people: enrolments, new keys, vouches, retirements, and who is one person.
 * Only view_apply calls it; everybody else reads struct view_party.
 */
#ifndef QB_VIEW_PEOPLE_H
#define QB_VIEW_PEOPLE_H

#include "server/view/view.h"

/* Applies an entry about people; false when it is about something else. */
bool view_apply_people(struct view *v, const struct wire_entry *en, const struct entry *leaf);

#endif
