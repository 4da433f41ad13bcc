/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Derived channels. Vectors by hand (amplitude-invariant Clarke and Park, as
 * in the textbooks; confirmed independently with SciPy).
 */
#include "derive.h"
#include "recording.h"

#define PI 3.14159265358979323846

static struct derivation derivation_of(const char *name, size_t inputs)
{
	struct derivation derivation = {.kind = derive_find(name, strlen(name))};
	assert_non_null(derivation.kind);
	for (size_t i = 0; i < DERIVE_INPUTS_MOST; i++)
		derivation.inputs[i] = i < inputs ? (int)i : -1;
	return derivation;
}

static double compute(const char *name, const char *const *units, const double *values,
                      size_t count, const char *unit, double offset)
{
	static const struct machine machine = {.pole_pairs = 4, .encoder_lines = 1024};
	struct derivation derivation = derivation_of(name, count);
	derivation.offset = offset;
	struct channel_info infos[DERIVE_INPUTS_MOST] = {{0}};
	for (size_t i = 0; i < count; i++)
		infos[i].unit = unit_find(units[i], strlen(units[i]));
	struct channel_info result = {.name = name, .unit = unit_find(unit, strlen(unit))};
	return derive_value(&derivation, infos, values, &result, &machine);
}

static const char *const amplitudes[] = {"A_peak", "A_peak", "A_peak", "A_peak"};
static const char *const phases[] = {"A", "A", "deg_el", "A"};
static const char *const currents[] = {"A", "A", "A"};
static const char *const counts[] = {"counts"};

static void angles_of_components_are_atan2(void **state)
{
	(void)state;
	assert_near(compute("angle_of", amplitudes, (double[]){0, 5}, 2, "deg", 0), 90, 1e-12, "deg");
	assert_near(compute("angle_of", amplitudes, (double[]){0, -5}, 2, "deg", 0), -90, 1e-12, "deg");
	/* I 50 A at i_d -25: the angle of largest torque per ampere of L_d 1 mH, L_q 3 mH is 120 deg.
	 */
	assert_near(compute("angle_of", amplitudes, (double[]){-25, 43.301270189}, 2, "deg", 0), 120,
	            1e-8, "deg");
	assert_near(compute("angle_of", amplitudes, (double[]){-1, 0}, 2, "deg_el", 0), 180, 1e-12, "");
	assert_true(isnan(compute("angle_of", amplitudes, (double[]){0, 0}, 2, "deg", 0)));
	assert_true(isnan(compute("angle_of", amplitudes, (double[]){(double)NAN, 1}, 2, "deg", 0)));
	assert_near(compute("magnitude_of", amplitudes, (double[]){3, 4}, 2, "A_peak", 0), 5, 1e-12,
	            "");
	assert_near(compute("magnitude_of", amplitudes, (double[]){3, 4}, 2, "A_rms", 0), 5 / sqrt(2),
	            1e-12, "");
}

static void phase_currents_give_the_vector(void **state)
{
	(void)state;
	/* 10 A at 80 deg with the rotor at 50 deg: 30 deg lead. */
	const double abc[] = {1.736481777, 7.660444431, -9.396926208};
	assert_near(
	    compute("vector_angle", phases, (double[]){abc[0], abc[1], 50, abc[2]}, 4, "deg", 0), 30,
	    1e-7, "deg");
	assert_near(compute("vector_angle", phases, (double[]){abc[0], abc[1], 50}, 3, "deg", 0), 30,
	            1e-7, "deg");
	assert_near(compute("vector_magnitude", currents, abc, 3, "A_peak", 0), 10, 1e-8, "A");
	assert_near(compute("vector_magnitude", currents, abc, 2, "A_peak", 0), 10, 1e-8, "A");
	assert_near(compute("vector_magnitude", currents, (double[]){10, -5, -5}, 3, "A_peak", 0), 10,
	            1e-12, "A");
	/* A common part of the three phases makes no vector. */
	assert_near(compute("vector_magnitude", currents, (double[]){11, -4, -4}, 3, "A_peak", 0), 10,
	            1e-12, "A");
	assert_true(isnan(compute("vector_angle", phases, (double[]){0, 0, 20, 0}, 4, "deg", 0)));
}

static void encoder_counts_are_angles(void **state)
{
	(void)state;
	/* 1024 lines, 4 counts each, 4 pole pairs. */
	static const struct {
		double count, mechanical, electrical, offset;
	} rows[] = {{1000, 87.890625, 351.5625, 0},
	            {512, 45, 180, 0},
	            {1536, 126.2109375, 144.84375, 100 * 360.0 / 4096}};
	for (size_t i = 0; i < 3; i++) {
		double offset = rows[i].offset * PI / 180;
		double mechanical = compute("encoder_angle", counts, &rows[i].count, 1, "deg_mech", offset);
		double electrical =
		    compute("encoder_angle_elec", counts, &rows[i].count, 1, "deg_el", 4 * offset);
		assert_near(remainder(mechanical - rows[i].mechanical, 360), 0, 1e-9, "deg");
		assert_near(remainder(electrical - rows[i].electrical, 360), 0, 1e-9, "deg");
		assert_true(fabs(mechanical) <= 180 && fabs(electrical) <= 180);
	}
}

static void arithmetic_keeps_to_units(void **state)
{
	(void)state;
	static const char *const power[] = {"Nm", "rpm"};
	static const char *const torques[] = {"Nm", "mNm", "Nm", "Nm"};
	static const char *const angles[] = {"deg", "deg"};
	assert_near(compute("mechanical_power", power, (double[]){2.4, 3000}, 2, "W", 0),
	            2.4 * 100 * PI, 1e-9, "W");
	assert_near(compute("mechanical_power", power, (double[]){-2.4, 3000}, 2, "kW", 0), -0.24 * PI,
	            1e-12, "kW");
	assert_near(compute("sum", torques, (double[]){1, 500}, 2, "Nm", 0), 1.5, 1e-12, "");
	assert_near(compute("sum", torques, (double[]){1, 500, 2, 3}, 4, "Nm", 0), 6.5, 1e-12, "");
	assert_near(compute("difference", torques, (double[]){1, 500}, 2, "Nm", 0.25), 0.25, 1e-12, "");
	assert_near(compute("ratio", torques, (double[]){1, 500}, 2, "1", 0), 2, 1e-12, "");
	assert_true(isnan(compute("ratio", torques, (double[]){1, 0}, 2, "1", 0)));
	assert_near(compute("product", power, (double[]){2, 3}, 2, "1", 0), 2 * 3 * PI / 30, 1e-12, "");
	assert_near(compute("angle_between", angles, (double[]){170, -170}, 2, "deg", 0), -20, 1e-12,
	            "");
}

static void inputs_of_the_wrong_dimension_are_refused(void **state)
{
	(void)state;
	static const struct {
		const char *kind;
		const struct dimension *inputs[4];
		size_t count;
		const char *says;
	} rows[] = {
	    {"angle_of", {&DIM_CURRENT_AMPLITUDE, &DIM_VOLTAGE}, 2, "one dimension"},
	    {"vector_angle",
	     {&DIM_CURRENT_AMPLITUDE, &DIM_CURRENT_AMPLITUDE, &DIM_ANGLE_ELEC},
	     3,
	     "instantaneous"},
	    {"vector_angle", {&DIM_CURRENT, &DIM_CURRENT, &DIM_ANGLE_MECH}, 3, "angle must be"},
	    {"vector_angle",
	     {&DIM_CURRENT, &DIM_CURRENT, &DIM_ANGLE_ELEC, &DIM_VOLTAGE},
	     4,
	     "one dimension"},
	    {"vector_magnitude", {&DIM_CURRENT, &DIM_TORQUE}, 2, "one dimension"},
	    {"angle_between", {&DIM_ANGLE_MECH, &DIM_ANGLE_ELEC}, 2, "one dimension"},
	    {"angle_between", {&DIM_TORQUE, &DIM_TORQUE}, 2, "a must be"},
	    {"encoder_angle", {&DIM_TORQUE}, 1, "counts must be"},
	    {"encoder_angle_elec", {&DIM_ANGLE}, 1, "counts must be"},
	    {"mechanical_power", {&DIM_TORQUE, &DIM_SPEED_ELEC}, 2, "speed must be"},
	    {"mechanical_power", {&DIM_POWER, &DIM_SPEED_MECH}, 2, "torque must be"},
	    {"difference", {&DIM_TORQUE, &DIM_POWER}, 2, "one dimension"},
	};
	for (size_t i = 0; i < sizeof rows / sizeof rows[0]; i++) {
		struct dimension inputs[4] = {{0}}, result;
		for (size_t k = 0; k < rows[i].count; k++)
			inputs[k] = *rows[i].inputs[k];
		struct err err = {0};
		const struct derive_kind *kind = derive_find(rows[i].kind, strlen(rows[i].kind));
		assert_int_equal(kind->dimension(inputs, rows[i].count, &result, &err), -1);
		if (!strstr(err.message, rows[i].says))
			fail_msg("%s: %s", rows[i].kind, err.message);
	}
}

static void results_have_a_dimension(void **state)
{
	(void)state;
	struct dimension result;
	const struct dimension phase[] = {DIM_CURRENT, DIM_CURRENT, DIM_ANGLE, DIM_CURRENT};
	const struct dimension power[] = {DIM_TORQUE, DIM_SPEED_MECH};
	assert_int_equal(derive_find("vector_angle", 12)->dimension(phase, 4, &result, NULL), 0);
	assert_true(dimension_agrees(result, DIM_ANGLE_ELEC));
	const struct dimension three[] = {DIM_CURRENT, DIM_CURRENT, DIM_CURRENT};
	assert_int_equal(derive_find("vector_magnitude", 16)->dimension(three, 3, &result, NULL), 0);
	assert_true(dimension_agrees(result, DIM_CURRENT_AMPLITUDE));
	assert_int_equal(derive_find("ratio", 5)->dimension(power, 2, &result, NULL), 0);
	assert_false(dimension_agrees(result, DIM_NUMBER));
	const struct dimension same[] = {DIM_TORQUE, DIM_TORQUE};
	assert_int_equal(derive_find("ratio", 5)->dimension(same, 2, &result, NULL), 0);
	assert_true(dimension_agrees(result, DIM_NUMBER));
	assert_null(derive_find("angle", 5));
	size_t count;
	const struct derive_kind *const *table = derive_table(&count);
	for (size_t i = 0; i < count; i++)
		for (size_t k = 0; k < table[i]->required; k++)
			assert_non_null(table[i]->inputs[k]);
}

static void limits_of_error_are_carried_through(void **state)
{
	(void)state;
	struct recording rec;
	recording_init(&rec);
	int d = recording_channel(&rec, "d", "A_peak", EVIDENCE_SELF_REPORTED);
	int q = recording_channel(&rec, "q", "A_peak", EVIDENCE_SELF_REPORTED);
	int a = recording_channel(&rec, "angle", "deg", EVIDENCE_SELF_REPORTED);
	rec.channels[d].resolution = 0.02;
	rec.channels[d].refresh_ns = MS(1);
	rec.channels[q].accuracy = (struct accuracy){.given = true, .absolute = 0.03};
	recording_add(&rec, d, MS(1), MS(2), 0);
	recording_add(&rec, q, MS(1), MS(2), 5);
	rec.series[q].block = rec.series[d].block;
	struct derivation derivation = derivation_of("angle_of", 2);
	const struct series *inputs[DERIVE_INPUTS_MOST] = {&rec.series[d], &rec.series[q]};
	struct series series;
	assert_int_equal(derive_series(&derivation, inputs, &rec.channels[a], &rec.machine, &rec.arena,
	                               &series, NULL),
	                 0);
	assert_near(series_value(&series, 0), 90, 1e-12, "deg");
	/* atan(0.01/5) by d; q moves nothing at 90 deg. */
	assert_near(series.extra[0], atan(0.01 / 5) * 180 / PI, 1e-9, "deg");
	assert_int_equal(series_earliest(&series, 0), MS(0));
	assert_int_equal(series_latest(&series, 0), MS(2));
	recording_release(&rec);
}

static void unequal_times_cost_the_rate_of_change(void **state)
{
	(void)state;
	struct recording rec;
	recording_init(&rec);
	int x = recording_channel(&rec, "x", "Nm", EVIDENCE_INDEPENDENT);
	int y = recording_channel(&rec, "y", "Nm", EVIDENCE_INDEPENDENT);
	int s = recording_channel(&rec, "s", "Nm", EVIDENCE_INDEPENDENT);
	for (int i = 0; i < 10; i++) {
		recording_add(&rec, x, MS(10 * i), MS(10 * i + 2), 1); /* true at 10 i + 1 +- 1 ms */
		if (i < 5 || i == 9)
			recording_add(&rec, y, MS(10 * i + 4), MS(10 * i + 6), i); /* 0.1 per ms */
	}
	struct derivation derivation = derivation_of("sum", 2);
	const struct series *inputs[DERIVE_INPUTS_MOST] = {&rec.series[x], &rec.series[y]};
	struct series series;
	assert_int_equal(derive_series(&derivation, inputs, &rec.channels[s], &rec.machine, &rec.arena,
	                               &series, NULL),
	                 0);
	assert_true(isnan(series_value(&series, 0))); /* nothing of y before it */
	assert_near(series_value(&series, 1), 1 + 0.6, 1e-12, "Nm");
	assert_near(series.extra[1], 0.1 * (1 + 1), 1e-12, "Nm");
	recording_release(&rec);
}

static void a_gap_in_another_block_is_not_bridged(void **state)
{
	(void)state;
	struct recording rec;
	recording_init(&rec);
	int x = recording_channel(&rec, "x", "Nm", EVIDENCE_INDEPENDENT);
	int y = recording_channel(&rec, "y", "Nm", EVIDENCE_INDEPENDENT);
	int s = recording_channel(&rec, "s", "Nm", EVIDENCE_INDEPENDENT);
	for (int i = 0; i < 100; i++) {
		recording_at(&rec, x, MS(i), 1);
		if (i < 40 || i >= 60)
			recording_at(&rec, y, MS(i + 0.5), 2);
	}
	struct derivation derivation = derivation_of("sum", 2);
	const struct series *inputs[DERIVE_INPUTS_MOST] = {&rec.series[x], &rec.series[y]};
	struct series series;
	assert_int_equal(derive_series(&derivation, inputs, &rec.channels[s], &rec.machine, &rec.arena,
	                               &series, NULL),
	                 0);
	assert_near(series_value(&series, 20), 3, 1e-12, "Nm");
	assert_true(isnan(series_value(&series, 50)));
	assert_near(series_value(&series, 80), 3, 1e-12, "Nm");
	arena_fail_at(1);
	struct err err = {0};
	assert_int_equal(derive_series(&derivation, inputs, &rec.channels[s], &rec.machine, &rec.arena,
	                               &series, &err),
	                 -1);
	arena_fail_at(0);
	assert_int_equal(err.code, ERR_NOMEM);
	recording_release(&rec);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(angles_of_components_are_atan2),
	    cmocka_unit_test(phase_currents_give_the_vector),
	    cmocka_unit_test(encoder_counts_are_angles),
	    cmocka_unit_test(arithmetic_keeps_to_units),
	    cmocka_unit_test(inputs_of_the_wrong_dimension_are_refused),
	    cmocka_unit_test(results_have_a_dimension),
	    cmocka_unit_test(limits_of_error_are_carried_through),
	    cmocka_unit_test(unequal_times_cost_the_rate_of_change),
	    cmocka_unit_test(a_gap_in_another_block_is_not_bridged),
	};
	return RUN_GROUP(tests);
}
