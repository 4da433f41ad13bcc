/* SPDX-License-Identifier: Apache-2.0 */
/*
 * How a fault is seen, reacted to, held and cleared. Latencies are guaranteed
 * intervals; the rest are statements that hold for the samples, and are
 * unknown where samples are missing.
 *
 * The detection is the first change of the indication, not the first sight of
 * the right code: a controller that shows a wrong code at once is quick and
 * wrong, and the report should say both.
 */
#include <stdio.h>

#include "event.h"
#include "put.h"

struct fault_reaction {
	int from, indication, torque, gone, restart, reset, again, running;
	double code, torque_below;
	int64_t torque_for_ns;
};

#define AT(member) offsetof(struct fault_reaction, member)
static const struct field fields[] = {
    {.key = "from",
     .kind = FIELD_MARK,
     .flags = FIELD_REQUIRED,
     .offset = AT(from),
     .text = "mark of the cause"},
    {.key = "indication",
     .kind = FIELD_CHANNEL,
     .flags = FIELD_REQUIRED,
     .offset = AT(indication),
     .text = "channel that shows the fault"},
    {.key = "code",
     .kind = FIELD_LEVEL,
     .flags = FIELD_REQUIRED,
     .of = "indication",
     .offset = AT(code),
     .text = "what it must show: a value or a value's name"},
    {.key = "torque",
     .kind = FIELD_CHANNEL,
     .offset = AT(torque),
     .text = "torque, from a device that is not under test"},
    {.key = "torque_below",
     .kind = FIELD_LEVEL,
     .of = "torque",
     .offset = AT(torque_below),
     .text = "torque is off where its magnitude is below"},
    {.key = "torque_for",
     .kind = FIELD_DURATION,
     .flags = FIELD_POSITIVE,
     .fallback = "20 ms",
     .offset = AT(torque_for_ns),
     .text = "and stays so for as long"},
    {.key = "gone",
     .kind = FIELD_MARK,
     .offset = AT(gone),
     .text = "mark at which the cause is removed"},
    {.key = "restart",
     .kind = FIELD_MARK,
     .offset = AT(restart),
     .text = "mark of a command to run that must be refused, before the reset"},
    {.key = "reset", .kind = FIELD_MARK, .offset = AT(reset), .text = "mark of the reset"},
    {.key = "again",
     .kind = FIELD_MARK,
     .offset = AT(again),
     .text = "mark of a command to run after the reset; the reset itself unless given"},
    {.key = "running",
     .kind = FIELD_CHANNEL,
     .offset = AT(running),
     .text = "channel that is 1 while the drive runs"},
};
static const struct field_table table = {"fault_reaction",
                                         "how a fault is seen, reacted to, held and cleared",
                                         fields, FIELD_COUNT(fields)};

enum {
	DETECTION_TIME,
	CODE_RIGHT,
	TORQUE_OFF_TIME,
	STAYS_LATCHED,
	RESTART_REFUSED,
	RESET_CLEARS,
	RESTARTS_CLEAN
};
static const struct metric_kind metrics[] = {
    {"detection_time", METRIC_TIME,
     "from the cause to the first change of the indication: guaranteed bounds", NULL},
    {"code_right", METRIC_YES_NO,
     "the indication changed to the code and to nothing else before it", NULL},
    {"torque_off_time", METRIC_TIME,
     "from the cause to the last instant with torque before it stays off: guaranteed bounds", NULL},
    {"stays_latched", METRIC_YES_NO,
     "the indication stays what it became, until the reset or the end", NULL},
    {"restart_refused", METRIC_YES_NO,
     "after the mark restart nothing runs and no torque comes, until the reset or the end", NULL},
    {"reset_clears", METRIC_YES_NO,
     "after the reset the indication is again what it was before the cause", NULL},
    {"restarts_clean", METRIC_YES_NO, "after the mark again the drive runs, and no fault is shown",
     NULL},
};

struct work {
	const struct check_input *in;
	const struct fault_reaction *params;
	struct metric *metrics;
	struct err *reterr;
	const struct mark *from, *gone, *restart, *reset, *again; /* NULL: not given or not reached */
	struct rows indication;
	double idle;   /* what the indication showed before the cause */
	double raised; /* what it changed to; NaN: nothing */
	struct latency detection;
};

static enum evidence metric_evidence(const struct work *work, size_t metric)
{
	const struct fault_reaction *params = work->params;
	int channel = params->indication;
	if (metric == TORQUE_OFF_TIME && params->torque >= 0)
		channel = params->torque;
	if (metric == RESTART_REFUSED)
		channel = params->torque >= 0 ? params->torque
		                              : (params->running >= 0 ? params->running : channel);
	return work->in->channels[channel].evidence;
}

static void unknown(struct work *work, size_t metric, const char *why)
{
	metric_unknown(&work->metrics[metric], &metrics[metric],
	               shape_unit(metrics[metric].shape, NULL), metric_evidence(work, metric), "%s",
	               why);
}

static void answer(struct work *work, size_t metric, bool yes, const char *note)
{
	put_yes_no(&work->metrics[metric], &metrics[metric], metric_evidence(work, metric), yes, note);
}

static void put_latency(struct work *work, size_t metric, const struct rows *rows,
                        const struct latency *latency)
{
	if (!latency->known) {
		unknown(work, metric, latency->note);
		return;
	}
	put_value(&work->metrics[metric], &metrics[metric], shape_unit(METRIC_TIME, NULL),
	          metric_evidence(work, metric), latency->value, latency->low, latency->high, 1);
	(void)snprintf(work->metrics[metric].note, sizeof work->metrics[metric].note, "%s",
	               latency->note);
	size_t after = latency->seen ? latency->after : rows->count - 1;
	put_point(&work->metrics[metric], series_earliest(&rows->series, rows->first + latency->before),
	          series_latest(&rows->series, rows->first + after),
	          series_value(&rows->series, rows->first + after));
}

/* "encoder_loss (3)" or "3". */
static const char *code_text(const struct work *work, double code, char *buffer, size_t size)
{
	const char *name = channel_value_name(&work->in->channels[work->params->indication], code);
	if (name)
		(void)snprintf(buffer, size, "%s (%g)", name, code);
	else
		(void)snprintf(buffer, size, "%g", code);
	return buffer;
}

static double value_at(const struct rows *rows, size_t i)
{
	return series_value(&rows->series, rows->first + i);
}

static double ms_at(const struct rows *rows, size_t i)
{
	return (double)series_latest(&rows->series, rows->first + i) / 1e6;
}

static void code_right(struct work *work)
{
	char note[224], idle[64], raised[64], wanted[64];
	code_text(work, work->idle, idle, sizeof idle);
	code_text(work, work->params->code, wanted, sizeof wanted);
	if (!work->detection.known) {
		unknown(work, CODE_RIGHT, work->detection.note);
	} else if (work->idle == work->params->code) {
		(void)snprintf(note, sizeof note, "the indication showed %s before the cause already",
		               wanted);
		unknown(work, CODE_RIGHT, note);
	} else if (!work->detection.seen) {
		(void)snprintf(
		    note, sizeof note,
		    "the indication stayed %s to the last sample, %.4g s after the cause; %s was due", idle,
		    work->detection.low, wanted);
		answer(work, CODE_RIGHT, false, note);
	} else {
		bool right = work->raised == work->params->code;
		(void)snprintf(note, sizeof note, "it changed from %s to %s%s%s", idle,
		               code_text(work, work->raised, raised, sizeof raised),
		               right ? "" : "; due was ", right ? "" : wanted);
		answer(work, CODE_RIGHT, right, note);
	}
}

/* Rows [*begin, *end) of a channel in [from, to]; false with why[size]: none, a gap. */
static int rows_between(struct work *work, int channel, int64_t from_ns, int64_t to_ns,
                        struct rows *ret_rows, bool *ret_usable, char *why, size_t size)
{
	*ret_usable = false;
	if (rows_take(work->in, channel, (struct span){from_ns, to_ns}, ret_rows, work->reterr) < 0)
		return -1;
	if (!ret_rows->usable)
		(void)snprintf(why, size, "%s", ret_rows->why);
	else
		*ret_usable = !rows_have_gap(work->in, ret_rows, why, size);
	return 0;
}

/* A contradiction is proven by one row, whatever is missing; agreement needs all of them. */
static void stays_latched(struct work *work)
{
	char why[224], now[64], was[64];
	if (!work->detection.known || !work->detection.seen) {
		unknown(work, STAYS_LATCHED,
		        work->detection.known ? "nothing was indicated that could stay"
		                              : work->detection.note);
		return;
	}
	const struct rows *rows = &work->indication;
	int64_t to = work->reset ? work->reset->earliest_ns : work->in->end_ns;
	int64_t limit = rows_gap_limit(work->in, rows);
	int64_t before = series_received(&rows->series, rows->first + work->detection.after);
	int64_t widest = 0;
	for (size_t i = work->detection.after; i <= rows->count; i++) {
		bool over = i == rows->count || series_latest(&rows->series, rows->first + i) > to;
		int64_t received = over ? to : series_received(&rows->series, rows->first + i);
		widest = received - before > widest ? received - before : widest;
		before = received;
		if (over)
			break;
		if (value_at(rows, i) == work->raised)
			continue;
		(void)snprintf(why, sizeof why, "it showed %s at %.3f ms, after %s",
		               code_text(work, value_at(rows, i), now, sizeof now), ms_at(rows, i),
		               code_text(work, work->raised, was, sizeof was));
		answer(work, STAYS_LATCHED, false, why);
		return;
	}
	if (widest > limit) {
		(void)snprintf(why, sizeof why, "no sample of the indication for %.3f ms",
		               (double)widest / 1e6);
		unknown(work, STAYS_LATCHED, why);
	} else if (work->params->gone >= 0 && (!work->gone || work->gone->latest_ns >= to)) {
		unknown(work, STAYS_LATCHED, "there is no time between the mark gone and the reset");
	} else {
		(void)snprintf(why, sizeof why, "it showed %s to the %s",
		               code_text(work, work->raised, was, sizeof was),
		               work->reset ? "reset" : "end of the stimulus");
		answer(work, STAYS_LATCHED, true, why);
	}
}

static int torque_off(struct work *work)
{
	const struct fault_reaction *params = work->params;
	struct rows rows;
	struct latency latency;
	if (params->torque < 0 || !(params->torque_below > 0)) {
		unknown(work, TORQUE_OFF_TIME, "the check names no torque and torque_below");
		return 0;
	}
	if (event_rows(work->in, params->torque, work->from, work->in->end_ns, &rows, work->reterr) < 0)
		return -1;
	if (!rows.usable) {
		unknown(work, TORQUE_OFF_TIME, rows.why);
		return 0;
	}
	event_off(&rows, work->from, params->torque_below, params->torque_for_ns, &latency);
	put_latency(work, TORQUE_OFF_TIME, &rows, &latency);
	return 0;
}

/* 1: surely something runs; 0: surely nothing; -1: not known; -2: memory. note says what. */
static int runs(struct work *work, int64_t from_ns, int64_t to_ns, char *note, size_t size)
{
	const struct fault_reaction *params = work->params;
	bool doubt = false, usable;
	char why[224] = "";
	struct rows rows;
	if (params->running >= 0) {
		if (rows_between(work, params->running, from_ns, to_ns, &rows, &usable, why, sizeof why) <
		    0)
			return -2;
		doubt |= !usable;
		for (size_t i = 0; rows.usable && i < rows.count; i++)
			if (value_at(&rows, i) != 0) {
				(void)snprintf(note, size, "%s was %g at %.3f ms", rows.series.channel->name,
				               value_at(&rows, i), ms_at(&rows, i));
				return 1;
			}
	}
	if (params->torque >= 0 && params->torque_below > 0) {
		if (rows_between(work, params->torque, from_ns, to_ns, &rows, &usable, why, sizeof why) < 0)
			return -2;
		doubt |= !usable;
		for (size_t i = 0; rows.usable && i < rows.count; i++) {
			int side = event_side(&rows, i, params->torque_below);
			if (side == 0 && !doubt) {
				doubt = true;
				(void)snprintf(why, sizeof why, "%s was %.3g %s at %.3f ms, too near to %.3g",
				               rows.series.channel->name, value_at(&rows, i),
				               rows.series.channel->unit->name, ms_at(&rows, i),
				               params->torque_below);
			}
			if (side == 1) {
				(void)snprintf(note, size, "%s was %.3g %s at %.3f ms", rows.series.channel->name,
				               value_at(&rows, i), rows.series.channel->unit->name,
				               ms_at(&rows, i));
				return 1;
			}
		}
	}
	(void)snprintf(note, size, "%s", doubt ? why : "nothing ran and no torque came");
	return doubt ? -1 : 0;
}

static int restart_refused(struct work *work)
{
	char note[224];
	if (work->params->running < 0 && work->params->torque < 0) {
		unknown(work, RESTART_REFUSED, "the check names neither running nor torque");
		return 0;
	}
	if (!work->restart) {
		unknown(work, RESTART_REFUSED,
		        work->params->restart < 0 ? "the check names no mark restart"
		                                  : "the run ended before the mark restart");
		return 0;
	}
	int64_t to = work->reset ? work->reset->earliest_ns : work->in->end_ns;
	int result = runs(work, work->restart->latest_ns, to, note, sizeof note);
	if (result == -2)
		return -1;
	if (result == -1)
		unknown(work, RESTART_REFUSED, note);
	else
		answer(work, RESTART_REFUSED, result == 0, note);
	return 0;
}

static int reset_clears(struct work *work)
{
	char note[224], now[64], idle[64];
	struct rows rows;
	bool usable;
	if (!work->reset || !work->detection.known) {
		unknown(work, RESET_CLEARS,
		        !work->reset ? (work->params->reset < 0 ? "the check names no mark reset"
		                                                : "the run ended before the mark reset")
		                     : work->detection.note);
		return 0;
	}
	if (!work->detection.seen) {
		unknown(work, RESET_CLEARS, "nothing was indicated that could be cleared");
		return 0;
	}
	int64_t to = work->again ? work->again->earliest_ns : work->in->end_ns;
	if (rows_between(work, work->params->indication, work->reset->latest_ns, to, &rows, &usable,
	                 note, sizeof note) < 0)
		return -1;
	if (!usable) {
		unknown(work, RESET_CLEARS, note);
		return 0;
	}
	double last = value_at(&rows, rows.count - 1);
	(void)snprintf(note, sizeof note, "after the reset it showed %s; before the cause %s",
	               code_text(work, last, now, sizeof now),
	               code_text(work, work->idle, idle, sizeof idle));
	answer(work, RESET_CLEARS, last == work->idle, note);
	return 0;
}

static int restarts_clean(struct work *work)
{
	char note[224], now[64];
	struct rows running, shown;
	bool usable, shown_usable;
	const struct mark *mark = work->again ? work->again : work->reset;
	if (work->params->running < 0 || !mark || !work->detection.known) {
		unknown(work, RESTARTS_CLEAN,
		        work->params->running < 0 ? "the check names no channel running"
		        : !mark ? "the check names no mark reset or again that was reached"
		                : work->detection.note);
		return 0;
	}
	if (rows_between(work, work->params->running, mark->latest_ns, work->in->end_ns, &running,
	                 &usable, note, sizeof note) < 0)
		return -1;
	size_t first = 0;
	while (usable && first < running.count && value_at(&running, first) == 0)
		first++;
	if (usable && first == running.count) {
		answer(work, RESTARTS_CLEAN, false, "it never ran again");
		return 0;
	}
	if (!usable) {
		unknown(work, RESTARTS_CLEAN, note);
		return 0;
	}
	for (size_t i = first; i < running.count; i++)
		if (value_at(&running, i) == 0) {
			(void)snprintf(note, sizeof note, "it ran, but had stopped again at %.3f ms",
			               ms_at(&running, i));
			answer(work, RESTARTS_CLEAN, false, note);
			return 0;
		}
	int64_t from = series_latest(&running.series, running.first + first);
	if (rows_between(work, work->params->indication, from, work->in->end_ns, &shown, &shown_usable,
	                 note, sizeof note) < 0)
		return -1;
	if (!shown_usable) {
		unknown(work, RESTARTS_CLEAN, note);
		return 0;
	}
	for (size_t i = 0; i < shown.count; i++)
		if (value_at(&shown, i) != work->idle) {
			(void)snprintf(note, sizeof note, "it runs, but showed %s at %.3f ms",
			               code_text(work, value_at(&shown, i), now, sizeof now), ms_at(&shown, i));
			answer(work, RESTARTS_CLEAN, false, note);
			return 0;
		}
	answer(work, RESTARTS_CLEAN, true, "");
	return 0;
}

static const struct mark *optional_mark(const struct check_input *in, int mark)
{
	return mark >= 0 && (size_t)mark < in->mark_count && in->marks[mark].reached ? &in->marks[mark]
	                                                                             : NULL;
}

static int evaluate(const struct check_input *in, const void *params, struct metric *ret_metrics,
                    size_t *ret_count, struct err *reterr)
{
	const struct fault_reaction *own = params;
	struct work work = {.in = in, .params = own, .metrics = ret_metrics, .reterr = reterr};
	*ret_count = FIELD_COUNT(metrics);
	char why[224];
	work.from = mark_reached(in, own->from, why, sizeof why);
	if (!work.from) {
		for (size_t i = 0; i < FIELD_COUNT(metrics); i++)
			unknown(&work, i, why);
		return 0;
	}
	work.gone = optional_mark(in, own->gone);
	work.restart = optional_mark(in, own->restart);
	work.reset = optional_mark(in, own->reset);
	work.again = optional_mark(in, own->again);
	work.idle = work.raised = (double)NAN;
	if (event_rows(in, own->indication, work.from, in->end_ns, &work.indication, reterr) < 0)
		return -1;
	if (work.indication.usable)
		event_change(&work.indication, work.from, &work.detection);
	else
		(void)snprintf(work.detection.note, sizeof work.detection.note, "%s", work.indication.why);
	if (work.detection.known)
		work.idle = value_at(&work.indication, work.detection.before);
	if (work.detection.seen)
		work.raised = value_at(&work.indication, work.detection.after);
	put_latency(&work, DETECTION_TIME, &work.indication, &work.detection);
	if (work.detection.known && work.idle == own->code)
		unknown(&work, DETECTION_TIME, "the code was shown before the cause already");
	code_right(&work);
	stays_latched(&work);
	if (torque_off(&work) < 0 || restart_refused(&work) < 0 || reset_clears(&work) < 0 ||
	    restarts_clean(&work) < 0)
		return -1;
	return 0;
}

static int verify(const void *params, const struct channel_info *channels,
                  const struct machine *machine, struct err *reterr)
{
	(void)channels;
	(void)machine;
	const struct fault_reaction *own = params;
	if ((own->torque >= 0) != !isnan(own->torque_below))
		return err_set(reterr, ERR_FILE, "torque and torque_below belong together");
	if (own->torque >= 0 && !(own->torque_below > 0))
		return err_set(reterr, ERR_FILE, "torque_below must be above 0: it is a magnitude");
	if (own->restart >= 0 && own->running < 0 && own->torque < 0)
		return err_set(reterr, ERR_FILE, "restart needs running or torque to see what it did");
	if (own->again >= 0 && (own->reset < 0 || own->running < 0))
		return err_set(reterr, ERR_FILE, "again needs reset and running");
	return 0;
}

const struct check_kind check_fault_reaction = {
    .name = "fault_reaction",
    .text = "how a fault is seen, reacted to, held and cleared",
    .fields = &table,
    .params_size = sizeof(struct fault_reaction),
    .metrics = metrics,
    .metric_count = FIELD_COUNT(metrics),
    .evaluate = evaluate,
    .verify = verify,
};
