/* SPDX-License-Identifier: Apache-2.0 */
/*
 * A request that must be refused. No answer at all is no refusal: the request
 * may have been carried out and the reply lost, so it decides nothing.
 */
#include <stdio.h>
#include <string.h>

#include "put.h"
#include "window.h"

struct refusal {
	const char *attempt;
	struct int_list unchanged;
	int64_t within_ns;
};

#define AT(member) offsetof(struct refusal, member)
static const struct field fields[] = {
    {.key = "attempt",
     .kind = FIELD_LINE_NAME,
     .flags = FIELD_REQUIRED,
     .offset = AT(attempt),
     .text = "name of the attempt step"},
    {.key = "unchanged",
     .kind = FIELD_CHANNELS,
     .offset = AT(unchanged),
     .text = "channels that must not change by it"},
    {.key = "within",
     .kind = FIELD_DURATION,
     .flags = FIELD_POSITIVE,
     .fallback = "100 ms",
     .offset = AT(within_ns),
     .text = "as much before and after the attempt is compared"},
};
static const struct field_table table = {
    "refusal", "a request that is not allowed is refused and changes nothing", fields,
    FIELD_COUNT(fields)};

enum { REFUSED, EXCEPTION_RIGHT, UNCHANGED };
static const struct metric_kind metrics[] = {
    {"refused", METRIC_YES_NO, "the answer was a Modbus exception", NULL},
    {"exception_right", METRIC_YES_NO, "it was the exception that the attempt expects", NULL},
    {"unchanged", METRIC_YES_NO,
     "the means before and after differ by no more than resolution and noise explain", NULL},
};

enum { COMPARED_LEAST = 3 };

static const struct outcome *find_outcome(const struct check_input *in, const char *name)
{
	for (size_t i = 0; i < in->outcome_count; i++)
		if (strcmp(in->outcomes[i].name, name) == 0)
			return &in->outcomes[i];
	return NULL;
}

/* What the device answered; said by the wire, so nobody's report. */
static void answered(const struct outcome *outcome, struct metric *ret_metrics)
{
	char note[224];
	switch (outcome->status) {
	case OUTCOME_ACCEPTED:
		put_yes_no(&ret_metrics[REFUSED], &metrics[REFUSED], EVIDENCE_INDEPENDENT, false,
		           "it was answered as if it were allowed");
		put_yes_no(&ret_metrics[EXCEPTION_RIGHT], &metrics[EXCEPTION_RIGHT], EVIDENCE_INDEPENDENT,
		           false, "there was no exception");
		return;
	case OUTCOME_EXCEPTION:
		(void)snprintf(note, sizeof note, "exception %d (%s)", outcome->exception,
		               modbus_exception_name(outcome->exception));
		put_yes_no(&ret_metrics[REFUSED], &metrics[REFUSED], EVIDENCE_INDEPENDENT, true, note);
		bool right =
		    outcome->expected_exception == 0 || outcome->exception == outcome->expected_exception;
		if (!right)
			(void)snprintf(note, sizeof note, "exception %d (%s); due was %d (%s)",
			               outcome->exception, modbus_exception_name(outcome->exception),
			               outcome->expected_exception,
			               modbus_exception_name(outcome->expected_exception));
		put_yes_no(&ret_metrics[EXCEPTION_RIGHT], &metrics[EXCEPTION_RIGHT], EVIDENCE_INDEPENDENT,
		           right, note);
		return;
	case OUTCOME_NO_REPLY:
	case OUTCOME_NOT_MADE:
		for (size_t i = REFUSED; i <= EXCEPTION_RIGHT; i++)
			metric_unknown(&ret_metrics[i], &metrics[i], NULL, EVIDENCE_INDEPENDENT, "%s",
			               outcome->status == OUTCOME_NO_REPLY
			                   ? "there was no reply, which is no refusal"
			                   : "the run ended before the attempt was made");
		return;
	}
}

/* Mean and its uncertainty of some rows, or false with why[size]. */
static int mean_of(const struct check_input *in, int channel, struct span span, double *ret_mean,
                   struct budget *ret_budget, bool *ret_known, char *why, size_t size,
                   struct err *reterr)
{
	struct rows rows;
	*ret_known = false;
	if (rows_take(in, channel, span, &rows, reterr) < 0)
		return -1;
	if (!rows.usable || rows.count < COMPARED_LEAST) {
		if (rows.usable)
			(void)snprintf(why, size, "only %zu samples of %s from %.3f ms to %.3f ms: hold longer",
			               rows.count, in->channels[channel].name, (double)span.from_ns / 1e6,
			               (double)span.to_ns / 1e6);
		else
			(void)snprintf(why, size, "%s", rows.why);
		return 0;
	}
	struct stretch stretch = rows_stretch(&rows, 0, rows.count, span.from_ns);
	struct summary summary;
	summarise(&stretch, &summary);
	budget_random(ret_budget, summary.sd / sqrt(summary.independent),
	              fmax(summary.independent - 1, 1));
	*ret_mean = summary.mean;
	*ret_known = true;
	return 0;
}

struct comparison {
	bool changed, unknown;
	char why[224];
};

/*
 * Limits of error are the same before and after and cancel; what remains is
 * noise, and one step of the coding.
 */
static int compare(const struct check_input *in, int channel, const struct outcome *outcome,
                   int64_t within_ns, struct comparison *comparison, struct err *reterr)
{
	double before = 0, after = 0;
	bool known_before, known_after;
	struct budget budget = {0};
	const struct span early = {outcome->sent_ns - within_ns, outcome->sent_ns};
	const struct span late = {outcome->received_ns, outcome->received_ns + within_ns};
	char why[224] = "";
	if (mean_of(in, channel, early, &before, &budget, &known_before, why, sizeof why, reterr) < 0 ||
	    mean_of(in, channel, late, &after, &budget, &known_after, why, sizeof why, reterr) < 0)
		return -1;
	const struct channel_info *info = &in->channels[channel];
	if (!known_before || !known_after) {
		if (!comparison->unknown && !comparison->changed)
			(void)snprintf(comparison->why, sizeof comparison->why, "%s", why);
		comparison->unknown = true;
		return 0;
	}
	double difference = info->wraps > 0 ? wrap_half(after - before, info->wraps) : after - before;
	/* A step of the coding that binary arithmetic made a little longer is still one. */
	double explained = (budget_expanded(&budget) + info->resolution) * (1 + 1e-9);
	if (fabs(difference) <= explained)
		return 0;
	if (!comparison->changed)
		(void)snprintf(comparison->why, sizeof comparison->why,
		               "%s went from %.4g to %.4g %s; noise and resolution explain %.2g",
		               info->name, before, after, info->unit->name, explained);
	comparison->changed = true;
	return 0;
}

static int unchanged(const struct check_input *in, const struct refusal *own,
                     const struct outcome *outcome, struct metric *metric, struct err *reterr)
{
	enum evidence evidence = EVIDENCE_INDEPENDENT;
	for (size_t i = 0; i < own->unchanged.count; i++)
		if (in->channels[own->unchanged.items[i]].evidence == EVIDENCE_SELF_REPORTED)
			evidence = EVIDENCE_SELF_REPORTED;
	struct comparison comparison = {0};
	if (own->unchanged.count == 0 || outcome->status == OUTCOME_NOT_MADE) {
		metric_unknown(metric, &metrics[UNCHANGED], NULL, evidence, "%s",
		               own->unchanged.count == 0 ? "the check names no channels"
		                                         : "the run ended before the attempt was made");
		return 0;
	}
	for (size_t i = 0; i < own->unchanged.count; i++)
		if (compare(in, own->unchanged.items[i], outcome, own->within_ns, &comparison, reterr) < 0)
			return -1;
	if (comparison.changed || !comparison.unknown)
		put_yes_no(metric, &metrics[UNCHANGED], evidence, !comparison.changed, comparison.why);
	else
		metric_unknown(metric, &metrics[UNCHANGED], NULL, evidence, "%s", comparison.why);
	put_point(metric, outcome->sent_ns, outcome->received_ns, (double)NAN);
	return 0;
}

static int evaluate(const struct check_input *in, const void *params, struct metric *ret_metrics,
                    size_t *ret_count, struct err *reterr)
{
	const struct refusal *own = params;
	*ret_count = FIELD_COUNT(metrics);
	const struct outcome *outcome = find_outcome(in, own->attempt);
	if (!outcome) {
		for (size_t i = 0; i < FIELD_COUNT(metrics); i++)
			metric_unknown(&ret_metrics[i], &metrics[i], NULL, EVIDENCE_INDEPENDENT,
			               "nothing is recorded of the attempt %s", own->attempt);
		return 0;
	}
	answered(outcome, ret_metrics);
	return unchanged(in, own, outcome, &ret_metrics[UNCHANGED], reterr);
}

const struct check_kind check_refusal = {
    .name = "refusal",
    .text = "a request that is not allowed is refused and changes nothing",
    .fields = &table,
    .params_size = sizeof(struct refusal),
    .metrics = metrics,
    .metric_count = FIELD_COUNT(metrics),
    .evaluate = evaluate,
};
