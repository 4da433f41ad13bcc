/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The torque angle against its target. Circular throughout; the spread and
 * worst sample are those of the samples, the mean has the uncertainty of noise
 * and instrument.
 */
#include <stdio.h>
#include <string.h>

#include "angle.h"
#include "put.h"

struct torque_angle {
	int channel, current, torque;
	struct window window;
	const char *target;
	double minimum_current, tolerance;
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
     .text =
         "an angle (90 deg), or by_torque_sign: +90 deg for positive torque, -90 deg for negative"},
    {.key = "torque",
     .kind = FIELD_CHANNEL,
     .offset = AT(torque),
     .text = "by_torque_sign: the torque whose sign decides; the sign of the angle itself unless "
             "given"},
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

static const char by_sign[] = "by_torque_sign";

struct target {
	bool by_sign;
	double degrees;
};

static int parse_target(const char *text, struct target *ret_target, struct err *reterr)
{
	if (strcmp(text, by_sign) == 0) {
		*ret_target = (struct target){.by_sign = true};
		return 0;
	}
	struct quantity quantity;
	struct err err = {0};
	if (quantity_parse(text, strlen(text), NULL, &DIM_ANGLE_ELEC, &quantity, &err) < 0)
		return err_set(reterr, ERR_FILE, "target: write an angle as in 90 deg, or %s; %s", by_sign,
		               err.message);
	*ret_target = (struct target){.degrees = wrap_half(quantity_si(quantity) * 180 / PI, 360)};
	return 0;
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
	struct rows rows;
	*ret_sign = 0;
	if (rows_take(in, torque, span, &rows, reterr) < 0)
		return -1;
	if (!rows.usable) {
		(void)snprintf(why, size, "%s", rows.why);
		return 0;
	}
	struct stretch stretch = rows_stretch(&rows, 0, rows.count, span.from_ns);
	struct summary summary;
	summarise(&stretch, &summary);
	struct budget budget = {0};
	budget_random(&budget, summary.sd / sqrt(summary.independent),
	              fmax(summary.independent - 1, 1));
	budget_other(&budget, rows_error_limit(&rows, 0, rows.count) / sqrt(3));
	budget_other(&budget, in->channels[torque].resolution / sqrt(12));
	double expanded = budget_expanded(&budget);
	if (fabs(summary.mean) > expanded)
		*ret_sign = summary.mean > 0 ? 1 : -1;
	else
		(void)snprintf(why, size, "the sign of %s is not sure: %.3g +- %.2g %s; load the machine",
		               in->channels[torque].name, summary.mean, expanded,
		               in->channels[torque].unit->name);
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

static void fill(const struct angle *angle, double target, struct metric *ret_metrics)
{
	enum evidence evidence = angle->rows.series.channel->evidence;
	const struct unit *deg = shape_unit(METRIC_ANGLE_ELEC, NULL);
	double mean = angle->mean, expanded = angle->expanded;
	double error = wrap_half(mean - target, 360);
	put_value(&ret_metrics[MEAN], &metrics[MEAN], deg, evidence, mean, mean - expanded,
	          mean + expanded, 0.95);
	put_value(&ret_metrics[MEAN_ERROR], &metrics[MEAN_ERROR], deg, evidence, error,
	          error - expanded, error + expanded, 0.95);
	put_value(&ret_metrics[SPREAD], &metrics[SPREAD], deg, evidence, angle->sd,
	          fmax(0, angle->sd - angle->sd_expanded), angle->sd + angle->sd_expanded, 0.95);
	double worst = 0;
	size_t at = 0;
	for (size_t i = 0; i < angle->rows.count; i++) {
		double deviation = fabs(angle_deviation(angle, i, target));
		at = deviation > worst ? i : at;
		worst = fmax(worst, deviation);
	}
	put_value(&ret_metrics[WORST_ERROR], &metrics[WORST_ERROR], deg, evidence, worst,
	          fmax(0, worst - angle->row_limit), fmin(180, worst + angle->row_limit), 1);
	double least = fmax(0, fabs(error) - expanded);
	put_value(&ret_metrics[TORQUE_LOST], &metrics[TORQUE_LOST], unit_percent(), evidence,
	          lost(error), lost(least), lost(fabs(error) + expanded), 0.95);
	for (size_t i = 0; i < FIELD_COUNT(metrics); i++)
		put_point(&ret_metrics[i], angle->rows.span.from_ns, angle->rows.span.to_ns, (double)NAN);
	struct metric_point *point = ret_metrics[WORST_ERROR].points;
	point->earliest_ns = series_earliest(&angle->rows.series, angle->rows.first + at);
	point->latest_ns = series_latest(&angle->rows.series, angle->rows.first + at);
}

/* The target in degrees, or false with why[size]; *ret_failed where memory ran out. */
static int find_target(const struct check_input *in, const struct torque_angle *own,
                       const struct angle *angle, struct span span, double *ret_degrees,
                       bool *ret_found, char *why, size_t size, struct err *reterr)
{
	struct target target;
	*ret_found = false;
	if (parse_target(own->target ? own->target : by_sign, &target, reterr) < 0)
		return -1;
	int sign = 0;
	if (target.by_sign && own->torque >= 0) {
		if (torque_sign(in, own->torque, span, &sign, why, size, reterr) < 0)
			return -1;
	} else if (target.by_sign) {
		sign = own_sign(angle, why, size);
	}
	*ret_found = !target.by_sign || sign != 0;
	*ret_degrees = target.by_sign ? 90 * sign : target.degrees;
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
	double target = 0;
	if (!window_span(in, &own->window, &span, why, sizeof why)) {
		all_unknown(ret_metrics, evidence, why);
		return 0;
	}
	if (current_sufficient(in, own->current, span, own->minimum_current, &sufficient, why,
	                       sizeof why, reterr) < 0)
		return -1;
	if (sufficient) {
		if (angle_measure(in, own->channel, span, own->tolerance, &angle, reterr) < 0)
			return -1;
		if (!angle.known)
			(void)snprintf(why, sizeof why, "%s", angle.why);
		else if (find_target(in, own, &angle, span, &target, &found, why, sizeof why, reterr) < 0)
			return -1;
	}
	if (found)
		fill(&angle, target, ret_metrics);
	else
		all_unknown(ret_metrics, evidence, why);
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
	    parse_target(own->target ? own->target : by_sign, &target, reterr) < 0)
		return -1;
	if (own->torque >= 0 && !target.by_sign)
		return err_set(reterr, ERR_FILE, "torque is for target: %s; the target here is an angle",
		               by_sign);
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
