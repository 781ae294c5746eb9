/* Reads lines "k n confidence" and prints both intervals and a Poisson tail, for scipy_binomial_test.py. */
#include <inttypes.h>
#include <stdio.h>

#include "server/audit/binomial.h"

int main(void)
{
	uint64_t k, n;
	double confidence;
	while (scanf("%" SCNu64 " %" SCNu64 " %lf", &k, &n, &confidence) == 3) {
		const struct audit_interval w = audit_wilson(k, n, confidence),
		                            c = audit_clopper_pearson(k, n, confidence);
		printf("%.17g %.17g %.17g %.17g %.17g %.17g\n", w.lower, w.upper, c.lower, c.upper,
		       audit_poisson_at_least(k, (double)n / 7), audit_binomial_two_sided(k, n, 0.3));
	}
	return 0;
}
