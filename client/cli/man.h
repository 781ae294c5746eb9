/* The manual page of the client, from the same tables that dispatch reads. */
#ifndef QB_CLIENT_CLI_MAN_H
#define QB_CLIENT_CLI_MAN_H

/* Writes the page to standard output. */
void cli_man(void);

#endif
