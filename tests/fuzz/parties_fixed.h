/* Fixed keys beside the fixed group, for the targets that need people. */
#ifndef QB_FUZZ_PARTIES_FIXED_H
#define QB_FUZZ_PARTIES_FIXED_H

#include "tests/fuzz/group_fixed.h"

#include "server/custody/party.h"

#define FIXED_PARTIES 5

static struct party_key fixed_key[FIXED_PARTIES];
static struct party_public fixed_pub[FIXED_PARTIES];

static inline void fixed_parties(void)
{
	if (fixed_key[0].seed != NULL)
		return;
	fixed_setup();
	for (uint8_t j = 0; j < FIXED_PARTIES; j++) {
		uint8_t seed[32] = {j, 1, 2}, scalar[32];
		group_scalar_from_u64(scalar, 1000U + j);
		CHECK(party_key_from(seed, scalar, &fixed_key[j], NULL) == QB_OK);
		party_key_public(&fixed_key[j], &fixed_pub[j]);
	}
}

#endif
