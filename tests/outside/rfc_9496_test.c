/* Our group functions against RFC 9496's own values: multiples, refused encodings, derivations. */
#include "tests/hex.h"
#include "tests/vectors/rfc9496.h"

#include "server/custody/group.h"

#define COUNT(a) (sizeof(a) / sizeof *(a))

static void multiples_of_the_generator(void **state)
{
	(void)state;
	uint8_t point[32], scalar[32], sum[32], base[32];
	unhex(rfc9496_multiples[1], base, 32);
	unhex(rfc9496_multiples[1], sum, 32);
	for (size_t i = 1; i < COUNT(rfc9496_multiples); i++) {
		group_scalar_from_u64(scalar, i);
		assert_true(group_mul_base(point, scalar));
		same_hex(point, rfc9496_multiples[i], 32);
		assert_true(group_mul(point, scalar, base));
		same_hex(point, rfc9496_multiples[i], 32);
		if (i > 1)
			assert_true(group_add(sum, sum, base));
		same_hex(sum, rfc9496_multiples[i], 32);
	}
}

/* Multiple 0 is the identity: valid for the RFC, refused by us in every place. */
static void identity_is_refused(void **state)
{
	(void)state;
	uint8_t identity[32], scalar[32], base[32], out[32];
	unhex(rfc9496_multiples[0], identity, 32);
	unhex(rfc9496_multiples[1], base, 32);
	group_scalar_from_u64(scalar, 7);
	assert_false(group_point_ok(identity));
	assert_false(group_mul(out, scalar, identity));
	assert_false(group_add(out, base, identity));
	assert_false(group_sub(out, base, base));
	same_hex(out, rfc9496_multiples[0], 32);
}

static void invalid_encodings_are_refused(void **state)
{
	(void)state;
	uint8_t bad[32], base[32], scalar[32], out[32];
	unhex(rfc9496_multiples[1], base, 32);
	group_scalar_from_u64(scalar, 3);
	for (size_t i = 0; i < COUNT(rfc9496_invalid); i++) {
		unhex(rfc9496_invalid[i], bad, 32);
		assert_false(group_point_ok(bad));
		assert_false(group_mul(out, scalar, bad));
		assert_false(group_add(out, base, bad));
		assert_false(group_sub(out, bad, base));
	}
}

static void derivation_from_64_bytes(void **state)
{
	(void)state;
	uint8_t in[64], point[32];
	for (size_t i = 0; i < COUNT(rfc9496_derived); i++) {
		unhex(rfc9496_derived[i].in, in, 64);
		assert_true(group_from_hash(point, in));
		same_hex(point, rfc9496_derived[i].point, 32);
	}
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(multiples_of_the_generator),
	    cmocka_unit_test(identity_is_refused),
	    cmocka_unit_test(invalid_encodings_are_refused),
	    cmocka_unit_test(derivation_from_64_bytes),
	};
	struct qb_error e = {0};
	if (secret_setup(&e) != QB_OK)
		return 1;
	return cmocka_run_group_tests(tests, NULL, NULL);
}
