/* SPDX-License-Identifier: Apache-2.0 */
/*
 * How a controlled quantity answers a step of the load.
 *
 *      before ----+           _____________ band around the value before
 *                 |\  area   /  ^ recovery_time: last entry, then inside
 *                 | \_______/
 *                 |    ^ deviation (at deviation_time)
 *              the mark of the load's command
 *
 * Terms as used with IEC 61800-2 (dynamic deviation, recovery, dynamic
 * deviation area); its text was not at hand, so the formulas are stated here:
 * the reference is the value before the step, not the command, and the area is
 * that of the first lobe, from the command to the first return to the
 * reference. Catalogues often print the area in % s for 100 % of torque. The
 * net area over the whole window was rejected: it hangs on where one stops,
 * since every doubt in the reference is multiplied by the time.
 *
 * Levels and noise come from step_levels.c, shape from response.c with both
 * levels equal.
 */
#include <stdio.h>

#include "put.h"
#include "step_work.h"

struct load_step {
	int channel, from;
	int64_t for_ns, initial_ns, final_ns;
	double band;
};

#define AT(member) offsetof(struct load_step, member)
static const struct field fields[] = {
    {.key = "channel",
     .kind = FIELD_CHANNEL,
     .flags = FIELD_REQUIRED,
     .offset = AT(channel),
     .text = "what the load disturbs: the speed"},
    {.key = "from",
     .kind = FIELD_MARK,
     .flags = FIELD_REQUIRED,
     .offset = AT(from),
     .text = "mark of the load's command"},
    {.key = "for",
     .kind = FIELD_DURATION,
     .offset = AT(for_ns),
     .text = "how much after the mark is judged; the rest of the stimulus unless given"},
    {.key = "initial_for",
     .kind = FIELD_DURATION,
     .flags = FIELD_POSITIVE,
     .fallback = "100 ms",
     .offset = AT(initial_ns),
     .text = "the value before is the mean of as much before the mark"},
    {.key = "final_for",
     .kind = FIELD_DURATION,
     .offset = AT(final_ns),
     .text = "the value after is the mean of the last part of this length; a fifth of what is "
             "judged unless given"},
};
static const struct field_table table = {"load_step", "how a channel answers a step of load",
                                         fields, FIELD_COUNT(fields)};

static const struct field band_fields[] = {
    {.key = "band",
     .kind = FIELD_QUANTITY,
     .dimension = &DIM_NUMBER,
     .flags = FIELD_POSITIVE,
     .least = 0,
     .most = 1,
     .fallback = "1 %",
     .offset = AT(band),
     .text = "half-width of the band around the value before, of the rated value"},
};
static const struct field_table band_options = {"recovery_time", "band of the recovery time",
                                                band_fields, FIELD_COUNT(band_fields)};

enum { DEVIATION, DEVIATION_TIME, RECOVERY_TIME, DEVIATION_AREA, LASTING_DEVIATION };
static const struct metric_kind metrics[] = {
    {"deviation", METRIC_LEVEL, "largest |value - value before| after the mark", NULL},
    {"deviation_time", METRIC_TIME, "from the command to the largest deviation", NULL},
    {"recovery_time", METRIC_TIME,
     "from the command to the last entry into the band around the value before; inside to the end",
     &band_options},
    {"deviation_area", METRIC_LEVEL_TIME,
     "integral of |value - value before| from the command to the first return to the value before",
     NULL},
    {"lasting_deviation", METRIC_LEVEL, "value after - value before", NULL},
};

struct load_work {
	struct step_work step;
	size_t begin; /* the first row after the mark */
	size_t peak;  /* row of the largest sample on the side of the dip */
	int side;
};

static void put_measured(const struct load_work *work, size_t index, double scale,
                         const struct measured *measured, struct metric *ret)
{
	const struct channel_info *channel = work->step.channel;
	const struct unit *unit = shape_unit(metrics[index].shape, channel->unit);
	if (!measured->known) {
		metric_unknown(ret, &metrics[index], unit, channel->evidence, "%s", measured->why);
		return;
	}
	put_value(ret, &metrics[index], unit, channel->evidence, scale * measured->value,
	          scale * measured->low, scale * measured->high, measured->coverage);
	(void)snprintf(ret->note, sizeof ret->note, "%s", measured->why);
	put_point(ret, work->step.origin_ns + (int64_t)llround(measured->at_low * 1e9),
	          work->step.origin_ns + (int64_t)llround(measured->at_high * 1e9), measured->level);
}

static double away(const struct load_work *work, size_t row)
{
	const struct response *response = &work->step.response;
	return work->side * (stretch_value(&response->rows, row) - response->final);
}

/* The side to which the values go further: rows after the mark, means of three. */
static void find_side(struct load_work *work)
{
	const struct response *response = &work->step.response;
	size_t count = response->rows.count;
	double largest = 0;
	work->side = -1;
	work->peak = work->begin;
	for (size_t row = work->begin + 1; row + 1 < count; row++) {
		double mean = 0;
		for (size_t i = row - 1; i <= row + 1; i++)
			mean += (stretch_value(&response->rows, i) - response->final) / 3;
		if (fabs(mean) > largest) {
			largest = fabs(mean);
			work->side = mean > 0 ? 1 : -1;
			work->peak = row;
		}
	}
}

/*
 * The first lobe by the trapezoidal rule. Doubts: noise of the rows, the
 * reference over the whole lobe, the times of its rows, where noise hides its
 * end, and the bend between rows.
 */
static void area(const struct load_work *work, struct measured *ret)
{
	const struct response *response = &work->step.response;
	const struct stretch *rows = &response->rows;
	size_t end = work->peak, sure_end, count = rows->count;
	*ret = (struct measured){.level = response->final};
	double sure = 3 * response->noise + 2 * response->final_u;
	while (end < count && away(work, end) > 0)
		end++;
	bool back = end < count;
	if (!back)
		end = count - 1;
	size_t last_sure = work->peak;
	for (sure_end = work->peak; sure_end < count && away(work, sure_end) > -sure; sure_end++)
		if (sure_end <= end && away(work, sure_end) > sure)
			last_sure = sure_end;
	double doubtful = stretch_time(rows, end) - stretch_time(rows, last_sure);
	struct sum sum = {0}, squares = {0};
	double bend = 0, before_t = 0, before_y = 0, before_slope = 0;
	for (size_t row = work->begin; row <= end; row++) {
		double t = stretch_time(rows, row), y = row == end && back ? 0 : away(work, row);
		if (row == end && back) { /* the straight line to the reference */
			double next = away(work, row);
			t = before_t + (t - before_t) * before_y / (before_y - next);
		}
		double h = t - before_t;
		sum_add(&sum, h * (y + before_y) / 2);
		sum_add(&squares, h * h);
		double slope = h > 0 ? (y - before_y) / h : 0;
		if (row > work->begin)
			bend += h * h * fabs(slope - before_slope) / 12;
		before_t = t;
		before_y = y;
		before_slope = slope;
	}
	double length = fmax(before_t, 0), n = (double)(end - work->begin + 1);
	double share = response->independent > 0 ? response->independent : 1;
	/* The sum of bends holds the noise too; what noise alone gives is taken off. */
	bend = fmax(0, bend - n * (length / n) * response->noise * 2.4 / 12);
	struct budget budget = {0};
	budget_random(&budget, response->noise * sqrt(sum_value(&squares) / share), response->nu);
	budget_other(&budget, length * response->final_u);
	budget_other(&budget,
	             2 * stretch_time_u(rows, work->peak) * fabs(away(work, work->peak)) / sqrt(n));
	budget_other(&budget, bend / sqrt(3));
	double expanded = budget_expanded(&budget);
	double tail = doubtful * fmin(sure, fabs(away(work, last_sure))) / 2;
	double start = response->mark_half * fabs(away(work, work->begin));
	ret->known = true;
	ret->value = sum_value(&sum);
	ret->low = fmax(0, ret->value - expanded - tail - start);
	ret->high = ret->value + expanded + tail + start;
	ret->coverage = 0.95;
	ret->at_high = length;
	if (!back)
		(void)snprintf(ret->why, sizeof ret->why,
		               "it did not return to the value before: the area up to the end, %.4g s",
		               length);
}

static void lasting(struct load_work *work, struct metric *ret)
{
	struct step_work *step = &work->step;
	double value = step->final.line.mean_y - step->initial.line.mean_y;
	/* Limits of error of one instrument at nearly one value cancel; the rest does not. */
	double expanded =
	    hypot(budget_expanded(&step->initial_budget), budget_expanded(&step->final_budget));
	put_value(ret, &metrics[LASTING_DEVIATION], step->channel->unit, step->channel->evidence, value,
	          value - expanded, value + expanded, 0.95);
	put_point(ret, series_earliest(&step->rows.series, step->rows.first + step->final_begin),
	          step->rows.span.to_ns, step->final.line.mean_y);
}

/* Both levels are the value before, 100 % are the rated value. */
static void turn_to_dip(struct load_work *work)
{
	struct response *response = &work->step.response;
	response->hundred = step_rated(work->step.in->machine, work->step.channel);
	response->of_step = false;
	struct budget budget = work->step.initial_budget;
	response->final = response->initial;
	response->final_u = response->initial_u = budget_expanded(&budget) / 2;
	response->error_limit = 0; /* both values are of the same instrument, near each other */
	response->direction = 1;
	/* The pace of a step is none of a dip. */
	response->gap_most = rows_gap_limit(work->step.in, &work->step.rows);
	response->rise = response->busy_until = 0;
	work->begin = work->step.initial_count;
	const struct stretch *rows = &response->rows;
	while (work->begin < rows->count - 1 && stretch_time(rows, work->begin) < 0)
		work->begin++;
	find_side(work);
}

static bool ready(struct load_work *work)
{
	struct step_work *step = &work->step;
	if (!step_split(step) || !step_levels(step))
		return false;
	turn_to_dip(work);
	int64_t to = step->rows.span.to_ns;
	return step_steady(step, &step->initial, "initial") &&
	       !rows_gap_within(step->in, &step->rows, 0, step->rows.count, to, step->why,
	                        sizeof step->why);
}

static void all_unknown(struct load_work *work, const char *why)
{
	const struct channel_info *channel = work->step.channel;
	for (size_t i = 0; i < FIELD_COUNT(metrics); i++)
		metric_unknown(&work->step.metrics[i], &metrics[i],
		               shape_unit(metrics[i].shape, channel->unit), channel->evidence, "%s", why);
}

static void judge(struct load_work *work)
{
	struct step_work *step = &work->step;
	struct metric *ret = step->metrics;
	if (!ready(work)) {
		all_unknown(work, step->why);
		return;
	}
	const struct response *response = &step->response;
	struct measured height, time, recovery, lobe;
	double peak_t = stretch_time(&response->rows, work->peak);
	response_excursion(response, work->begin, response->rows.count, work->side, fabs(peak_t) / 10,
	                   &height, &time);
	put_measured(work, DEVIATION, response->hundred / 100, &height, &ret[DEVIATION]);
	if (!time.known)
		(void)snprintf(time.why, sizeof time.why, "no deviation stands out of the noise");
	put_measured(work, DEVIATION_TIME, 1, &time, &ret[DEVIATION_TIME]);
	response_settling(response, step->params->band, &recovery);
	put_measured(work, RECOVERY_TIME, 1, &recovery, &ret[RECOVERY_TIME]);
	if (time.known)
		area(work, &lobe);
	else
		lobe = time;
	put_measured(work, DEVIATION_AREA, 1, &lobe, &ret[DEVIATION_AREA]);
	if (step_steady(step, &step->final, "final"))
		lasting(work, &ret[LASTING_DEVIATION]);
	else
		metric_unknown(&ret[LASTING_DEVIATION], &metrics[LASTING_DEVIATION], step->channel->unit,
		               step->channel->evidence, "%s", step->why);
}

static int evaluate(const struct check_input *in, const void *params, struct metric *ret_metrics,
                    size_t *ret_count, struct err *reterr)
{
	const struct load_step *own = params;
	const struct step_response as_step = {
	    .channel = own->channel,
	    .from = own->from,
	    .command = -1,
	    .for_ns = own->for_ns,
	    .initial_ns = own->initial_ns,
	    .final_ns = own->final_ns,
	    .percent_of = OF_RATED,
	    .band = own->band,
	};
	struct load_work work = {.step = {
	                             .in = in,
	                             .params = &as_step,
	                             .channel = &in->channels[own->channel],
	                             .metrics = ret_metrics,
	                         }};
	struct step_work *step = &work.step;
	*ret_count = FIELD_COUNT(metrics);
	step->mark = mark_reached(in, own->from, step->why, sizeof step->why);
	struct window window = {own->from, 0, own->for_ns};
	struct span span;
	if (!step->mark || !window_span(in, &window, &span, step->why, sizeof step->why)) {
		all_unknown(&work, step->why);
		return 0;
	}
	step->origin_ns =
	    step->mark->earliest_ns + (step->mark->latest_ns - step->mark->earliest_ns) / 2;
	span.from_ns = step->mark->earliest_ns - own->initial_ns;
	if (span.from_ns < in->begin_ns)
		span.from_ns = in->begin_ns;
	if (rows_take(in, own->channel, span, &step->rows, reterr) < 0)
		return -1;
	if (step->rows.usable)
		judge(&work);
	else
		all_unknown(&work, step->rows.why);
	return 0;
}

static int verify(const void *params, const struct channel_info *channels,
                  const struct machine *machine, struct err *reterr)
{
	const struct load_step *own = params;
	const struct channel_info *channel = &channels[own->channel];
	if (channel->wraps > 0)
		return err_set(reterr, ERR_FILE, "%s wraps around: a deviation of it has no size",
		               channel->name);
	if (own->for_ns > 0 && own->final_ns >= own->for_ns)
		return err_set(reterr, ERR_FILE, "final_for must be shorter than for");
	if (!(step_rated(machine, channel) > 0))
		return err_set(reterr, ERR_FILE,
		               "the band is a part of the rated value, and the machine has none for %s",
		               channel->name);
	return 0;
}

const struct check_kind check_load_step = {
    .name = "load_step",
    .text = "how a channel answers a step of load",
    .fields = &table,
    .params_size = sizeof(struct load_step),
    .metrics = metrics,
    .metric_count = FIELD_COUNT(metrics),
    .evaluate = evaluate,
    .verify = verify,
};
