/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Tolerance factors: n 43, coverage 0.90, confidence 0.99 is the example of the
 * NIST e-Handbook 7.2.6.3 (two-sided 2.217, one-sided 1.8740; from memory), to
 * more digits and for other n computed independently with SciPy (nct.ppf; Howe
 * with chi2.ppf). Wilks: 59 observations for 95 % with 95 % confidence.
 */
#include "near.h"
#include "tolerance.h"

static void one_sided_factors_are_exact(void **state)
{
	(void)state;
	assert_near(tolerance_factor_one_sided(43, 0.90, 0.99), 1.87395, 1e-5, "");
	assert_near(tolerance_factor_one_sided(10, 0.95, 0.95), 2.91096, 1e-5, "");
	assert_near(tolerance_factor_one_sided(20, 0.95, 0.95), 2.39600, 1e-5, "");
	assert_near(tolerance_factor_one_sided(30, 0.95, 0.95), 2.21984, 1e-5, "");
}

static void two_sided_factors_are_howes(void **state)
{
	(void)state;
	assert_near(tolerance_factor_two_sided(43, 0.90, 0.99), 2.21732, 1e-5, "");
	assert_near(tolerance_factor_two_sided(10, 0.95, 0.95), 3.38191, 1e-5, "");
}

static void factors_fall_with_the_number_and_stay_finite(void **state)
{
	(void)state;
	double before = HUGE_VAL;
	for (size_t n = 3; n <= 1000; n = n * 3 / 2 + 1) {
		double k = tolerance_factor_two_sided(n, 0.9, 0.95);
		assert_true(k < before && k > 1.6448);
		assert_true(tolerance_factor_one_sided(n, 0.9, 0.95) > 1.2815);
		before = k;
	}
}

static void wilks_number_of_observations(void **state)
{
	(void)state;
	/* Of 59 none outside: 1 - 0.95^59 = 0.9515; of 58 it is 0.9489. */
	assert_near(binomial_at_least(59, 1, 0.05), 1 - pow(0.95, 59), 1e-12, "");
	assert_true(binomial_at_least(59, 1, 0.05) > 0.95 && binomial_at_least(58, 1, 0.05) < 0.95);
	assert_near(binomial_at_least(20, 0, 0.1), 1, 1e-15, "");
	assert_near(binomial_at_least(2, 2, 0.5), 0.25, 1e-15, "");
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(one_sided_factors_are_exact),
	    cmocka_unit_test(two_sided_factors_are_howes),
	    cmocka_unit_test(factors_fall_with_the_number_and_stay_finite),
	    cmocka_unit_test(wilks_number_of_observations),
	};
	return RUN_GROUP(tests);
}
