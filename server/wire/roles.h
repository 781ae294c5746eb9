/* The roles: who a party is for the service and for a campaign, and bit sets of them for the tables. */
#ifndef QB_WIRE_ROLES_H
#define QB_WIRE_ROLES_H

#include <stdbool.h>

enum wire_role {
	ROLE_NONE, /* unsigned requests */
	ROLE_ADMINISTRATOR,
	ROLE_CUSTODIAN,
	ROLE_OPERATOR,
	ROLE_DRIVER,
	ROLE_ANALYST,
	ROLE_REVIEWER,
	ROLE_LIAISON,
	ROLE_AUDITOR,
	ROLE_SERVICE, /* the service itself; never a requester */
	ROLE_COUNT
};

#define ROLE_BIT(r) (1u << (r))
#define ROLES_ENROLLED                                                                                                 \
	(ROLE_BIT(ROLE_ADMINISTRATOR) | ROLE_BIT(ROLE_CUSTODIAN) | ROLE_BIT(ROLE_OPERATOR) | ROLE_BIT(ROLE_DRIVER) |   \
	 ROLE_BIT(ROLE_ANALYST) | ROLE_BIT(ROLE_REVIEWER) | ROLE_BIT(ROLE_LIAISON) | ROLE_BIT(ROLE_AUDITOR))
#define ROLES_ANYONE (ROLES_ENROLLED | ROLE_BIT(ROLE_NONE))

const char *wire_role_word(enum wire_role role);             /* "custodian" ... */
bool wire_role_parse(const char *word, enum wire_role *out); /* enrolled roles only */

#endif
