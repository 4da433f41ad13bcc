/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Statistics against certified and published values. Data sets: NIST
 * Statistical Reference Datasets (StRD), univariate and linear regression,
 * U.S. public domain.
 */
#include "recording.h"
#include "statistics.h"

static const double lew[] = {
    -213, -564, -35,  -15,  141,  115,  -420, -360, 203,  -338, -431, 194,  -220, -513, 154,  -125,
    -559, 92,   -21,  -579, -52,  99,   -543, -175, 162,  -457, -346, 204,  -300, -474, 164,  -107,
    -572, -8,   83,   -541, -224, 180,  -420, -374, 201,  -236, -531, 83,   27,   -564, -112, 131,
    -507, -254, 199,  -311, -495, 143,  -46,  -579, -90,  136,  -472, -338, 202,  -287, -477, 169,
    -124, -568, 17,   48,   -568, -135, 162,  -430, -422, 172,  -74,  -577, -13,  92,   -534, -243,
    194,  -355, -465, 156,  -81,  -578, -64,  139,  -449, -384, 193,  -198, -538, 110,  -44,  -577,
    -6,   66,   -552, -164, 161,  -460, -344, 205,  -281, -504, 134,  -28,  -576, -118, 156,  -437,
    -381, 200,  -220, -540, 83,   11,   -568, -160, 172,  -414, -408, 188,  -125, -572, -32,  139,
    -492, -321, 205,  -262, -504, 142,  -83,  -574, 0,    48,   -571, -106, 137,  -501, -266, 190,
    -391, -406, 194,  -186, -553, 83,   -13,  -577, -49,  103,  -515, -280, 201,  300,  -506, 131,
    -45,  -578, -80,  138,  -462, -361, 201,  -211, -554, 32,   74,   -533, -235, 187,  -372, -442,
    182,  -147, -566, 25,   68,   -535, -244, 194,  -351, -463, 174,  -125, -570, 15,   72,   -550,
    -190, 172,  -424, -385, 198,  -218, -536, 96};
static const double michelso[] = {
    299.85, 299.74, 299.90, 300.07, 299.93, 299.85, 299.95, 299.98, 299.98, 299.88, 300.00, 299.98,
    299.93, 299.65, 299.76, 299.81, 300.00, 300.00, 299.96, 299.96, 299.96, 299.94, 299.96, 299.94,
    299.88, 299.80, 299.85, 299.88, 299.90, 299.84, 299.83, 299.79, 299.81, 299.88, 299.88, 299.83,
    299.80, 299.79, 299.76, 299.80, 299.88, 299.88, 299.88, 299.86, 299.72, 299.72, 299.62, 299.86,
    299.97, 299.95, 299.88, 299.91, 299.85, 299.87, 299.84, 299.84, 299.85, 299.84, 299.84, 299.84,
    299.89, 299.81, 299.81, 299.82, 299.80, 299.77, 299.76, 299.74, 299.75, 299.76, 299.91, 299.92,
    299.89, 299.86, 299.88, 299.72, 299.84, 299.85, 299.85, 299.78, 299.89, 299.84, 299.78, 299.81,
    299.76, 299.81, 299.79, 299.81, 299.82, 299.85, 299.87, 299.87, 299.81, 299.74, 299.81, 299.94,
    299.95, 299.80, 299.81, 299.87};
static const double mavro[] = {
    2.0018, 2.0017, 2.0018, 2.0019, 2.0018, 2.0017, 2.0015, 2.0014, 2.0015, 2.0015,
    2.0017, 2.0018, 2.0018, 2.0019, 2.0019, 2.0021, 2.0020, 2.0016, 2.0014, 2.0013,
    2.0013, 2.0015, 2.0015, 2.0016, 2.0015, 2.0014, 2.0013, 2.0014, 2.0015, 2.0014,
    2.0015, 2.0016, 2.0015, 2.0016, 2.0019, 2.0020, 2.0020, 2.0021, 2.0022, 2.0023,
    2.0024, 2.0025, 2.0027, 2.0026, 2.0026, 2.0026, 2.0027, 2.0026, 2.0025, 2.0024};
static const double norris[][2] = {
    {0.1, 0.2},     {338.8, 337.4}, {118.1, 118.2}, {888.0, 884.6}, {9.2, 10.1},
    {228.1, 226.5}, {668.5, 666.3}, {998.5, 996.3}, {449.1, 448.6}, {778.9, 777.0},
    {559.2, 558.2}, {0.3, 0.4},     {0.1, 0.6},     {778.1, 775.5}, {668.8, 666.9},
    {339.3, 338.0}, {448.9, 447.5}, {10.8, 11.6},   {557.7, 556.0}, {228.3, 228.1},
    {998.0, 995.8}, {888.8, 887.6}, {119.6, 120.2}, {0.3, 0.3},     {0.6, 0.3},
    {557.6, 556.8}, {339.3, 339.1}, {888.0, 887.2}, {998.5, 999.0}, {778.9, 779.0},
    {10.2, 11.1},   {117.6, 118.3}, {228.9, 229.2}, {668.4, 669.1}, {449.2, 448.9},
    {0.2, 0.5}}; /* y, x */

static struct stretch stretch_of(struct recording *rec, const double *values, size_t count)
{
	recording_init(rec);
	int channel = recording_channel(rec, "x", "1", EVIDENCE_INDEPENDENT);
	for (size_t i = 0; i < count; i++)
		recording_at(rec, channel, MS((double)i), values[i]);
	return (struct stretch){.series = &rec->series[channel], .count = count};
}

static void assert_summary(const double *values, size_t count, double mean, double sd, double lag1,
                           double sd_relative, double lag1_relative)
{
	struct recording rec;
	struct stretch stretch = stretch_of(&rec, values, count);
	struct summary summary;
	summarise(&stretch, &summary);
	assert_near(summary.mean, mean, 1e-15 * fabs(mean), "");
	assert_near(summary.sd, sd, sd_relative * sd, "");
	assert_near(summary.lag1, lag1, lag1_relative * fabs(lag1), "");
	recording_release(&rec);
}

/* NIST StRD, certified values; relative tolerances are what double input allows. */
static void mean_sd_and_autocorrelation_are_those_certified_by_nist(void **state)
{
	(void)state;
	assert_summary(lew, 200, -177.435, 277.332168044316, -.307304800605679, 1e-14, 1e-13);
	assert_summary(michelso, 100, 299.8524, .0790105478190518, .535199668621283, 1e-13, 1e-13);
	assert_summary(mavro, 50, 2.001856, .000429123454003053, .937989183438248, 1e-12, 1e-12);
	const double accuracy1[] = {10000001, 10000003, 10000002};
	assert_summary(accuracy1, 3, 10000002, 1, -.5, 1e-15, 1e-15);
}

static void alternating(double *values, double first, double low, double high)
{
	values[0] = first;
	for (size_t i = 0; i < 500; i++) {
		values[2 * i + 1] = low;
		values[2 * i + 2] = high;
	}
}

static void a_small_spread_far_from_zero_is_kept(void **state)
{
	(void)state;
	double values[1001];
	alternating(values, 1.2, 1.1, 1.3); /* NIST StRD NumAcc2 */
	assert_summary(values, 1001, 1.2, .1, -.999, 1e-13, 1e-10);
	alternating(values, 1000000.2, 1000000.1, 1000000.3); /* NumAcc3 */
	assert_summary(values, 1001, 1000000.2, .1, -.999, 1e-9, 1e-10);
	alternating(values, 10000000.2, 10000000.1, 10000000.3); /* NumAcc4 */
	assert_summary(values, 1001, 10000000.2, .1, -.999, 1e-7, 1e-10);
}

static void slope_and_its_error_are_those_certified_by_nist(void **state)
{
	(void)state;
	struct recording rec;
	recording_init(&rec);
	int channel = recording_channel(&rec, "y", "1", EVIDENCE_INDEPENDENT);
	size_t count = sizeof norris / sizeof norris[0];
	for (size_t i = 0; i < count; i++)
		recording_at(&rec, channel, S(norris[i][1]), norris[i][0]);
	struct stretch stretch = {.series = &rec.series[channel], .count = count};
	struct line line;
	assert_true(line_fit(&stretch, &line));
	/* NIST StRD Norris, certified. */
	assert_near(line.slope, 1.00211681802045, 1e-11, "");
	assert_near(line.slope_se, 0.429796848199937E-03, 0.43e-3 * 1e-11, "");
	assert_near(line.intercept, -0.262323073774029, 1e-10, "");
	assert_near(line.residual_sd, 0.884796396144373, 1e-11, "");
	recording_release(&rec);
}

static void quantiles_are_those_of_the_tables(void **state)
{
	(void)state;
	/* JCGM 106:2012, table 1, z for coverage .80 .90 .95 .99 .999, to its four digits. */
	static const double z[][2] = {
	    {.80, 0.8416}, {.90, 1.2816}, {.95, 1.6449}, {.99, 2.3263}, {.999, 3.0902}};
	for (size_t i = 0; i < 5; i++)
		assert_near(normal_quantile(z[i][0]), z[i][1], 5e-5, "");
	assert_near(normal_quantile(0.975), 1.959963984540054, 1e-13, ""); /* SciPy norm.ppf */
	/* t(.975, n - 2) for n = 10 20 30 50 100: computed independently with SciPy. */
	static const double t[][2] = {
	    {8, 2.306004}, {18, 2.100922}, {28, 2.048407}, {48, 2.010635}, {98, 1.984467}};
	for (size_t i = 0; i < 5; i++)
		assert_near(student_quantile(0.975, t[i][0]), t[i][1], 5e-7, "");
	/* One degree is Cauchy: tan(pi (p - 1/2)); two: closed form. */
	assert_near(student_quantile(0.975, 1), 12.706204736174698, 1e-11, "");
	assert_near(student_quantile(0.975, 2), 4.302652729749464, 1e-12, "");
	assert_near(student_quantile(0.025, 2), -4.302652729749464, 1e-12, "");
	assert_near(student_quantile(0.5, 3), 0, 0, "");
	assert_near(student_quantile(0.975, 2.5), 3.5746548420118773, 1e-9, ""); /* SciPy t.ppf */
	assert_true(isnan(student_quantile(0, 3)));
	assert_true(isnan(student_quantile(1, 3)));
	assert_true(isnan(student_quantile(0.5, 0)));
	assert_true(isnan(student_cdf((double)NAN, 3)));
}

static void distribution_and_quantile_undo_each_other(void **state)
{
	(void)state;
	for (double nu = 0.7; nu < 1e6; nu *= 3)
		for (double p = 0.001; p < 1; p += 0.0499)
			assert_near(student_cdf(student_quantile(p, nu), nu), p, 1e-12, "");
	/* Risks behind guard bands: Phi(-2 w/U) for w = 1.5 U, U, 0.83 U (ILAC-G8, table 1). */
	assert_near(normal_cdf(-3), .00135, 5e-6, "");
	assert_near(normal_cdf(-2), .0228, 5e-5, "");
	assert_near(normal_cdf(-1.66), .0485, 5e-5, "");
}

struct directions {
	const char *source;
	size_t n;
	double values[14];
	double mean, R, sd, tolerance;
};

static void mean_directions_are_the_published_ones(void **state)
{
	(void)state;
	static const struct directions sets[] = {
	    {"Mardia & Jupp 2000, ex. 1.1",
	     9,
	     {43, 45, 52, 61, 75, 88, 88, 279, 357},
	     51.050177,
	     .71099100,
	     47.323366,
	     1e-6},
	    {"Zar 2010, ex. 26.4",
	     8,
	     {45, 55, 81, 96, 110, 117, 132, 154},
	     98.987752,
	     .82521774,
	     35.514880,
	     1e-6},
	    {"cricket frogs (R circular, ncfrog)",
	     14,
	     {104, 110, 117, 121, 127, 130, 136, 145, 152, 178, 184, 192, 200, 316},
	     145.974404,
	     .72519590,
	     45.930596,
	     1e-6},
	    {"computed independently with SciPy", 3, {359, 1, 3}, 1, .99959388, 1.633076, 1e-6},
	    {"computed independently with SciPy", 3, {355, 5, 15}, 5, .98987184, 8.175368, 1e-6},
	};
	for (size_t i = 0; i < sizeof sets / sizeof sets[0]; i++) {
		struct recording rec;
		struct stretch stretch = stretch_of(&rec, sets[i].values, sets[i].n);
		struct circular circular;
		circular_of(&stretch, 360, &circular);
		assert_near(circular.mean, sets[i].mean, sets[i].tolerance, "deg");
		assert_near(circular.R, sets[i].R, 1e-8, "");
		assert_near(circular.sd, sets[i].sd, sets[i].tolerance, "deg");
		recording_release(&rec);
	}
}

static void opposite_directions_have_no_mean(void **state)
{
	(void)state;
	static const double opposite[] = {0, 180}, around_zero[] = {350, 10};
	struct recording rec;
	struct stretch stretch = stretch_of(&rec, opposite, 2);
	struct circular circular;
	circular_of(&stretch, 360, &circular);
	assert_true(isnan(circular.mean));
	recording_release(&rec);
	stretch = stretch_of(&rec, around_zero, 2);
	circular_of(&stretch, 360, &circular);
	assert_near(circular.mean, 0, 1e-12, "deg");
	recording_release(&rec);
}

static void wrapping_keeps_to_half_a_turn(void **state)
{
	(void)state;
	assert_near(wrap_half(190, 360), -170, 0, "");
	assert_near(wrap_half(180, 360), 180, 0, "");
	assert_near(wrap_half(-180, 360), 180, 0, "");
	assert_near(wrap_half(540, 360), 180, 0, "");
	assert_near(wrap_half(-359, 360), 1, 0, "");
	assert_near(wrap_half(4095, 4096), -1, 0, "");
}

static void correlation_makes_fewer_independent_rows(void **state)
{
	(void)state;
	struct recording rec;
	double values[1000], last = 0;
	struct random random = {7};
	for (size_t i = 0; i < 1000; i++)
		values[i] = last = 0.6 * last + random_normal(&random);
	struct stretch stretch = stretch_of(&rec, values, 1000);
	struct summary summary;
	summarise(&stretch, &summary);
	/* First order, phi = 0.6: n (1 - phi)/(1 + phi) = 250; the estimate scatters. */
	assert_near(summary.independent, 250, 50, "");
	recording_release(&rec);
}

/* A drift of d over the window is called steady for 4 d' < tolerance only where d < d'. */
static void steadiness_is_proven_and_not_assumed(void **state)
{
	(void)state;
	struct random random = {11};
	int wrongly = 0, proven = 0;
	for (int draw = 0; draw < 2000; draw++) {
		struct recording rec;
		double values[50];
		for (size_t i = 0; i < 50; i++)
			values[i] = 1.0 * (double)i / 49 + 0.1 * random_normal(&random);
		struct stretch stretch = stretch_of(&rec, values, 50);
		struct steadiness steadiness;
		assert_true(steadiness_of(&stretch, 0, &steadiness));
		wrongly += steadiness.bound < 1.0; /* the true drift is 1 */
		proven += steadiness.bound < 1.2;
		recording_release(&rec);
	}
	assert_true(wrongly <= 2000 * 0.035); /* 2.5 % and its scatter */
	assert_true(proven >= 1900);
}

static void rounding_leaves_half_a_step_without_noise_and_nothing_with(void **state)
{
	(void)state;
	assert_near(rounding_bias(0.2, 0), 0.1, 1e-15, "");
	assert_near(rounding_bias(0, 1), 0, 0, "");
	assert_true(rounding_bias(0.2, 0.2) < 1e-4);
}

static void coverage_factor_is_at_least_two_and_grows_with_few_rows(void **state)
{
	(void)state;
	struct budget budget = {0};
	budget_other(&budget, 3);
	assert_near(budget_expanded(&budget), 6, 1e-15, "");
	budget = (struct budget){0};
	budget_random(&budget, 1, 4);
	assert_near(budget_expanded(&budget), 2.7764451, 1e-6, ""); /* t(.975, 4), SciPy */
	/* Welch-Satterthwaite (JCGM 100 G.4.1): u 1 and 1 with 4 and 4 degrees give 8. */
	budget_random(&budget, 1, 4);
	assert_near(budget.nu, 8, 1e-12, "");
	budget_other(&budget, 10);
	assert_near(budget_expanded(&budget), 2 * sqrt(102), 0.01, "");
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(mean_sd_and_autocorrelation_are_those_certified_by_nist),
	    cmocka_unit_test(a_small_spread_far_from_zero_is_kept),
	    cmocka_unit_test(slope_and_its_error_are_those_certified_by_nist),
	    cmocka_unit_test(quantiles_are_those_of_the_tables),
	    cmocka_unit_test(distribution_and_quantile_undo_each_other),
	    cmocka_unit_test(mean_directions_are_the_published_ones),
	    cmocka_unit_test(opposite_directions_have_no_mean),
	    cmocka_unit_test(wrapping_keeps_to_half_a_turn),
	    cmocka_unit_test(correlation_makes_fewer_independent_rows),
	    cmocka_unit_test(steadiness_is_proven_and_not_assumed),
	    cmocka_unit_test(rounding_leaves_half_a_step_without_noise_and_nothing_with),
	    cmocka_unit_test(coverage_factor_is_at_least_two_and_grows_with_few_rows),
	};
	return RUN_GROUP(tests);
}
