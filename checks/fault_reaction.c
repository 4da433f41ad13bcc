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

#include "fault_work.h"
#include "put.h"

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

const struct metric_kind fault_metrics[] = {
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

static double value_at(const struct rows *rows, size_t i)
{
	return series_value(&rows->series, rows->first + i);
}

static void put_latency(struct fault_work *work, size_t metric, const struct rows *rows,
                        const struct latency *latency)
{
	if (!latency->known) {
		fault_unknown(work, metric, latency->note);
		return;
	}
	put_value(&work->metrics[metric], &fault_metrics[metric], shape_unit(METRIC_TIME, NULL),
	          fault_evidence(work, metric), latency->value, latency->low, latency->high, 1);
	(void)snprintf(work->metrics[metric].note, sizeof work->metrics[metric].note, "%s",
	               latency->note);
	size_t after = latency->seen ? latency->after : rows->count - 1;
	put_point(&work->metrics[metric], series_earliest(&rows->series, rows->first + latency->before),
	          series_latest(&rows->series, rows->first + after),
	          series_value(&rows->series, rows->first + after));
}

/* Whether the samples end so long before the stimulus that a code may have come unseen. */
static bool ended_early(const struct fault_work *work, char *why, size_t size)
{
	const struct rows *rows = &work->indication;
	return rows_gap_within(work->in, rows, rows->count - 1, rows->count, work->in->end_ns, why,
	                       size);
}

static void code_right(struct fault_work *work)
{
	char note[224], idle[64], raised[64], wanted[64];
	fault_code_text(work, work->idle, idle, sizeof idle);
	fault_code_text(work, work->params->code, wanted, sizeof wanted);
	if (!work->detection.known) {
		fault_unknown(work, CODE_RIGHT, work->detection.note);
	} else if (work->idle == work->params->code) {
		(void)snprintf(note, sizeof note, "the indication showed %s before the cause already",
		               wanted);
		fault_unknown(work, CODE_RIGHT, note);
	} else if (!work->detection.seen && ended_early(work, note, sizeof note)) {
		fault_unknown(work, CODE_RIGHT, note);
	} else if (!work->detection.seen) {
		(void)snprintf(
		    note, sizeof note,
		    "the indication stayed %s to the last sample, %.4g s after the cause; %s was due", idle,
		    work->detection.low, wanted);
		fault_answer(work, CODE_RIGHT, false, note);
	} else {
		bool right = work->raised == work->params->code;
		(void)snprintf(note, sizeof note, "it changed from %s to %s%s%s", idle,
		               fault_code_text(work, work->raised, raised, sizeof raised),
		               right ? "" : "; due was ", right ? "" : wanted);
		fault_answer(work, CODE_RIGHT, right, note);
	}
}

static int torque_off(struct fault_work *work)
{
	const struct fault_reaction *params = work->params;
	struct rows rows;
	struct latency latency;
	if (params->torque < 0 || !(params->torque_below > 0)) {
		fault_unknown(work, TORQUE_OFF_TIME, "the check names no torque and torque_below");
		return 0;
	}
	if (event_rows(work->in, params->torque, work->from, work->in->end_ns, &rows, work->reterr) < 0)
		return -1;
	if (!rows.usable) {
		fault_unknown(work, TORQUE_OFF_TIME, rows.why);
		return 0;
	}
	event_off(&rows, work->from, params->torque_below, params->torque_for_ns, &latency);
	put_latency(work, TORQUE_OFF_TIME, &rows, &latency);
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
	struct fault_work work = {.in = in, .params = own, .metrics = ret_metrics, .reterr = reterr};
	*ret_count = FAULT_METRICS;
	char why[224];
	work.from = mark_reached(in, own->from, why, sizeof why);
	if (!work.from) {
		for (size_t i = 0; i < FAULT_METRICS; i++)
			fault_unknown(&work, i, why);
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
		fault_unknown(&work, DETECTION_TIME, "the code was shown before the cause already");
	code_right(&work);
	fault_stays_latched(&work);
	if (torque_off(&work) < 0 || fault_restart_refused(&work) < 0 ||
	    fault_reset_clears(&work) < 0 || fault_restarts_clean(&work) < 0)
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
    .metrics = fault_metrics,
    .metric_count = FAULT_METRICS,
    .evaluate = evaluate,
    .verify = verify,
};
