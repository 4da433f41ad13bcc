/* SPDX-License-Identifier: Apache-2.0 */
/*
 * How a channel follows its command along a ramp.
 *
 *           command  /
 *                   / <- mean_error (negative: it lags)
 *                  / /
 *                 / /  channel            lag = -mean_error / rate
 *
 * The command is taken as it was sent: a staircase, each stair in effect from
 * an instant in its interval. A row during which two stairs may have been in
 * effect is compared with both. The line through the stairs was rejected as
 * the reference, since no device was ever told it; it lies half a stair ahead.
 */
#include <stdio.h>

#include "put.h"
#include "window.h"

struct tracking {
	int channel, command;
	struct window window;
};

#define AT(member) offsetof(struct tracking, member)
static const struct field fields[] = {
    {.key = "channel",
     .kind = FIELD_CHANNEL,
     .flags = FIELD_REQUIRED,
     .offset = AT(channel),
     .text = "what follows the command"},
    {.key = "command",
     .kind = FIELD_CHANNEL,
     .flags = FIELD_REQUIRED | FIELD_COMMAND,
     .offset = AT(command),
     .text = "the commanded channel, ramped by the stimulus"},
    {.key = "window",
     .kind = FIELD_WINDOW,
     .offset = AT(window),
     .text = "the samples that are judged; a part of the ramp, after the begin has died away"},
};
static const struct field_table table = {"tracking", "how a channel follows a ramp", fields,
                                         FIELD_COUNT(fields)};

enum { FOLLOWING_ERROR, MEAN_ERROR, LAG };
static const struct metric_kind metrics[] = {
    {"following_error", METRIC_LEVEL, "largest |channel - command| of a sample", NULL},
    {"mean_error", METRIC_LEVEL, "mean of channel - command; against the ramp where it lags", NULL},
    {"lag", METRIC_TIME, "-mean_error / rate of the command over the window", NULL},
};

enum { ROWS_LEAST = 5 };

struct range {
	double low, high;
	bool found;
};

/*
 * What may have been in effect somewhere in [from, to], in the channel's unit.
 * *begin: the first command that may still matter; rows are asked in order.
 */
static struct range in_effect(const struct check_input *in, int channel, double scale,
                              int64_t from_ns, int64_t to_ns, size_t *begin)
{
	struct range range = {0};
	for (size_t i = *begin; i < in->command_count; i++) {
		const struct command *command = &in->commands[i];
		if (command->channel != channel)
			continue;
		if (command->earliest_ns > to_ns)
			break;
		double value = command->value * scale;
		if (command->latest_ns <= from_ns) { /* it replaced all before it */
			range = (struct range){value, value, true};
			*begin = i;
		} else if (range.found) {
			range.low = fmin(range.low, value);
			range.high = fmax(range.high, value);
		}
	}
	return range;
}

struct tracked {
	struct sum errors, doubts, squares;
	double largest, least_high, most_low; /* of |error| */
	size_t at, count;
	int64_t first_ns, last_ns;
	double first_command, last_command, stair;
};

static bool follow(const struct check_input *in, const struct tracking *own,
                   const struct rows *rows, double *errors, struct tracked *ret, char *why,
                   size_t size)
{
	const struct channel_info *channel = &in->channels[own->channel];
	const struct channel_info *command = &in->channels[own->command];
	double scale = command->unit->scale / channel->unit->scale;
	*ret = (struct tracked){.count = rows->count};
	size_t begin = 0;
	for (size_t i = 0; i < rows->count; i++) {
		size_t row = rows->first + i;
		int64_t from = series_earliest(&rows->series, row), to = series_latest(&rows->series, row);
		struct range told = in_effect(in, own->command, scale, from, to, &begin);
		if (!told.found) {
			(void)snprintf(why, size, "%s was not commanded before the window", command->name);
			return false;
		}
		double middle = (told.low + told.high) / 2, half = (told.high - told.low) / 2;
		double doubt = half + series_error_limit(&rows->series, row) + channel->resolution / 2;
		errors[i] = series_value(&rows->series, row) - middle;
		double size_of = fabs(errors[i]);
		if (size_of > ret->largest) {
			ret->largest = size_of;
			ret->at = row;
		}
		ret->most_low = fmax(ret->most_low, size_of - doubt);
		ret->least_high = fmax(ret->least_high, size_of + doubt);
		ret->stair = fmax(ret->stair, half);
		sum_add(&ret->errors, errors[i]);
		sum_add(&ret->doubts, half + series_error_limit(&rows->series, row));
		if (i == 0) {
			ret->first_ns = from + (to - from) / 2;
			ret->first_command = middle;
		}
		ret->last_ns = from + (to - from) / 2;
		ret->last_command = middle;
	}
	return true;
}

static void put_means(const struct tracking *own, const struct check_input *in,
                      const struct tracked *tracked, const double *errors,
                      struct metric *ret_metrics)
{
	const struct channel_info *channel = &in->channels[own->channel];
	double n = (double)tracked->count, mean = sum_value(&tracked->errors) / n;
	double squares = 0, products = 0;
	for (size_t i = 0; i < tracked->count; i++) {
		squares += (errors[i] - mean) * (errors[i] - mean);
		products += i ? (errors[i] - mean) * (errors[i - 1] - mean) : 0;
	}
	double sd = sqrt(squares / (n - 1)), lag1 = squares > 0 ? fmax(0, products / squares) : 0;
	double independent = fmax(1, n * (1 - lag1) / (1 + lag1));
	struct budget budget = {0};
	budget_random(&budget, sd / sqrt(independent), fmax(independent - 1, 1));
	budget_other(&budget, sum_value(&tracked->doubts) / n / sqrt(3));
	budget_other(&budget, rounding_bias(channel->resolution, sd) / sqrt(3));
	double expanded = budget_expanded(&budget);
	put_value(&ret_metrics[MEAN_ERROR], &metrics[MEAN_ERROR], channel->unit, channel->evidence,
	          mean, mean - expanded, mean + expanded, 0.95);
	double duration = (double)(tracked->last_ns - tracked->first_ns) / 1e9;
	double rise = tracked->last_command - tracked->first_command;
	double doubt = 2 * tracked->stair;
	const struct unit *second = unit_find("s", 1);
	if (!(fabs(rise) > 4 * doubt) || rise == 0) {
		metric_unknown(&ret_metrics[LAG], &metrics[LAG], second, channel->evidence,
		               "%s rose by %.3g +- %.2g %s in the window: no ramp, so no lag",
		               in->channels[own->command].name, rise, doubt, channel->unit->name);
		return;
	}
	double sign = rise > 0 ? -1 : 1, size = fabs(rise);
	double low = fmin(sign * (mean - expanded), sign * (mean + expanded)) * duration;
	double high = fmax(sign * (mean - expanded), sign * (mean + expanded)) * duration;
	double value = sign * mean * duration / size; /* rounding must not put it beside its interval */
	put_value(&ret_metrics[LAG], &metrics[LAG], second, channel->evidence, value,
	          fmin(value, fmin(low / (size - doubt), low / (size + doubt))),
	          fmax(value, fmax(high / (size - doubt), high / (size + doubt))), 0.95);
}

static int judge(const struct check_input *in, const struct tracking *own, struct span span,
                 struct metric *ret_metrics, char *why, size_t size, struct err *reterr)
{
	const struct channel_info *channel = &in->channels[own->channel];
	struct rows rows;
	struct tracked tracked;
	if (rows_take(in, own->channel, span, &rows, reterr) < 0)
		return -1;
	if (!rows.usable)
		(void)snprintf(why, size, "%s", rows.why);
	else if (rows.count < ROWS_LEAST)
		(void)snprintf(why, size,
		               "only %zu samples of %s in the window, %d are needed: hold longer",
		               rows.count, channel->name, ROWS_LEAST);
	if (why[0] || rows_have_gap(in, &rows, why, size))
		return 0;
	double *errors = arena_array(in->scratch, rows.count, sizeof *errors);
	if (!errors)
		return err_set(reterr, ERR_NOMEM, "memory ran out while judging %s", channel->name);
	if (!follow(in, own, &rows, errors, &tracked, why, size))
		return 0;
	put_value(&ret_metrics[FOLLOWING_ERROR], &metrics[FOLLOWING_ERROR], channel->unit,
	          channel->evidence, tracked.largest, tracked.most_low, tracked.least_high, 1);
	put_means(own, in, &tracked, errors, ret_metrics);
	put_point(&ret_metrics[FOLLOWING_ERROR], series_earliest(&rows.series, tracked.at),
	          series_latest(&rows.series, tracked.at), series_value(&rows.series, tracked.at));
	put_point(&ret_metrics[MEAN_ERROR], span.from_ns, span.to_ns, (double)NAN);
	return 0;
}

static int evaluate(const struct check_input *in, const void *params, struct metric *ret_metrics,
                    size_t *ret_count, struct err *reterr)
{
	const struct tracking *own = params;
	const struct channel_info *channel = &in->channels[own->channel];
	char why[224] = "";
	struct span span;
	*ret_count = FIELD_COUNT(metrics);
	if (window_span(in, &own->window, &span, why, sizeof why) &&
	    judge(in, own, span, ret_metrics, why, sizeof why, reterr) < 0)
		return -1;
	if (why[0])
		for (size_t i = 0; i < FIELD_COUNT(metrics); i++)
			metric_unknown(&ret_metrics[i], &metrics[i],
			               shape_unit(metrics[i].shape, channel->unit), channel->evidence, "%s",
			               why);
	return 0;
}

static int verify(const void *params, const struct channel_info *channels,
                  const struct machine *machine, struct err *reterr)
{
	const struct tracking *own = params;
	const struct channel_info *channel = &channels[own->channel];
	const struct channel_info *command = &channels[own->command];
	(void)machine;
	if (channel->wraps > 0)
		return err_set(reterr, ERR_FILE, "%s wraps around: it cannot follow a ramp", channel->name);
	if (!dimension_agrees(channel->unit->dimension, command->unit->dimension))
		return err_set(reterr, ERR_FILE, "%s is in %s and %s in %s: they cannot be compared",
		               channel->name, channel->unit->name, command->name, command->unit->name);
	return 0;
}

const struct check_kind check_tracking = {
    .name = "tracking",
    .text = "how a channel follows its command along a ramp",
    .fields = &table,
    .params_size = sizeof(struct tracking),
    .metrics = metrics,
    .metric_count = FIELD_COUNT(metrics),
    .evaluate = evaluate,
    .verify = verify,
};
