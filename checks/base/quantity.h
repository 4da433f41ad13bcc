/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_QUANTITY_H
#define DRIVETRIAL_QUANTITY_H
/*
 * Quantities with units: "1500 rpm", "2 ms", "3.4 A_rms".
 *
 * Inside the program everything is SI: rad, rad/s, A, V, N m, degrees Celsius
 * (a temperature and a temperature difference are not told apart, so K is
 * offered for differences and has the same scale). Times are int64
 * nanoseconds. Units are what the user wrote, at the edges only.
 *
 * Two things are part of a dimension that SI does not tell apart:
 *  - mechanical or electrical, of angles and speeds. `deg`, `rad`, `rad/s`
 *    say neither and agree with both; `deg_mech` never agrees with `deg_el`.
 *  - instantaneous value or amplitude of a sinusoid, of currents, voltages
 *    and fluxes. `A` is instantaneous or direct current; `A_peak` and `A_rms`
 *    are amplitudes (A_rms is the square root of 2 times as many A_peak), and
 *    `A` never agrees with either.
 *
 * All functions are pure; units are static and are never freed.
 */
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "err.h"

enum dimension_sort { SORT_PLAIN = 0, SORT_MECHANICAL, SORT_ELECTRICAL, SORT_AMPLITUDE };

struct dimension {
	int8_t metre, kilogram, second, ampere, kelvin, radian; /* exponents */
	uint8_t sort;                                           /* enum dimension_sort */
};

struct unit {
	const char *name; /* as written in files: "rpm" */
	struct dimension dimension;
	double scale;     /* SI value of one of it */
	const char *text; /* one line for the reference */
};

struct quantity {
	double value; /* as written, in `unit` */
	const struct unit *unit;
};

#define NS_PER_US INT64_C(1000)
#define NS_PER_MS INT64_C(1000000)
#define NS_PER_S  INT64_C(1000000000)
/* The longest time a file may give: 366 days. */
#define NS_MOST (INT64_C(366) * 86400 * NS_PER_S)

/* Dimensions by name, for tables. */
extern const struct dimension DIM_NUMBER, DIM_TIME, DIM_ANGLE, DIM_ANGLE_MECH, DIM_ANGLE_ELEC,
    DIM_SPEED, DIM_SPEED_MECH, DIM_SPEED_ELEC, DIM_ACCELERATION, DIM_FREQUENCY, DIM_CURRENT,
    DIM_CURRENT_AMPLITUDE, DIM_VOLTAGE, DIM_VOLTAGE_AMPLITUDE, DIM_FLUX_AMPLITUDE, DIM_TORQUE,
    DIM_TEMPERATURE, DIM_INDUCTANCE, DIM_RESISTANCE, DIM_CAPACITANCE, DIM_INERTIA, DIM_POWER,
    DIM_ENERGY, DIM_STIFFNESS, DIM_VISCOUS, DIM_THERMAL_RESISTANCE, DIM_THERMAL_CAPACITANCE,
    DIM_TORQUE_PER_CURRENT;

/* The whole table; *ret_count rows, in the order of the reference page. */
const struct unit *unit_table(size_t *ret_count);
/* The unit of that name, or NULL. */
const struct unit *unit_find(const char *name, size_t length);
/* "1", the unit of plain numbers, and "%". */
const struct unit *unit_one(void);
const struct unit *unit_percent(void);
/* The unit in which a dimension is shown when nobody said one, or NULL. */
const struct unit *unit_default(struct dimension dimension);

/*
 * Whether values of the two dimensions may be compared: equal exponents, and
 * equal sorts. Of angles and speeds (radian exponent not 0) plain agrees with
 * mechanical and electrical.
 */
bool dimension_agrees(struct dimension a, struct dimension b);
/* "angle (mechanical)", "time", or exponents where it has no name; static or in buffer. */
const char *dimension_name(struct dimension dimension, char *buffer, size_t size);

/*
 * Parses a number in the form of YAML 1.2 core or JSON: sign, digits without a
 * leading zero, fraction, exponent. No hexadecimal, underscore, colon, inf or
 * nan: the message says what to write instead. bytes need no NUL.
 * Errors: ERR_FILE, position left 0.
 */
int number_parse(const char *bytes, size_t length, double *ret_number, struct err *reterr);

/*
 * Parses "NUMBER", "NUMBER UNIT" or "NUMBERUNIT". A bare number is in `bare`;
 * with bare NULL a unit is demanded (but 0 of it needs none when `wanted` is
 * given). wanted: the dimension that it must agree with, or NULL for any.
 * Errors: ERR_FILE with a message that names the units that would fit.
 */
int quantity_parse(const char *bytes, size_t length, const struct unit *bare,
                   const struct dimension *wanted, struct quantity *ret_quantity,
                   struct err *reterr);

/* The value in SI, and the value in another unit (which must agree). */
double quantity_si(struct quantity quantity);
double quantity_in(struct quantity quantity, const struct unit *unit);

/*
 * A time in nanoseconds, rounded to nearest. Errors: negative, above NS_MOST,
 * or above zero but rounded to 0.
 */
int quantity_ns(struct quantity quantity, int64_t *ret_ns, struct err *reterr);

/* Writes e.g. "1.5 ms", "320 us", "2 min 5 s" into buffer and returns it. */
const char *duration_text(int64_t ns, char *buffer, size_t size);

#endif
