/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The torque angle against its target. Circular throughout; the spread and
 * worst sample are those of the samples, the mean has the uncertainty of noise
 * and instrument.
 */
#include <stdio.h>
#include <string.h>

#include "angle.h"
#include "level.h"
#include "operating_point.h"
#include "put.h"

struct torque_angle {
	int channel, current, torque, speed, dc_voltage;
	struct window window;
	const char *target;
	double minimum_current, tolerance, voltage_share;
};

#define AT(member) offsetof(struct torque_angle, member)
static const struct field fields[] = {
    {.key = "channel",
     .kind = FIELD_CHANNEL,
     .flags = FIELD_REQUIRED,
     .offset = AT(channel),
     .text = "torque angle: electrical, of the stator current vector from the rotor d axis"},
    {.key = "current",
     .kind = FIELD_CHANNEL,
     .flags = FIELD_REQUIRED,
     .offset = AT(current),
     .text = "magnitude of the same current vector"},
    {.key = "window",
     .kind = FIELD_WINDOW,
     .offset = AT(window),
     .text = "the samples that are judged; proven steady"},
    {.key = "target",
     .kind = FIELD_TEXT,
     .fallback = "by_torque_sign",
     .offset = AT(target),
     .text = "an angle (90 deg), a range (60 deg to 120 deg), by_torque_sign (+90 deg for positive "
             "torque, -90 deg for negative), or from the nameplate with its tolerances "
             "maximum_torque_per_ampere or voltage_limit"},
    {.key = "torque",
     .kind = FIELD_CHANNEL,
     .offset = AT(torque),
     .text = "by_torque_sign: the torque whose sign decides; the sign of the angle itself unless "
             "given"},
    {.key = "speed",
     .kind = FIELD_CHANNEL,
     .offset = AT(speed),
     .text = "voltage_limit: mechanical speed"},
    {.key = "dc_voltage",
     .kind = FIELD_CHANNEL,
     .offset = AT(dc_voltage),
     .text = "voltage_limit: voltage of the DC link; that of the nameplate unless given"},
    {.key = "voltage_share",
     .kind = FIELD_QUANTITY,
     .dimension = &DIM_NUMBER,
     .flags = FIELD_POSITIVE,
     .least = 0,
     .most = 1.2,
     .fallback = "100 %",
     .offset = AT(voltage_share),
     .text = "voltage_limit: what the controller uses of the linear limit Vdc / sqrt 3"},
    {.key = "minimum_current",
     .kind = FIELD_QUANTITY,
     .dimension = &DIM_NUMBER,
     .least = 0,
     .most = 1,
     .fallback = "5 %",
     .offset = AT(minimum_current),
     .text = "of rated current: below it an angle says nothing"},
    {.key = "tolerance",
     .kind = FIELD_QUANTITY,
     .dimension = &DIM_ANGLE,
     .flags = FIELD_POSITIVE,
     .least = 0,
     .most = 3.141592653589793,
     .fallback = "5 deg",
     .offset = AT(tolerance),
     .text = "the deviation that matters: the drift over the window must surely be below a quarter "
             "of it"},
};
static const struct field_table table = {
    "torque_angle", "where the stator current stands to the rotor", fields, FIELD_COUNT(fields)};

enum { MEAN, MEAN_ERROR, SPREAD, WORST_ERROR, TORQUE_LOST };
static const struct metric_kind metrics[] = {
    {"mean", METRIC_ANGLE_ELEC, "circular mean of the angle", NULL},
    {"mean_error", METRIC_ANGLE_ELEC, "circular mean - target, in (-180 deg, 180 deg]", NULL},
    {"spread", METRIC_ANGLE_ELEC, "circular standard deviation sqrt(-2 ln R)", NULL},
    {"worst_error", METRIC_ANGLE_ELEC, "largest |angle - target| of a sample", NULL},
    {"torque_lost", METRIC_PERCENT,
     "1 - cos(mean_error): what a machine without saliency loses per ampere", NULL},
};

#define PI 3.14159265358979323846

/* A target as written; low == high but for a range. */
enum target_kind { TARGET_ANGLE, TARGET_RANGE, TARGET_SIGN, TARGET_MOST_TORQUE, TARGET_VOLTAGE };
static const char *const target_words[] = {
    [TARGET_SIGN] = "by_torque_sign",
    [TARGET_MOST_TORQUE] = "maximum_torque_per_ampere",
    [TARGET_VOLTAGE] = "voltage_limit",
};

struct target {
	enum target_kind kind;
	struct interval degrees;
};

static int parse_degrees(const char *text, size_t length, double *ret_degrees, struct err *reterr)
{
	struct quantity quantity;
	struct err err = {0};
	if (quantity_parse(text, length, NULL, &DIM_ANGLE_ELEC, &quantity, &err) < 0)
		return err_set(reterr, ERR_FILE,
		               "target: write an angle as in 90 deg, a range as in 60 deg to 120 deg, or "
		               "one of by_torque_sign, maximum_torque_per_ampere, voltage_limit; %s",
		               err.message);
	*ret_degrees = quantity_si(quantity) * 180 / PI;
	return 0;
}

static int parse_target(const char *text, struct target *ret_target, struct err *reterr)
{
	*ret_target = (struct target){.kind = TARGET_SIGN};
	if (!text)
		return 0;
	for (size_t i = TARGET_SIGN; i < FIELD_COUNT(target_words); i++)
		if (strcmp(text, target_words[i]) == 0) {
			ret_target->kind = (enum target_kind)i;
			return 0;
		}
	struct interval *degrees = &ret_target->degrees;
	const char *to = strstr(text, " to ");
	if (!to) {
		ret_target->kind = TARGET_ANGLE;
		if (parse_degrees(text, strlen(text), &degrees->value, reterr) < 0)
			return -1;
		degrees->value = degrees->low = degrees->high = wrap_half(degrees->value, 360);
		return 0;
	}
	ret_target->kind = TARGET_RANGE;
	if (parse_degrees(text, (size_t)(to - text), &degrees->low, reterr) < 0 ||
	    parse_degrees(to + 4, strlen(to + 4), &degrees->high, reterr) < 0)
		return -1;
	degrees->value = (degrees->low + degrees->high) / 2;
	if (degrees->low < degrees->high && degrees->high - degrees->low < 360)
		return 0;
	return err_set(reterr, ERR_FILE,
	               "target: a range goes from the smaller angle to the larger, less than a turn");
}

static void all_unknown(struct metric *ret_metrics, enum evidence evidence, const char *why)
{
	for (size_t i = 0; i < FIELD_COUNT(metrics); i++)
		metric_unknown(&ret_metrics[i], &metrics[i], shape_unit(metrics[i].shape, NULL), evidence,
		               "%s", why);
}

/* +1 or -1, or 0 with why[size] where the sign of the torque is not sure. -1 as error: memory. */
static int torque_sign(const struct check_input *in, int torque, struct span span, int *ret_sign,
                       char *why, size_t size, struct err *reterr)
{
	struct level level;
	*ret_sign = 0;
	if (level_measure(in, torque, span, &level, reterr) < 0)
		return -1;
	if (!level.known)
		(void)snprintf(why, size, "%s", level.why);
	else if (fabs(level.mean) > level.expanded)
		*ret_sign = level.mean > 0 ? 1 : -1;
	else
		(void)snprintf(why, size, "the sign of %s is not sure: %.3g +- %.2g Nm; load the machine",
		               in->channels[torque].name, level.mean, level.expanded);
	return 0;
}

/* By the angle itself: sure where the mean is surely not 0 or 180 deg. */
static int own_sign(const struct angle *angle, char *why, size_t size)
{
	double from_axis = fmin(fabs(angle->mean), 180 - fabs(angle->mean));
	if (from_axis > angle->expanded)
		return angle->mean > 0 ? 1 : -1;
	(void)snprintf(why, size,
	               "the sign of the torque is not sure from an angle of %.3g +- %.2g deg",
	               angle->mean, angle->expanded);
	return 0;
}

static double lost(double error_deg)
{
	return 100 * (1 - cos(fmin(fabs(error_deg), 180) * PI / 180));
}

/* How far outside the target an angle is, sign included; 0 inside a range. */
static double beyond(const struct target *target, double degrees)
{
	double middle = target->degrees.value;
	double from_middle = wrap_half(degrees - middle, 360);
	if (target->kind != TARGET_RANGE)
		return from_middle;
	double half = (target->degrees.high - target->degrees.low) / 2;
	return from_middle > half ? from_middle - half : fmin(0, from_middle + half);
}

/* How much a computed target may lie above and below its value. */
static double above(const struct target *target)
{
	return target->kind == TARGET_RANGE ? 0 : target->degrees.high - target->degrees.value;
}

static double below(const struct target *target)
{
	return target->kind == TARGET_RANGE ? 0 : target->degrees.value - target->degrees.low;
}

static void put_errors(const struct angle *angle, const struct target *target, double mean,
                       double expanded, struct metric *ret_metrics)
{
	enum evidence evidence = angle->rows.series.channel->evidence;
	const struct unit *deg = shape_unit(METRIC_ANGLE_ELEC, NULL);
	double error = beyond(target, mean);
	bool range = target->kind == TARGET_RANGE;
	double low = range ? beyond(target, mean - expanded) : error - expanded - above(target);
	double high = range ? beyond(target, mean + expanded) : error + expanded + below(target);
	put_value(&ret_metrics[MEAN_ERROR], &metrics[MEAN_ERROR], deg, evidence, error,
	          fmin(low, error), fmax(high, error), 0.95);
	double least = low > 0 ? low : (high < 0 ? -high : 0);
	double most = fmin(180, fmax(fabs(low), fabs(high)));
	put_value(&ret_metrics[TORQUE_LOST], &metrics[TORQUE_LOST], unit_percent(), evidence,
	          lost(error), fmin(lost(least), lost(error)), lost(most), 0.95);
}

static void put_worst(const struct angle *angle, const struct target *target,
                      struct metric *ret_metric)
{
	enum evidence evidence = angle->rows.series.channel->evidence;
	double worst = 0, low = 0, high = 0;
	double doubt = angle->row_limit + fmax(above(target), below(target));
	size_t at = 0;
	for (size_t i = 0; i < angle->rows.count; i++) {
		double degrees = angle_deviation(angle, i, 0);
		double deviation = fabs(beyond(target, degrees));
		at = deviation > worst ? i : at;
		worst = fmax(worst, deviation);
		double up = beyond(target, degrees + doubt), down = beyond(target, degrees - doubt);
		high = fmax(high, fmax(fabs(up), fabs(down)));
		low = fmax(low, up * down > 0 ? fmin(fabs(up), fabs(down)) : 0);
	}
	put_value(ret_metric, &metrics[WORST_ERROR], shape_unit(METRIC_ANGLE_ELEC, NULL), evidence,
	          worst, fmin(low, worst), fmin(180, fmax(high, worst)), 1);
	put_point(ret_metric, series_earliest(&angle->rows.series, angle->rows.first + at),
	          series_latest(&angle->rows.series, angle->rows.first + at), (double)NAN);
}

static void fill(const struct angle *angle, const struct target *target, struct metric *ret_metrics)
{
	enum evidence evidence = angle->rows.series.channel->evidence;
	const struct unit *deg = shape_unit(METRIC_ANGLE_ELEC, NULL);
	double mean = angle->mean, expanded = angle->expanded;
	put_value(&ret_metrics[MEAN], &metrics[MEAN], deg, evidence, mean, mean - expanded,
	          mean + expanded, 0.95);
	put_value(&ret_metrics[SPREAD], &metrics[SPREAD], deg, evidence, angle->sd,
	          fmax(0, angle->sd - angle->sd_expanded), angle->sd + angle->sd_expanded, 0.95);
	put_errors(angle, target, mean, expanded, ret_metrics);
	put_worst(angle, target, &ret_metrics[WORST_ERROR]);
	for (size_t i = 0; i < FIELD_COUNT(metrics); i++) {
		if (i != WORST_ERROR)
			put_point(&ret_metrics[i], angle->rows.span.from_ns, angle->rows.span.to_ns,
			          (double)NAN);
		if (target->kind == TARGET_MOST_TORQUE || target->kind == TARGET_VOLTAGE)
			(void)snprintf(ret_metrics[i].note, sizeof ret_metrics[i].note,
			               "target %.2f deg, by the nameplate's tolerances %.2f to %.2f deg",
			               target->degrees.value, target->degrees.low, target->degrees.high);
	}
}

static struct interval interval_of(const struct level *level)
{
	double mean = fabs(level->mean);
	return (struct interval){mean, fmax(0, mean - level->expanded), mean + level->expanded};
}

/* A target from the nameplate at the current, speed and voltage of the window. */
static int compute_target(const struct check_input *in, const struct torque_angle *own,
                          struct span span, struct target *target, char *why, size_t size,
                          struct err *reterr)
{
	struct level current, speed = {.known = true}, voltage = {.known = true};
	bool limited = target->kind == TARGET_VOLTAGE;
	if (level_measure(in, own->current, span, &current, reterr) < 0 ||
	    (limited && level_measure(in, own->speed, span, &speed, reterr) < 0) ||
	    (limited && own->dc_voltage >= 0 &&
	     level_measure(in, own->dc_voltage, span, &voltage, reterr) < 0))
		return -1;
	const struct level *unknown = !current.known ? &current : !speed.known ? &speed : &voltage;
	if (!unknown->known) {
		(void)snprintf(why, size, "%s", unknown->why);
		return 0;
	}
	if (own->dc_voltage < 0) {
		voltage.mean = in->machine->dc_voltage.value;
		voltage.expanded = voltage.mean * in->machine->dc_voltage.tolerance;
	}
	double share = own->voltage_share / sqrt(3);
	struct operating_point point = {interval_of(&current), interval_of(&speed),
	                                interval_of(&voltage)};
	point.voltage = (struct interval){point.voltage.value * share, point.voltage.low * share,
	                                  point.voltage.high * share};
	target->degrees = limited ? target_at_voltage_limit(in->machine, &point)
	                          : target_of_most_torque(in->machine, &point);
	if (isnan(target->degrees.value))
		(void)snprintf(why, size,
		               "by the nameplate %.3g A at %.4g rad/s need more than %.4g V at any angle",
		               current.mean, speed.mean, point.voltage.value);
	return 0;
}

/* The target in degrees, or not found with why[size]. -1: memory ran out. */
static int find_target(const struct check_input *in, const struct torque_angle *own,
                       const struct angle *angle, struct span span, struct target *target,
                       bool *ret_found, char *why, size_t size, struct err *reterr)
{
	*ret_found = target->kind == TARGET_ANGLE || target->kind == TARGET_RANGE;
	if (*ret_found)
		return 0;
	int sign = 0;
	if (own->torque >= 0) {
		if (torque_sign(in, own->torque, span, &sign, why, size, reterr) < 0)
			return -1;
	} else {
		sign = own_sign(angle, why, size);
	}
	target->degrees = (struct interval){90, 90, 90};
	if (sign && target->kind != TARGET_SIGN &&
	    compute_target(in, own, span, target, why, size, reterr) < 0)
		return -1;
	*ret_found = sign != 0 && !why[0] && !isnan(target->degrees.value);
	if (sign < 0) {
		const struct interval degrees = target->degrees;
		target->degrees = (struct interval){-degrees.value, -degrees.high, -degrees.low};
	}
	return 0;
}

static int evaluate(const struct check_input *in, const void *params, struct metric *ret_metrics,
                    size_t *ret_count, struct err *reterr)
{
	const struct torque_angle *own = params;
	enum evidence evidence = in->channels[own->channel].evidence;
	*ret_count = FIELD_COUNT(metrics);
	char why[224] = "";
	struct span span;
	struct angle angle;
	bool sufficient = false, found = false;
	struct target target;
	if (parse_target(own->target, &target, reterr) < 0)
		return -1;
	if (!window_span(in, &own->window, &span, why, sizeof why)) {
		all_unknown(ret_metrics, evidence, why);
		return 0;
	}
	if (current_sufficient(in, own->current, span, own->minimum_current, &sufficient, why,
	                       sizeof why, reterr) < 0)
		return -1;
	if (sufficient) {
		/* Within a range the angle may move: a block-commutated machine sweeps it. */
		double tolerance = target.kind == TARGET_RANGE ? 8 * PI : own->tolerance;
		if (angle_measure(in, own->channel, span, tolerance, &angle, reterr) < 0)
			return -1;
		if (!angle.known)
			(void)snprintf(why, sizeof why, "%s", angle.why);
		else if (find_target(in, own, &angle, span, &target, &found, why, sizeof why, reterr) < 0)
			return -1;
	}
	if (found)
		fill(&angle, &target, ret_metrics);
	else
		all_unknown(ret_metrics, evidence, why);
	return 0;
}

/* What a computed target needs of the nameplate and of the rig. */
static int computed_verify(const struct torque_angle *own, const struct target *target,
                           const struct channel_info *channels, const struct machine *machine,
                           struct err *reterr)
{
	bool limited = target->kind == TARGET_VOLTAGE;
	const struct {
		const char *name;
		bool missing;
	} needs[] = {
	    {"flux_linkage", !(machine->flux_linkage.value > 0)},
	    {"inductance_d", !(machine->inductance_d.value > 0)},
	    {"inductance_q", !(machine->inductance_q.value > 0)},
	    {"pole_pairs", limited && machine->pole_pairs <= 0},
	    {"dc_voltage (or name its channel)",
	     limited && own->dc_voltage < 0 && !(machine->dc_voltage.value > 0)},
	};
	for (size_t i = 0; i < FIELD_COUNT(needs); i++)
		if (needs[i].missing)
			return err_set(reterr, ERR_FILE, "target: %s needs %s, which machine does not give",
			               own->target, needs[i].name);
	if (!limited)
		return 0;
	if (own->speed < 0)
		return err_set(reterr, ERR_FILE, "target: voltage_limit needs the channel speed");
	if (!dimension_agrees(channels[own->speed].unit->dimension, DIM_SPEED_MECH))
		return err_set(reterr, ERR_FILE, "speed: %s is in %s, not a mechanical speed",
		               channels[own->speed].name, channels[own->speed].unit->name);
	if (own->dc_voltage >= 0 &&
	    !dimension_agrees(channels[own->dc_voltage].unit->dimension, DIM_VOLTAGE))
		return err_set(reterr, ERR_FILE, "dc_voltage: %s is in %s, not a voltage",
		               channels[own->dc_voltage].name, channels[own->dc_voltage].unit->name);
	return 0;
}

static int verify(const void *params, const struct channel_info *channels,
                  const struct machine *machine, struct err *reterr)
{
	const struct torque_angle *own = params;
	struct target target;
	if (angle_channel_verify(&channels[own->channel], reterr) < 0 ||
	    current_channel_verify(&channels[own->current], own->minimum_current, machine, reterr) <
	        0 ||
	    parse_target(own->target, &target, reterr) < 0)
		return -1;
	bool fixed = target.kind == TARGET_ANGLE || target.kind == TARGET_RANGE;
	if (own->torque >= 0 && fixed)
		return err_set(
		    reterr, ERR_FILE,
		    "torque is for a target that hangs on its sign; the target here is an angle");
	if ((own->speed >= 0 || own->dc_voltage >= 0) && target.kind != TARGET_VOLTAGE)
		return err_set(reterr, ERR_FILE, "speed and dc_voltage are for target: voltage_limit");
	if (target.kind == TARGET_MOST_TORQUE || target.kind == TARGET_VOLTAGE)
		return computed_verify(own, &target, channels, machine, reterr);
	return 0;
}

const struct check_kind check_torque_angle = {
    .name = "torque_angle",
    .text = "where the stator current stands to the rotor, against a target",
    .fields = &table,
    .params_size = sizeof(struct torque_angle),
    .metrics = metrics,
    .metric_count = FIELD_COUNT(metrics),
    .evaluate = evaluate,
    .verify = verify,
};
