/* SPDX-License-Identifier: Apache-2.0 */
/*
 * What a device does when nobody speaks to it any more. It cannot be asked
 * while it is silent, so the reaction is what another device sees of the
 * shaft, and the latency counts from the last request that it was sent.
 */
#include <stdio.h>

#include "event.h"
#include "put.h"

struct silence_reaction {
	int from, channel, indication, back;
	double below, code;
	int64_t for_ns;
};

#define AT(member) offsetof(struct silence_reaction, member)
static const struct field fields[] = {
    {.key = "from",
     .kind = FIELD_MARK,
     .flags = FIELD_REQUIRED,
     .offset = AT(from),
     .text = "mark of the silence step: the last request before it"},
    {.key = "channel",
     .kind = FIELD_CHANNEL,
     .flags = FIELD_REQUIRED,
     .offset = AT(channel),
     .text = "torque or speed as another device sees it"},
    {.key = "below",
     .kind = FIELD_LEVEL,
     .flags = FIELD_REQUIRED,
     .offset = AT(below),
     .text = "the reaction is there where its magnitude is below"},
    {.key = "for",
     .kind = FIELD_DURATION,
     .flags = FIELD_POSITIVE,
     .fallback = "20 ms",
     .offset = AT(for_ns),
     .text = "and stays so for as long"},
    {.key = "back",
     .kind = FIELD_MARK,
     .offset = AT(back),
     .text = "mark of the step after the silence"},
    {.key = "indication",
     .kind = FIELD_CHANNEL,
     .offset = AT(indication),
     .text = "channel of the silenced device that shows the fault after its return"},
    {.key = "code",
     .kind = FIELD_LEVEL,
     .of = "indication",
     .offset = AT(code),
     .text = "what it must show then: a value or a value's name"},
};
static const struct field_table table = {
    "silence_reaction", "what happens when communication stops, and when it returns", fields,
    FIELD_COUNT(fields)};

enum { REACTION_TIME, CODE_RIGHT, STAYS_OFF };
static const struct metric_kind metrics[] = {
    {"reaction_time", METRIC_TIME,
     "from the last request to the last instant above the level before it stays below: guaranteed "
     "bounds",
     NULL},
    {"code_right", METRIC_YES_NO, "the first values read after the return show the code", NULL},
    {"stays_off", METRIC_YES_NO,
     "from the reaction to the end, the return of communication included, the channel stays below",
     NULL},
};

struct work {
	const struct check_input *in;
	const struct silence_reaction *params;
	struct metric *metrics;
	struct err *reterr;
	const struct mark *from;
};

static void unknown(struct work *work, size_t metric, const char *why)
{
	int channel = metric == CODE_RIGHT && work->params->indication >= 0 ? work->params->indication
	                                                                    : work->params->channel;
	metric_unknown(&work->metrics[metric], &metrics[metric],
	               shape_unit(metrics[metric].shape, NULL), work->in->channels[channel].evidence,
	               "%s", why);
}

static void put_reaction(struct work *work, const struct rows *rows, const struct latency *latency)
{
	if (!latency->known) {
		unknown(work, REACTION_TIME, latency->note);
		return;
	}
	struct metric *metric = &work->metrics[REACTION_TIME];
	put_value(metric, &metrics[REACTION_TIME], shape_unit(METRIC_TIME, NULL),
	          rows->series.channel->evidence, latency->value, latency->low, latency->high, 1);
	(void)snprintf(metric->note, sizeof metric->note, "%s", latency->note);
	size_t after = latency->seen ? latency->after : rows->count - 1;
	put_point(metric, series_earliest(&rows->series, rows->first + latency->before),
	          series_latest(&rows->series, rows->first + after), work->params->below);
}

/* One row surely above proves that it came back; staying off needs all rows and no gap. */
static void stays_off(struct work *work, const struct rows *rows, const struct latency *latency)
{
	char why[224];
	const struct channel_info *channel = rows->series.channel;
	if (!latency->known || !latency->seen) {
		unknown(work, STAYS_OFF, latency->note);
		return;
	}
	bool doubt = false;
	for (size_t i = latency->after; i < rows->count; i++) {
		int side = event_side(rows, i, work->params->below);
		if (side == -1 || (doubt && side == 0))
			continue;
		(void)snprintf(why, sizeof why, "%s was %.3g %s at %.3f ms after it had gone off",
		               channel->name, series_value(&rows->series, rows->first + i),
		               channel->unit->name,
		               (double)series_latest(&rows->series, rows->first + i) / 1e6);
		if (side == 1) {
			put_yes_no(&work->metrics[STAYS_OFF], &metrics[STAYS_OFF], channel->evidence, false,
			           why);
			return;
		}
		doubt = true;
	}
	if (doubt || rows_gap_within(work->in, rows, latency->after, rows->count, work->in->end_ns, why,
	                             sizeof why))
		unknown(work, STAYS_OFF, why);
	else
		put_yes_no(&work->metrics[STAYS_OFF], &metrics[STAYS_OFF], channel->evidence, true, "");
}

static int reaction(struct work *work)
{
	const struct silence_reaction *params = work->params;
	struct rows rows;
	struct latency latency;
	if (event_rows(work->in, params->channel, work->from, work->in->end_ns, &rows, work->reterr) <
	    0)
		return -1;
	if (!rows.usable) {
		unknown(work, REACTION_TIME, rows.why);
		unknown(work, STAYS_OFF, rows.why);
		return 0;
	}
	event_off(&rows, work->from, params->below, params->for_ns, &latency);
	put_reaction(work, &rows, &latency);
	stays_off(work, &rows, &latency);
	return 0;
}

static int code_right(struct work *work)
{
	const struct silence_reaction *params = work->params;
	if (params->indication < 0) {
		unknown(work, CODE_RIGHT, "the check names no indication");
		return 0;
	}
	int64_t from = work->from->latest_ns;
	char why[224];
	if (params->back >= 0) {
		const struct mark *back = mark_reached(work->in, params->back, why, sizeof why);
		if (!back) {
			unknown(work, CODE_RIGHT, why);
			return 0;
		}
		from = back->earliest_ns;
	}
	/* The first value asked for after the silence; it may be as old as the device's refresh. */
	struct rows rows;
	if (rows_take(work->in, params->indication, (struct span){from, work->in->end_ns}, &rows,
	              work->reterr) < 0)
		return -1;
	if (!rows.usable) {
		unknown(work, CODE_RIGHT, rows.why);
		return 0;
	}
	const struct channel_info *channel = rows.series.channel;
	double shown = series_value(&rows.series, rows.first);
	const char *name = channel_value_name(channel, shown);
	const char *due = channel_value_name(channel, params->code);
	(void)snprintf(why, sizeof why, "the first value after the silence was %g%s%s; due was %g%s%s",
	               shown, name ? " " : "", name ? name : "", params->code, due ? " " : "",
	               due ? due : "");
	put_yes_no(&work->metrics[CODE_RIGHT], &metrics[CODE_RIGHT], channel->evidence,
	           shown == params->code, why);
	return 0;
}

static int evaluate(const struct check_input *in, const void *params, struct metric *ret_metrics,
                    size_t *ret_count, struct err *reterr)
{
	struct work work = {.in = in, .params = params, .metrics = ret_metrics, .reterr = reterr};
	*ret_count = FIELD_COUNT(metrics);
	char why[224];
	work.from = mark_reached(in, work.params->from, why, sizeof why);
	if (!work.from) {
		for (size_t i = 0; i < FIELD_COUNT(metrics); i++)
			unknown(&work, i, why);
		return 0;
	}
	return reaction(&work) < 0 || code_right(&work) < 0 ? -1 : 0;
}

static int verify(const void *params, const struct channel_info *channels,
                  const struct machine *machine, struct err *reterr)
{
	(void)machine;
	const struct silence_reaction *own = params;
	if (channels[own->channel].evidence == EVIDENCE_SELF_REPORTED)
		return err_set(
		    reterr, ERR_FILE,
		    "channel: %s comes from the device under test, which cannot be read in silence",
		    channels[own->channel].name);
	if (!(own->below > 0))
		return err_set(reterr, ERR_FILE, "below must be above 0: it is a magnitude");
	if ((own->indication >= 0) != !isnan(own->code))
		return err_set(reterr, ERR_FILE, "indication and code belong together");
	return 0;
}

const struct check_kind check_silence_reaction = {
    .name = "silence_reaction",
    .text = "what happens when communication stops, and when it returns",
    .fields = &table,
    .params_size = sizeof(struct silence_reaction),
    .metrics = metrics,
    .metric_count = FIELD_COUNT(metrics),
    .evaluate = evaluate,
    .verify = verify,
};
