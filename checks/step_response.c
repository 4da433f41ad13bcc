/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The step response: finds the levels before and after, proves that they are
 * steady (step_levels.c), and hands the rows between to response.c.
 *
 * Both levels are measured, for a command says what should be, not what was.
 * The histogram method of IEEE Std 181 was rejected as the default: it finds
 * two levels in any record, also where nothing ever settled.
 */
#include <stdio.h>

#include "check.h"
#include "step_work.h"

static const char *const percent_choices[] = {"step", "rated", NULL};

#define AT(member) offsetof(struct step_response, member)
static const struct field fields[] = {
    {.key = "channel",
     .kind = FIELD_CHANNEL,
     .flags = FIELD_REQUIRED,
     .offset = AT(channel),
     .text = "what answers the step"},
    {.key = "from",
     .kind = FIELD_MARK,
     .flags = FIELD_REQUIRED,
     .offset = AT(from),
     .text = "mark of the step's command"},
    {.key = "for",
     .kind = FIELD_DURATION,
     .offset = AT(for_ns),
     .text = "how much after the mark is judged; the rest of the stimulus unless given"},
    {.key = "initial_for",
     .kind = FIELD_DURATION,
     .flags = FIELD_POSITIVE,
     .fallback = "100 ms",
     .offset = AT(initial_ns),
     .text = "the initial value is the mean of as much before the mark, as far as the stimulus "
             "goes back"},
    {.key = "final_for",
     .kind = FIELD_DURATION,
     .offset = AT(final_ns),
     .text = "the final value is the mean of the last part of this length; a fifth of what is "
             "judged unless given"},
    {.key = "percent_of",
     .kind = FIELD_CHOICE,
     .choices = percent_choices,
     .fallback = "step",
     .offset = AT(percent_of),
     .text = "what 100 % are of overshoot, undershoot and band: the measured step, or the rated "
             "value of the machine"},
    {.key = "command",
     .kind = FIELD_CHANNEL,
     .flags = FIELD_COMMAND,
     .offset = AT(command),
     .text = "commanded channel that says the target; the last one of the channel's dimension set "
             "at the mark unless given"},
};
static const struct field_table table = {
    "step_response", "how a channel answers a step of its command", fields, FIELD_COUNT(fields)};

static const struct field rise_fields[] = {
    {.key = "from",
     .kind = FIELD_QUANTITY,
     .dimension = &DIM_NUMBER,
     .least = 0,
     .most = 1,
     .fallback = "10 %",
     .offset = AT(rise_from),
     .text = "lower level, of the step"},
    {.key = "to",
     .kind = FIELD_QUANTITY,
     .dimension = &DIM_NUMBER,
     .least = 0,
     .most = 1,
     .fallback = "90 %",
     .offset = AT(rise_to),
     .text = "upper level, of the step"},
};
static const struct field_table rise_options = {"rise_time", "levels of the rise time", rise_fields,
                                                FIELD_COUNT(rise_fields)};
static const struct field dead_fields[] = {
    {.key = "level",
     .kind = FIELD_QUANTITY,
     .dimension = &DIM_NUMBER,
     .flags = FIELD_POSITIVE,
     .least = 0,
     .most = 0.5,
     .fallback = "5 %",
     .offset = AT(dead_level),
     .text = "the answer has begun at this part of the step"},
};
static const struct field_table dead_options = {"dead_time", "level of the dead time", dead_fields,
                                                FIELD_COUNT(dead_fields)};
static const struct field band_fields[] = {
    {.key = "band",
     .kind = FIELD_QUANTITY,
     .dimension = &DIM_NUMBER,
     .flags = FIELD_POSITIVE,
     .least = 0,
     .most = 1,
     .fallback = "2 %",
     .offset = AT(band),
     .text = "half-width of the band around the final value"},
};
static const struct field_table band_options = {"settling_time", "band of the settling time",
                                                band_fields, FIELD_COUNT(band_fields)};

enum {
	DEAD_TIME,
	RISE_TIME,
	PEAK_TIME,
	OVERSHOOT,
	UNDERSHOOT,
	SETTLING_TIME,
	STEADY_STATE_ERROR,
	RIPPLE,
	RIPPLE_RMS
};
static const struct metric_kind metrics[] = {
    {"dead_time", METRIC_TIME,
     "from the command to the crossing of level (5 % of the step unless said)", &dead_options},
    {"rise_time", METRIC_TIME,
     "from the crossing of 10 % to that of 90 % of the step, unless other levels are said",
     &rise_options},
    {"peak_time", METRIC_TIME, "from the command to the largest value beyond the final one", NULL},
    {"overshoot", METRIC_PERCENT,
     "(largest value - final value) / step, seen in the direction of the step; 0 where none", NULL},
    {"undershoot", METRIC_PERCENT,
     "swing back after the first crossing of the final value: (final value - smallest value) / "
     "step; 0 where none",
     NULL},
    {"settling_time", METRIC_TIME,
     "from the command to the last entry into the band around the final value; inside to the end",
     &band_options},
    {"steady_state_error", METRIC_LEVEL, "final value - commanded value", NULL},
    {"ripple", METRIC_LEVEL, "peak to peak of the settled part, as sampled", NULL},
    {"ripple_rms", METRIC_LEVEL, "standard deviation of the settled part, as sampled", NULL},
};

static const struct unit *metric_unit(const struct step_work *work, size_t metric)
{
	switch (metrics[metric].shape) {
	case METRIC_TIME:
		return unit_find("s", 1);
	case METRIC_PERCENT:
		return unit_percent();
	default:
		return work->channel->unit;
	}
}

static void unknown(struct step_work *work, size_t metric, const char *why)
{
	metric_unknown(&work->metrics[metric], &metrics[metric], metric_unit(work, metric),
	               work->channel->evidence, "%s", why);
}

static void all_unknown(struct step_work *work, const char *why)
{
	for (size_t i = 0; i < FIELD_COUNT(metrics); i++)
		unknown(work, i, why);
}

static int64_t at_ns(const struct step_work *work, double t)
{
	return work->origin_ns + (int64_t)llround(t * 1e9);
}

static void put(struct step_work *work, size_t index, const struct measured *measured)
{
	if (!measured->known) {
		unknown(work, index, measured->why);
		return;
	}
	struct metric *metric = &work->metrics[index];
	*metric = (struct metric){
	    .kind = &metrics[index],
	    .value = measured->value,
	    .low = measured->low,
	    .high = measured->high,
	    .coverage = measured->coverage,
	    .unit = metric_unit(work, index),
	    .evidence = work->channel->evidence,
	};
	(void)snprintf(metric->note, sizeof metric->note, "%s", measured->why);
	metric->points[0] = (struct metric_point){
	    .label = metrics[index].name,
	    .earliest_ns = at_ns(work, measured->at_low),
	    .latest_ns = at_ns(work, measured->at_high),
	    .level = measured->level,
	};
	metric->point_count = 1;
}

static void put_level(struct step_work *work, size_t index, double value, double low, double high,
                      double coverage)
{
	struct measured measured = {
	    .known = true,
	    .value = value,
	    .low = low,
	    .high = high,
	    .coverage = coverage,
	    .level = work->response.final,
	};
	struct stretch rows = work->response.rows;
	measured.at_low = stretch_time(&rows, work->final_begin);
	measured.at_high = stretch_time(&rows, rows.count - 1);
	put(work, index, &measured);
}

/* The final value drifts: whether the values also prove that nothing settled. */
static void unsettled(struct step_work *work)
{
	const struct response *response = &work->response;
	double last = stretch_time(&response->rows, response->rows.count - 1);
	double low_y = (double)INFINITY, high_y = -(double)INFINITY;
	for (size_t i = work->initial_count; i < response->rows.count; i++) {
		low_y = fmin(low_y, stretch_value(&response->rows, i));
		high_y = fmax(high_y, stretch_value(&response->rows, i));
	}
	/* The step cannot be larger than this, wherever it would have ended. */
	double largest = fmax(fabs(high_y - response->initial), fabs(low_y - response->initial));
	double hundred = response->of_step ? largest : response->hundred;
	double width = 2 * (work->params->band * hundred + response->error_limit);
	size_t row = response_unsettled(&response->rows, width);
	if (row == SIZE_MAX || row < work->initial_count)
		return;
	double t = stretch_time(&response->rows, row) - response->mark_half -
	           2 * stretch_time_u(&response->rows, row);
	bool proven = t > 0.8 * last;
	struct measured measured = {
	    .known = true,
	    .value = proven ? (double)INFINITY : (double)NAN,
	    .low = fmax(t, 0),
	    .high = (double)INFINITY,
	    .coverage = 0.95,
	    .at_low = stretch_time(&response->rows, row),
	    .at_high = last,
	    .level = (double)NAN,
	};
	(void)snprintf(measured.why, sizeof measured.why,
	               "it had not settled by %.4g s after the command; the samples end at %.4g s", t,
	               last);
	put(work, SETTLING_TIME, &measured);
}

static void settled_part(struct step_work *work)
{
	const struct rows *rows = &work->rows;
	struct stretch stretch = rows_stretch(rows, work->final_begin, rows->count, work->origin_ns);
	struct summary summary;
	summarise(&stretch, &summary);
	double target;
	if (step_commanded(work, &target)) {
		struct budget budget = work->final_budget;
		budget_other(&budget, work->final_limit / sqrt(3));
		double error = summary.mean - target, expanded = budget_expanded(&budget);
		put_level(work, STEADY_STATE_ERROR, error, error - expanded, error + expanded, 0.95);
	} else {
		unknown(work, STEADY_STATE_ERROR, work->why);
	}
	double spread = summary.largest - summary.least;
	double doubt = work->channel->resolution + 2 * work->final_limit;
	put_level(work, RIPPLE, spread, fmax(0, spread - doubt), spread + doubt, 1);
	struct budget budget = {0};
	double nu = fmax(summary.independent - 1, 1);
	budget_random(&budget, summary.sd / sqrt(2 * nu), nu);
	budget_other(&budget, work->channel->resolution / sqrt(12));
	budget_other(&budget, work->final_limit / sqrt(3));
	double expanded = budget_expanded(&budget);
	put_level(work, RIPPLE_RMS, summary.sd, fmax(0, summary.sd - expanded), summary.sd + expanded,
	          0.95);
}

/* Whether samples are missing in [begin, end), or at the end of what is judged. */
static bool gap_in(struct step_work *work, size_t begin, size_t end)
{
	int64_t to = end == work->rows.count ? work->rows.span.to_ns : INT64_MIN;
	return rows_gap_within(work->in, &work->rows, begin, end, to, work->why, sizeof work->why);
}

static void shape(struct step_work *work)
{
	const struct step_response *params = work->params;
	struct measured measured[4];
	response_crossing(&work->response, params->dead_level, &measured[0]);
	put(work, DEAD_TIME, &measured[0]);
	response_transition(&work->response, params->rise_from, params->rise_to, &measured[0]);
	put(work, RISE_TIME, &measured[0]);
	if (gap_in(work, work->initial_count - 1, work->rows.count)) {
		static const size_t hidden[] = {PEAK_TIME, OVERSHOOT, UNDERSHOOT, SETTLING_TIME};
		for (size_t i = 0; i < FIELD_COUNT(hidden); i++)
			unknown(work, hidden[i], work->why);
		return;
	}
	response_peak(&work->response, &measured[0], &measured[1], &measured[2]);
	response_settling(&work->response, params->band, &measured[3]);
	put(work, OVERSHOOT, &measured[0]);
	put(work, PEAK_TIME, &measured[1]);
	put(work, UNDERSHOOT, &measured[2]);
	put(work, SETTLING_TIME, &measured[3]);
}

/*
 * The final value and what hangs on it alone need no steady initial value;
 * everything else needs both.
 */
static void judge(struct step_work *work)
{
	size_t count = work->rows.count;
	if (!step_split(work) || !step_levels(work) || gap_in(work, work->final_begin, count)) {
		all_unknown(work, work->why);
		return;
	}
	bool begun =
	    step_steady(work, &work->initial, "initial") && !gap_in(work, 0, work->initial_count);
	if (!begun)
		all_unknown(work, work->why);
	if (!step_steady(work, &work->final, "final")) {
		all_unknown(work, work->why);
		if (begun && !gap_in(work, work->initial_count - 1, count))
			unsettled(work);
		return;
	}
	if (begun && step_moved(work))
		shape(work);
	else
		all_unknown(work, work->why);
	settled_part(work);
}

static int evaluate(const struct check_input *in, const void *params, struct metric *ret_metrics,
                    size_t *ret_count, struct err *reterr)
{
	const struct step_response *own = params;
	struct step_work work = {
	    .in = in,
	    .params = own,
	    .channel = &in->channels[own->channel],
	    .metrics = ret_metrics,
	};
	*ret_count = FIELD_COUNT(metrics);
	work.mark = mark_reached(in, own->from, work.why, sizeof work.why);
	if (!work.mark) {
		all_unknown(&work, work.why);
		return 0;
	}
	work.origin_ns = work.mark->earliest_ns + (work.mark->latest_ns - work.mark->earliest_ns) / 2;
	struct window window = {own->from, 0, own->for_ns};
	struct span span;
	if (!window_span(in, &window, &span, work.why, sizeof work.why)) {
		all_unknown(&work, work.why);
		return 0;
	}
	span.from_ns = work.mark->earliest_ns - own->initial_ns;
	if (span.from_ns < in->begin_ns)
		span.from_ns = in->begin_ns;
	if (rows_take(in, own->channel, span, &work.rows, reterr) < 0)
		return -1;
	if (work.rows.usable)
		judge(&work);
	else
		all_unknown(&work, work.rows.why);
	return 0;
}

static int verify(const void *params, const struct channel_info *channels,
                  const struct machine *machine, struct err *reterr)
{
	const struct step_response *own = params;
	const struct channel_info *channel = &channels[own->channel];
	if (channel->wraps > 0)
		return err_set(reterr, ERR_FILE, "%s wraps around: a step of it has no size",
		               channel->name);
	if (!(own->rise_from < own->rise_to))
		return err_set(reterr, ERR_FILE, "rise_time: from must be below to");
	if (own->for_ns > 0 && own->final_ns >= own->for_ns)
		return err_set(reterr, ERR_FILE, "final_for must be shorter than for");
	if (own->percent_of == OF_RATED && !(step_rated(machine, channel) > 0))
		return err_set(reterr, ERR_FILE,
		               "percent_of: rated, but the machine has no rated value for %s",
		               channel->name);
	if (own->command >= 0 &&
	    !dimension_agrees(channels[own->command].unit->dimension, channel->unit->dimension))
		return err_set(reterr, ERR_FILE, "command %s is not of the dimension of %s",
		               channels[own->command].name, channel->name);
	return 0;
}

const struct check_kind check_step_response = {
    .name = "step_response",
    .text = "how a channel answers a step of its command",
    .fields = &table,
    .params_size = sizeof(struct step_response),
    .metrics = metrics,
    .metric_count = FIELD_COUNT(metrics),
    .evaluate = evaluate,
    .verify = verify,
};
