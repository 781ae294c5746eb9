/* Role words. */
#include "server/wire/roles.h"

#include <string.h>

static const char *const words[ROLE_COUNT] = {
    [ROLE_NONE] = "anyone",         [ROLE_ADMINISTRATOR] = "administrator",
    [ROLE_CUSTODIAN] = "custodian", [ROLE_OPERATOR] = "operator",
    [ROLE_DRIVER] = "driver",       [ROLE_ANALYST] = "analyst",
    [ROLE_REVIEWER] = "reviewer",   [ROLE_LIAISON] = "liaison",
    [ROLE_AUDITOR] = "auditor",     [ROLE_SERVICE] = "service",
};

const char *wire_role_word(enum wire_role role)
{
	return role >= ROLE_NONE && role < ROLE_COUNT ? words[role] : "unknown";
}

bool wire_role_parse(const char *word, enum wire_role *out)
{
	for (int r = ROLE_ADMINISTRATOR; r <= ROLE_AUDITOR; r++) {
		if (strcmp(words[r], word) == 0) {
			*out = (enum wire_role)r;
			return true;
		}
	}
	return false;
}
