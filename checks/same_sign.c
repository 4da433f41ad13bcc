/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Whether channels have the sign of a command: the proof of direction before
 * anything is loaded. By means with their uncertainty, because a torque near
 * its ripple changes sign from sample to sample.
 */
#include <stdio.h>

#include "put.h"
#include "window.h"

struct same_sign {
	int command;
	struct int_list channels;
	struct window window;
};

#define AT(member) offsetof(struct same_sign, member)
static const struct field fields[] = {
    {.key = "command",
     .kind = FIELD_CHANNEL,
     .flags = FIELD_REQUIRED | FIELD_COMMAND,
     .offset = AT(command),
     .text = "commanded channel whose value gives the sign"},
    {.key = "channels",
     .kind = FIELD_CHANNELS,
     .flags = FIELD_REQUIRED,
     .offset = AT(channels),
     .text = "channels that must have it"},
    {.key = "window",
     .kind = FIELD_WINDOW,
     .offset = AT(window),
     .text = "the samples that are judged"},
};
static const struct field_table table = {"same_sign", "channels have the sign of a command", fields,
                                         FIELD_COUNT(fields)};

static const struct metric_kind metrics[] = {
    {"agree", METRIC_YES_NO, "the mean of each channel surely has the sign of the commanded value",
     NULL},
};

enum { ROWS_LEAST = 3 };

struct agreement {
	bool against, unknown;
	char why[224];
};

static int look_at(const struct check_input *in, int channel, struct span span, double sign,
                   struct agreement *agreement, struct err *reterr)
{
	const struct channel_info *info = &in->channels[channel];
	struct rows rows;
	char why[224];
	if (rows_take(in, channel, span, &rows, reterr) < 0)
		return -1;
	bool usable = rows.usable;
	if (!usable)
		(void)snprintf(why, sizeof why, "%s", rows.why);
	else if (rows.count < ROWS_LEAST) {
		(void)snprintf(why, sizeof why, "only %zu samples of %s in the window, %d are needed",
		               rows.count, info->name, ROWS_LEAST);
		usable = false;
	} else
		usable = !rows_have_gap(in, &rows, why, sizeof why);
	if (!usable) {
		if (!agreement->unknown && !agreement->against)
			(void)snprintf(agreement->why, sizeof agreement->why, "%s", why);
		agreement->unknown = true;
		return 0;
	}
	struct stretch stretch = rows_stretch(&rows, 0, rows.count, span.from_ns);
	struct summary summary;
	summarise(&stretch, &summary);
	struct budget budget = {0};
	budget_random(&budget, summary.sd / sqrt(summary.independent),
	              fmax(summary.independent - 1, 1));
	budget_other(&budget, rows_error_limit(&rows, 0, rows.count) / sqrt(3));
	budget_other(&budget, info->resolution / sqrt(12));
	double expanded = budget_expanded(&budget);
	if (sign * summary.mean > expanded)
		return 0;
	bool against = -sign * summary.mean > expanded;
	if (!agreement->against && (against || !agreement->unknown))
		(void)snprintf(agreement->why, sizeof agreement->why,
		               "%s was %.4g +- %.2g %s while the command was %s", info->name, summary.mean,
		               expanded, info->unit->name, sign > 0 ? "positive" : "negative");
	agreement->against |= against;
	agreement->unknown |= !against;
	return 0;
}

static int evaluate(const struct check_input *in, const void *params, struct metric *ret_metrics,
                    size_t *ret_count, struct err *reterr)
{
	const struct same_sign *own = params;
	*ret_count = FIELD_COUNT(metrics);
	enum evidence evidence = EVIDENCE_INDEPENDENT;
	for (size_t i = 0; i < own->channels.count; i++)
		if (in->channels[own->channels.items[i]].evidence == EVIDENCE_SELF_REPORTED)
			evidence = EVIDENCE_SELF_REPORTED;
	struct agreement agreement = {.unknown = true};
	struct span span;
	double value = 0;
	if (!window_span(in, &own->window, &span, agreement.why, sizeof agreement.why)) {
		/* why is said */
	} else if (!command_constant(in, own->command, span, &value, agreement.why,
	                             sizeof agreement.why)) {
		/* why is said */
	} else if (value == 0) {
		(void)snprintf(agreement.why, sizeof agreement.why,
		               "%s was commanded to 0: no sign to compare with",
		               in->channels[own->command].name);
	} else {
		agreement.unknown = own->channels.count == 0;
		for (size_t i = 0; i < own->channels.count; i++)
			if (look_at(in, own->channels.items[i], span, value > 0 ? 1 : -1, &agreement, reterr) <
			    0)
				return -1;
	}
	if (agreement.against || !agreement.unknown)
		put_yes_no(&ret_metrics[0], &metrics[0], evidence, !agreement.against, agreement.why);
	else
		metric_unknown(&ret_metrics[0], &metrics[0], NULL, evidence, "%s", agreement.why);
	return 0;
}

const struct check_kind check_same_sign = {
    .name = "same_sign",
    .text = "channels have the sign of a command",
    .fields = &table,
    .params_size = sizeof(struct same_sign),
    .metrics = metrics,
    .metric_count = FIELD_COUNT(metrics),
    .evaluate = evaluate,
};
