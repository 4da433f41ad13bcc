/* SPDX-License-Identifier: Apache-2.0 */
/* Numbers, units and times as files write them. */
#include "near.h"

#include <string.h>

#include "quantity.h"

static void parses_numbers_of_json_and_yaml(void **state)
{
	(void)state;
	static const struct {
		const char *text;
		double value;
	} rows[] = {
	    {"0", 0},      {"-0", 0},          {"7", 7},     {"-12.5", -12.5},
	    {"1e3", 1000}, {"1.5E-3", 0.0015}, {"0.2", 0.2}, {"123456789012", 123456789012.0},
	};
	for (size_t i = 0; i < sizeof rows / sizeof rows[0]; i++) {
		double number = -1;
		struct err err = {0};
		assert_int_equal(number_parse(rows[i].text, strlen(rows[i].text), &number, &err), 0);
		assert_near(number, rows[i].value, 0, "");
	}
}

static void refuses_other_numbers_with_what_to_write(void **state)
{
	(void)state;
	static const struct {
		const char *text, *hint;
	} rows[] = {
	    {"", "missing"},          {"010", "leading zero"},  {"0x10", "decimal"},
	    {"0b1", "decimal"},       {"1_000", "underscores"}, {"1:30", "90 s"},
	    {"1,5", "decimal point"}, {".5", "digit before"},   {"+5", "not a number"},
	    {"inf", "not a number"},  {"nan", "not a number"},  {"1e", "not a number"},
	    {"5.", "not a number"},   {"1e999", "too large"},   {"--1", "not a number"},
	};
	for (size_t i = 0; i < sizeof rows / sizeof rows[0]; i++) {
		double number;
		struct err err = {0};
		assert_int_equal(number_parse(rows[i].text, strlen(rows[i].text), &number, &err), -1);
		assert_int_equal(err.code, ERR_FILE);
		if (!strstr(err.message, rows[i].hint))
			fail_msg("'%s': '%s' does not say '%s'", rows[i].text, err.message, rows[i].hint);
	}
}

static struct quantity parsed(const char *text, const struct unit *bare,
                              const struct dimension *wanted)
{
	struct quantity quantity = {0};
	struct err err = {0};
	if (quantity_parse(text, strlen(text), bare, wanted, &quantity, &err) < 0)
		fail_msg("'%s': %s", text, err.message);
	return quantity;
}

static void refused(const char *text, const struct unit *bare, const struct dimension *wanted,
                    const char *hint)
{
	struct quantity quantity;
	struct err err = {0};
	assert_int_equal(quantity_parse(text, strlen(text), bare, wanted, &quantity, &err), -1);
	if (!strstr(err.message, hint))
		fail_msg("'%s': '%s' does not say '%s'", text, err.message, hint);
}

static void brings_units_to_si(void **state)
{
	(void)state;
	/* Definitions of the units; 2 pi / 60 and the square root of 2 computed to 17 digits. */
	assert_near(quantity_si(parsed("1500 rpm", NULL, &DIM_SPEED_MECH)), 157.07963267948966, 1e-12,
	            "rad/s");
	assert_near(quantity_si(parsed("3.4 A_rms", NULL, &DIM_CURRENT_AMPLITUDE)), 4.808326112068523,
	            1e-14, "A");
	assert_near(quantity_si(parsed("90deg", NULL, &DIM_ANGLE)), 1.5707963267948966, 1e-15, "rad");
	assert_near(quantity_si(parsed("5 %", unit_one(), &DIM_NUMBER)), 0.05, 1e-17, "");
	assert_near(quantity_si(parsed("3.1 mH", NULL, &DIM_INDUCTANCE)), 0.0031, 1e-17, "H");
	assert_near(quantity_si(parsed("2 Nm/A_rms", NULL, &DIM_TORQUE_PER_CURRENT)),
	            1.4142135623730951, 1e-15, "Nm/A");
}

static void converts_between_units_of_one_dimension(void **state)
{
	(void)state;
	assert_near(quantity_in(parsed("1 turn", NULL, NULL), unit_find("deg_mech", 8)), 360, 1e-12,
	            "deg");
	assert_near(quantity_in(parsed("1.2 Nm", NULL, NULL), unit_find("mNm", 3)), 1200, 1e-9, "mNm");
	/* The same unit changes nothing, not even the last bit. */
	assert_true(quantity_in(parsed("0.1 rpm", NULL, NULL), unit_find("rpm", 3)) == 0.1);
}

static void takes_a_bare_number_in_the_unit_of_the_field(void **state)
{
	(void)state;
	const struct unit *rpm = unit_find("rpm", 3);
	assert_true(parsed("-3300", rpm, &DIM_SPEED_MECH).unit == rpm);
	/* Nothing needs no unit. */
	assert_near(quantity_si(parsed("0", NULL, &DIM_TORQUE)), 0, 0, "Nm");
	refused("5", NULL, &DIM_TORQUE, "Nm");
}

static void refuses_units_that_do_not_fit(void **state)
{
	(void)state;
	refused("5 rpm", NULL, &DIM_TIME, "expected a time in ms");
	refused("5 sec", NULL, &DIM_TIME, "unknown unit 'sec'");
	refused("3.4 A", NULL, &DIM_CURRENT_AMPLITUDE, "A_peak, A_rms");
	refused("5 A_rms", NULL, &DIM_CURRENT, "A, mA");
	refused("90 deg_mech", NULL, &DIM_ANGLE_ELEC, "angle (electrical)");
	refused("90 rad", NULL, &DIM_TIME, "expected a time");
	refused("1500\xC2\xA0rpm", NULL, &DIM_SPEED, "no-break space");
	refused("1500  rpm", NULL, &DIM_SPEED, "");
	refused("", NULL, &DIM_SPEED, "missing");
	refused("010 ms", NULL, &DIM_TIME, "leading zero");
	refused("1:30", NULL, &DIM_TIME, "90 s");
}

static void tells_mechanical_from_electrical(void **state)
{
	(void)state;
	assert_true(dimension_agrees(DIM_ANGLE, DIM_ANGLE_ELEC));
	assert_true(dimension_agrees(DIM_ANGLE_MECH, DIM_ANGLE));
	assert_false(dimension_agrees(DIM_ANGLE_MECH, DIM_ANGLE_ELEC));
	assert_false(dimension_agrees(DIM_SPEED_MECH, DIM_SPEED_ELEC));
	assert_false(dimension_agrees(DIM_CURRENT, DIM_CURRENT_AMPLITUDE));
	assert_false(dimension_agrees(DIM_TORQUE, DIM_ENERGY));
	assert_false(dimension_agrees(DIM_SPEED, DIM_FREQUENCY));
}

static void brings_times_to_nanoseconds(void **state)
{
	(void)state;
	static const struct {
		const char *text;
		int64_t ns;
	} rows[] = {
	    {"0 s", 0},
	    {"1 ns", 1},
	    {"0.6 ns", 1},
	    {"2.5 us", 2500},
	    {"1.1 ms", 1100000},
	    {"200 ms", 200 * NS_PER_MS},
	    {"1.5 s", 1500 * NS_PER_MS},
	    {"10 min", 600 * NS_PER_S},
	    {"8784 h", NS_MOST},
	};
	for (size_t i = 0; i < sizeof rows / sizeof rows[0]; i++) {
		int64_t ns = -1;
		struct err err = {0};
		assert_int_equal(quantity_ns(parsed(rows[i].text, NULL, &DIM_TIME), &ns, &err), 0);
		assert_int_equal(ns, rows[i].ns);
	}
	static const char *const bad[] = {"-1 ms", "0.4 ns", "8785 h"};
	for (size_t i = 0; i < sizeof bad / sizeof bad[0]; i++) {
		int64_t ns;
		struct err err = {0};
		assert_int_equal(quantity_ns(parsed(bad[i], NULL, &DIM_TIME), &ns, &err), -1);
	}
}

static void writes_times_for_people(void **state)
{
	(void)state;
	static const struct {
		int64_t ns;
		const char *text;
	} rows[] = {
	    {0, "0 ns"},
	    {320 * NS_PER_US, "320 us"},
	    {1500 * NS_PER_US, "1.5 ms"},
	    {2 * NS_PER_S, "2 s"},
	    {-2 * NS_PER_S, "-2 s"},
	    {125 * NS_PER_S, "2 min 5 s"},
	    {7260 * NS_PER_S, "2 h 1 min"},
	};
	for (size_t i = 0; i < sizeof rows / sizeof rows[0]; i++) {
		char buffer[40];
		assert_string_equal(duration_text(rows[i].ns, buffer, sizeof buffer), rows[i].text);
	}
}

static void has_one_row_a_unit(void **state)
{
	(void)state;
	size_t count;
	const struct unit *units = unit_table(&count);
	assert_true(count > 40);
	for (size_t i = 0; i < count; i++) {
		assert_true(unit_find(units[i].name, strlen(units[i].name)) == &units[i]);
		assert_true(units[i].scale > 0);
		char buffer[96];
		/* Every dimension has a name that messages can say. */
		assert_null(strchr(dimension_name(units[i].dimension, buffer, sizeof buffer), '^'));
		assert_non_null(unit_default(units[i].dimension));
	}
	assert_null(unit_find("furlong", 7));
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(parses_numbers_of_json_and_yaml),
	    cmocka_unit_test(refuses_other_numbers_with_what_to_write),
	    cmocka_unit_test(brings_units_to_si),
	    cmocka_unit_test(converts_between_units_of_one_dimension),
	    cmocka_unit_test(takes_a_bare_number_in_the_unit_of_the_field),
	    cmocka_unit_test(refuses_units_that_do_not_fit),
	    cmocka_unit_test(tells_mechanical_from_electrical),
	    cmocka_unit_test(brings_times_to_nanoseconds),
	    cmocka_unit_test(writes_times_for_people),
	    cmocka_unit_test(has_one_row_a_unit),
	};
	return RUN_GROUP(tests);
}
