/* The client's entry point. */
#include "client/cli/internal.h"

int main(int argc, char **argv)
{
	return cli_main(argc, argv);
}
