/* SPDX-License-Identifier: Apache-2.0 */
/*
 * One table of units. strtod alone was rejected for numbers: it takes "0x10",
 * "inf", "1e" prefixes and the locale's decimal sign. The form is checked
 * first; strtod then only sees digits, in a copy, and the program never calls
 * setlocale(), so the decimal sign is the point.
 */
#include "quantity.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "text.h"

#define PI 3.14159265358979323846

/* clang-format off */
/*                              m  kg   s   A  K rad sort */
#define D_NUMBER               {0, 0,  0,  0, 0, 0, SORT_PLAIN}
#define D_TIME                 {0, 0,  1,  0, 0, 0, SORT_PLAIN}
#define D_ANGLE                {0, 0,  0,  0, 0, 1, SORT_PLAIN}
#define D_ANGLE_MECH           {0, 0,  0,  0, 0, 1, SORT_MECHANICAL}
#define D_ANGLE_ELEC           {0, 0,  0,  0, 0, 1, SORT_ELECTRICAL}
#define D_SPEED                {0, 0, -1,  0, 0, 1, SORT_PLAIN}
#define D_SPEED_MECH           {0, 0, -1,  0, 0, 1, SORT_MECHANICAL}
#define D_SPEED_ELEC           {0, 0, -1,  0, 0, 1, SORT_ELECTRICAL}
#define D_ACCELERATION         {0, 0, -2,  0, 0, 1, SORT_PLAIN}
#define D_FREQUENCY            {0, 0, -1,  0, 0, 0, SORT_PLAIN}
#define D_CURRENT              {0, 0,  0,  1, 0, 0, SORT_PLAIN}
#define D_CURRENT_AMPLITUDE    {0, 0,  0,  1, 0, 0, SORT_AMPLITUDE}
#define D_VOLTAGE              {2, 1, -3, -1, 0, 0, SORT_PLAIN}
#define D_VOLTAGE_AMPLITUDE    {2, 1, -3, -1, 0, 0, SORT_AMPLITUDE}
#define D_FLUX_AMPLITUDE       {2, 1, -2, -1, 0, 0, SORT_AMPLITUDE}
#define D_TORQUE               {2, 1, -2,  0, 0, 0, SORT_PLAIN}
#define D_TEMPERATURE          {0, 0,  0,  0, 1, 0, SORT_PLAIN}
#define D_INDUCTANCE           {2, 1, -2, -2, 0, 0, SORT_PLAIN}
#define D_RESISTANCE           {2, 1, -3, -2, 0, 0, SORT_PLAIN}
#define D_CAPACITANCE          {-2, -1, 4, 2, 0, 0, SORT_PLAIN}
#define D_INERTIA              {2, 1,  0,  0, 0, 0, SORT_PLAIN}
#define D_POWER                {2, 1, -3,  0, 0, 0, SORT_PLAIN}
#define D_ENERGY               {2, 1, -2,  0, 0, 0, SORT_MECHANICAL}
#define D_STIFFNESS            {2, 1, -2,  0, 0, -1, SORT_PLAIN}
#define D_VISCOUS              {2, 1, -1,  0, 0, 0, SORT_PLAIN}
#define D_THERMAL_RESISTANCE   {-2, -1, 3, 0, 1, 0, SORT_PLAIN}
#define D_THERMAL_CAPACITANCE  {2, 1, -2,  0, -1, 0, SORT_PLAIN}
#define D_TORQUE_PER_CURRENT   {2, 1, -2, -1, 0, 0, SORT_PLAIN}

#define DEFINE(name) const struct dimension DIM_##name = D_##name;
DEFINE(NUMBER) DEFINE(TIME) DEFINE(ANGLE) DEFINE(ANGLE_MECH) DEFINE(ANGLE_ELEC)
DEFINE(SPEED) DEFINE(SPEED_MECH) DEFINE(SPEED_ELEC) DEFINE(ACCELERATION) DEFINE(FREQUENCY)
DEFINE(CURRENT) DEFINE(CURRENT_AMPLITUDE) DEFINE(VOLTAGE) DEFINE(VOLTAGE_AMPLITUDE)
DEFINE(FLUX_AMPLITUDE) DEFINE(TORQUE) DEFINE(TEMPERATURE) DEFINE(INDUCTANCE)
DEFINE(RESISTANCE) DEFINE(CAPACITANCE) DEFINE(INERTIA) DEFINE(POWER) DEFINE(ENERGY)
DEFINE(STIFFNESS) DEFINE(VISCOUS) DEFINE(THERMAL_RESISTANCE) DEFINE(THERMAL_CAPACITANCE)
DEFINE(TORQUE_PER_CURRENT)
#undef DEFINE

/* The first row of a dimension is its default unit. */
static const struct unit UNITS[] = {
	{"1",        D_NUMBER, 1, "plain number"},
	{"%",        D_NUMBER, 0.01, "hundredth"},
	{"counts",   D_NUMBER, 1, "encoder counts (4 per pulse)"},
	{"ms",       D_TIME, 1e-3, "millisecond"},
	{"ns",       D_TIME, 1e-9, "nanosecond"},
	{"us",       D_TIME, 1e-6, "microsecond"},
	{"s",        D_TIME, 1, "second"},
	{"min",      D_TIME, 60, "minute"},
	{"h",        D_TIME, 3600, "hour"},
	{"deg",      D_ANGLE, PI / 180, "degree; the field says whether mechanical or electrical"},
	{"rad",      D_ANGLE, 1, "radian; the field says whether mechanical or electrical"},
	{"deg_el",   D_ANGLE_ELEC, PI / 180, "degree, electrical"},
	{"rad_el",   D_ANGLE_ELEC, 1, "radian, electrical"},
	{"deg_mech", D_ANGLE_MECH, PI / 180, "degree, mechanical"},
	{"rad_mech", D_ANGLE_MECH, 1, "radian, mechanical"},
	{"turn",     D_ANGLE_MECH, 2 * PI, "revolution of the shaft"},
	{"rad/s",    D_SPEED, 1, "radian per second; the field says which"},
	{"rpm",      D_SPEED_MECH, 2 * PI / 60, "revolutions of the shaft per minute"},
	{"rad/s_mech", D_SPEED_MECH, 1, "radian per second, mechanical"},
	{"rad/s_el", D_SPEED_ELEC, 1, "radian per second, electrical"},
	{"rpm/s",    D_ACCELERATION, 2 * PI / 60, "revolutions per minute, per second"},
	{"rad/s2",   D_ACCELERATION, 1, "radian per second squared"},
	{"Hz",       D_FREQUENCY, 1, "cycles per second"},
	{"kHz",      D_FREQUENCY, 1e3, "thousand cycles per second"},
	{"A",        D_CURRENT, 1, "ampere, instantaneous or direct current"},
	{"mA",       D_CURRENT, 1e-3, "milliampere, instantaneous or direct current"},
	{"A_peak",   D_CURRENT_AMPLITUDE, 1, "ampere, amplitude of a sinusoid or of a space vector"},
	{"A_rms",    D_CURRENT_AMPLITUDE, 1.41421356237309504880, "ampere, rms of a sinusoid"},
	{"V",        D_VOLTAGE, 1, "volt, instantaneous or direct voltage"},
	{"mV",       D_VOLTAGE, 1e-3, "millivolt"},
	{"V_peak",   D_VOLTAGE_AMPLITUDE, 1, "volt, amplitude of a sinusoid or of a space vector"},
	{"V_rms",    D_VOLTAGE_AMPLITUDE, 1.41421356237309504880, "volt, rms of a sinusoid"},
	{"Wb_peak",  D_FLUX_AMPLITUDE, 1, "weber, amplitude of the flux linkage of a phase"},
	{"mWb_peak", D_FLUX_AMPLITUDE, 1e-3, "milliweber, amplitude"},
	{"Wb_rms",   D_FLUX_AMPLITUDE, 1.41421356237309504880, "weber, rms"},
	{"Nm",       D_TORQUE, 1, "newton metre"},
	{"mNm",      D_TORQUE, 1e-3, "millinewton metre"},
	{"degC",     D_TEMPERATURE, 1, "degree Celsius"},
	{"K",        D_TEMPERATURE, 1, "kelvin, for differences of temperature"},
	{"mH",       D_INDUCTANCE, 1e-3, "millihenry"},
	{"H",        D_INDUCTANCE, 1, "henry"},
	{"uH",       D_INDUCTANCE, 1e-6, "microhenry"},
	{"ohm",      D_RESISTANCE, 1, "ohm"},
	{"mohm",     D_RESISTANCE, 1e-3, "milliohm"},
	{"uF",       D_CAPACITANCE, 1e-6, "microfarad"},
	{"mF",       D_CAPACITANCE, 1e-3, "millifarad"},
	{"F",        D_CAPACITANCE, 1, "farad"},
	{"kgm2",     D_INERTIA, 1, "kilogram metre squared"},
	{"gm2",      D_INERTIA, 1e-3, "gram metre squared"},
	{"W",        D_POWER, 1, "watt"},
	{"kW",       D_POWER, 1e3, "kilowatt"},
	{"J",        D_ENERGY, 1, "joule"},
	{"Nm/rad",   D_STIFFNESS, 1, "newton metre per radian, torsional stiffness"},
	{"Nms",      D_VISCOUS, 1, "newton metre second, viscous friction"},
	{"K/W",      D_THERMAL_RESISTANCE, 1, "kelvin per watt"},
	{"J/K",      D_THERMAL_CAPACITANCE, 1, "joule per kelvin"},
	{"Nm/A_peak", D_TORQUE_PER_CURRENT, 1, "torque per ampere of amplitude"},
	{"Nm/A_rms", D_TORQUE_PER_CURRENT, 0.70710678118654752440, "torque per ampere rms"},
};

static const struct {struct dimension dimension; const char *name; } NAMES[] = {
	{D_NUMBER, "number"}, {D_TIME, "time"}, {D_ANGLE, "angle"},
	{D_ANGLE_MECH, "angle (mechanical)"}, {D_ANGLE_ELEC, "angle (electrical)"},
	{D_SPEED, "speed"}, {D_SPEED_MECH, "speed (mechanical)"}, {D_SPEED_ELEC, "speed (electrical)"},
	{D_ACCELERATION, "acceleration"}, {D_FREQUENCY, "frequency"},
	{D_CURRENT, "current (instantaneous)"}, {D_CURRENT_AMPLITUDE, "current (amplitude)"},
	{D_VOLTAGE, "voltage (instantaneous)"}, {D_VOLTAGE_AMPLITUDE, "voltage (amplitude)"},
	{D_FLUX_AMPLITUDE, "flux linkage (amplitude)"}, {D_TORQUE, "torque"},
	{D_TEMPERATURE, "temperature"}, {D_INDUCTANCE, "inductance"}, {D_RESISTANCE, "resistance"},
	{D_CAPACITANCE, "capacitance"}, {D_INERTIA, "inertia"}, {D_POWER, "power"},
	{D_ENERGY, "energy"}, {D_STIFFNESS, "torsional stiffness"}, {D_VISCOUS, "viscous friction"},
	{D_THERMAL_RESISTANCE, "thermal resistance"},
	{D_THERMAL_CAPACITANCE, "thermal capacitance"},
	{D_TORQUE_PER_CURRENT, "torque per current"},
};
/* clang-format on */

static const size_t UNIT_COUNT = sizeof UNITS / sizeof UNITS[0];

const struct unit *unit_table(size_t *ret_count)
{
	*ret_count = UNIT_COUNT;
	return UNITS;
}

const struct unit *unit_find(const char *name, size_t length)
{
	for (size_t i = 0; i < UNIT_COUNT; i++)
		if (strlen(UNITS[i].name) == length && memcmp(UNITS[i].name, name, length) == 0)
			return &UNITS[i];
	return NULL;
}

const struct unit *unit_one(void)
{
	return &UNITS[0];
}

const struct unit *unit_percent(void)
{
	return &UNITS[1];
}

static bool same_exponents(struct dimension a, struct dimension b)
{
	return a.metre == b.metre && a.kilogram == b.kilogram && a.second == b.second &&
	       a.ampere == b.ampere && a.kelvin == b.kelvin && a.radian == b.radian;
}

bool dimension_agrees(struct dimension a, struct dimension b)
{
	if (!same_exponents(a, b))
		return false;
	if (a.sort == b.sort)
		return true;
	return a.radian > 0 && (a.sort == SORT_PLAIN || b.sort == SORT_PLAIN);
}

const struct unit *unit_default(struct dimension dimension)
{
	for (size_t i = 0; i < UNIT_COUNT; i++)
		if (same_exponents(UNITS[i].dimension, dimension) &&
		    UNITS[i].dimension.sort == dimension.sort)
			return &UNITS[i];
	return NULL;
}

const char *dimension_name(struct dimension dimension, char *buffer, size_t size)
{
	for (size_t i = 0; i < sizeof NAMES / sizeof NAMES[0]; i++)
		if (same_exponents(NAMES[i].dimension, dimension) &&
		    NAMES[i].dimension.sort == dimension.sort)
			return NAMES[i].name;
	(void)snprintf(buffer, size, "m^%d kg^%d s^%d A^%d K^%d rad^%d", dimension.metre,
	               dimension.kilogram, dimension.second, dimension.ampere, dimension.kelvin,
	               dimension.radian);
	return buffer;
}

static bool is_digit(char c)
{
	return c >= '0' && c <= '9';
}

/* Length of the longest prefix that is a JSON number (a leading '+' and ".5" are not). */
static size_t number_span(const char *s, size_t n)
{
	size_t i = 0;
	if (i < n && (s[i] == '-' || s[i] == '+'))
		i++;
	size_t digits = i;
	while (i < n && is_digit(s[i]))
		i++;
	if (i == digits)
		return 0;
	if (i + 1 < n && s[i] == '.' && is_digit(s[i + 1])) {
		i++;
		while (i < n && is_digit(s[i]))
			i++;
	}
	if (i < n && (s[i] == 'e' || s[i] == 'E')) {
		size_t j = i + 1;
		if (j < n && (s[j] == '-' || s[j] == '+'))
			j++;
		if (j < n && is_digit(s[j])) {
			while (j < n && is_digit(s[j]))
				j++;
			i = j;
		}
	}
	return i;
}

/* Why a scalar that looks like a number in YAML 1.1 or C is refused, or NULL. */
static const char *number_hint(const char *s, size_t n)
{
	size_t i = n > 0 && (s[0] == '-' || s[0] == '+') ? 1 : 0;
	if (i + 1 < n && s[i] == '0' && (s[i + 1] == 'x' || s[i + 1] == 'o' || s[i + 1] == 'b'))
		return "write it in decimal";
	if (i + 1 < n && s[i] == '0' && is_digit(s[i + 1]))
		return "write it without the leading zero (some readers take it as octal)";
	if (memchr(s, '_', n) && i < n && is_digit(s[i]) &&
	    !unit_find(s + number_span(s, n), n - number_span(s, n)))
		return "write it without underscores";
	size_t span = number_span(s, n);
	if (span > 0 && span < n && s[span] == ':')
		return "write it as a number with a unit, such as 90 s";
	if (span > 0 && span < n && s[span] == ',')
		return "write it with a decimal point";
	if (i < n && s[i] == '.')
		return "write a digit before the decimal point";
	return NULL;
}

/* s[0..span) has the form of a number. */
static int convert(const char *s, size_t span, double *ret_number, struct err *reterr)
{
	char copy[64];
	if (span >= sizeof copy)
		return err_set(reterr, ERR_FILE, "the number has more than %zu characters",
		               sizeof copy - 1);
	memcpy(copy, s, span);
	copy[span] = '\0';
	*ret_number = strtod(copy, NULL);
	if (!isfinite(*ret_number))
		return err_set(reterr, ERR_FILE, "the number %s is too large", copy);
	return 0;
}

static int refuse_number(const char *s, size_t n, struct err *reterr)
{
	struct text shown;
	text_init(&shown, 128);
	text_add_clean(&shown, s, n < 40 ? n : 40);
	const char *hint = number_hint(s, n);
	(void)err_set(reterr, ERR_FILE, "'%s' is not a number%s%s", text_string(&shown),
	              hint ? ": " : "", hint ? hint : "");
	text_release(&shown);
	return -1;
}

int number_parse(const char *bytes, size_t length, double *ret_number, struct err *reterr)
{
	if (length == 0)
		return err_set(reterr, ERR_FILE, "a number is missing");
	size_t span = number_span(bytes, length);
	size_t digits = span > 0 && !is_digit(bytes[0]) ? 1 : 0;
	bool leading_zero = span > digits + 1 && bytes[digits] == '0' && is_digit(bytes[digits + 1]);
	if (span != length || leading_zero || bytes[0] == '+')
		return refuse_number(bytes, length, reterr);
	return convert(bytes, span, ret_number, reterr);
}

static void list_units(struct text *text, struct dimension dimension)
{
	const char *comma = "";
	for (size_t i = 0; i < UNIT_COUNT; i++)
		if (dimension_agrees(UNITS[i].dimension, dimension) && strcmp(UNITS[i].name, "1") != 0) {
			text_printf(text, "%s%s", comma, UNITS[i].name);
			comma = ", ";
		}
}

static int refuse_unit(const char *what, const char *name, size_t length,
                       const struct dimension *wanted, struct err *reterr)
{
	struct text shown, fitting;
	text_init(&shown, 256);
	text_init(&fitting, 512);
	text_add_clean(&shown, name, length < 40 ? length : 40);
	const char *const *names = NULL;
	const char *all[sizeof UNITS / sizeof UNITS[0]];
	for (size_t i = 0; i < UNIT_COUNT; i++)
		all[i] = UNITS[i].name;
	names = all;
	if (wanted)
		list_units(&fitting, *wanted);
	const char *nearest = text_nearest(text_string(&shown), names, UNIT_COUNT);
	char buffer[96];
	if (wanted)
		(void)err_set(reterr, ERR_FILE, "%s '%s': expected %s %s in %s", what, text_string(&shown),
		              text_article(dimension_name(*wanted, buffer, sizeof buffer)),
		              dimension_name(*wanted, buffer, sizeof buffer), text_string(&fitting));
	else
		(void)err_set(reterr, ERR_FILE, "%s '%s'%s%s%s", what, text_string(&shown),
		              nearest ? "; did you mean '" : "", nearest ? nearest : "",
		              nearest ? "'?" : "");
	text_release(&shown);
	text_release(&fitting);
	return -1;
}

int quantity_parse(const char *bytes, size_t length, const struct unit *bare,
                   const struct dimension *wanted, struct quantity *ret_quantity,
                   struct err *reterr)
{
	if (length == 0)
		return err_set(reterr, ERR_FILE, "a value is missing");
	for (size_t i = 0; i + 1 < length; i++)
		if ((unsigned char)bytes[i] == 0xC2 && (unsigned char)bytes[i + 1] == 0xA0)
			return err_set(reterr, ERR_FILE,
			               "there is a no-break space in it: write an ordinary space");
	size_t span = number_span(bytes, length);
	size_t digits = span > 0 && !is_digit(bytes[0]) ? 1 : 0;
	size_t at = span;
	while (at < length && bytes[at] == ' ' && at < span + 1)
		at++;
	bool unit_like = at == length || (!is_digit(bytes[at]) && !memchr("_:.,", bytes[at], 4));
	if (span == 0 || bytes[0] == '+' || !unit_like ||
	    (span > digits + 1 && bytes[digits] == '0' && is_digit(bytes[digits + 1])) ||
	    (span == digits + 1 && bytes[digits] == '0' && at < length &&
	     memchr("xXob", bytes[at], 4) && at == span))
		return refuse_number(bytes, length, reterr);
	struct quantity quantity = {.unit = bare};
	if (convert(bytes, span, &quantity.value, reterr) < 0)
		return -1;
	if (at < length) {
		quantity.unit = unit_find(bytes + at, length - at);
		if (!quantity.unit)
			return refuse_unit("unknown unit", bytes + at, length - at, wanted, reterr);
	} else if (!bare && quantity.value == 0 && wanted && unit_default(*wanted)) {
		quantity.unit = unit_default(*wanted);
	} else if (!bare) {
		return refuse_unit("no unit in", bytes, length, wanted, reterr);
	}
	if (wanted && !dimension_agrees(quantity.unit->dimension, *wanted))
		return refuse_unit("wrong unit in", bytes, length, wanted, reterr);
	*ret_quantity = quantity;
	return 0;
}

double quantity_si(struct quantity quantity)
{
	return quantity.value * quantity.unit->scale;
}

double quantity_in(struct quantity quantity, const struct unit *unit)
{
	if (quantity.unit == unit)
		return quantity.value;
	return quantity.value * (quantity.unit->scale / unit->scale);
}

int quantity_ns(struct quantity quantity, int64_t *ret_ns, struct err *reterr)
{
	double ns = quantity.value * quantity.unit->scale * 1e9;
	if (!(ns >= 0) || ns > (double)NS_MOST)
		return err_set(reterr, ERR_FILE, "a time must lie between 0 and 366 days");
	if (ns > 0 && ns < 0.5)
		return err_set(reterr, ERR_FILE, "the time is shorter than a nanosecond");
	*ret_ns = (int64_t)llround(ns);
	return 0;
}

const char *duration_text(int64_t ns, char *buffer, size_t size)
{
	const char *sign = ns < 0 ? "-" : "";
	double absolute = fabs((double)ns);
	if (absolute < 1e3)
		(void)snprintf(buffer, size, "%s%.0f ns", sign, absolute);
	else if (absolute < 1e6)
		(void)snprintf(buffer, size, "%s%.4g us", sign, absolute / 1e3);
	else if (absolute < 1e9)
		(void)snprintf(buffer, size, "%s%.4g ms", sign, absolute / 1e6);
	else if (absolute < 119.95e9)
		(void)snprintf(buffer, size, "%s%.4g s", sign, absolute / 1e9);
	else if (absolute < 7200e9)
		(void)snprintf(buffer, size, "%s%d min %d s", sign, (int)(absolute / 60e9),
		               (int)fmod(absolute / 1e9, 60));
	else
		(void)snprintf(buffer, size, "%s%d h %d min", sign, (int)(absolute / 3600e9),
		               (int)fmod(absolute / 60e9, 60));
	return buffer;
}
