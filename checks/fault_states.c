/* SPDX-License-Identifier: Apache-2.0 */
/*
 * What a drive does after it has seen a fault: held, restart refused, cleared,
 * clean again. A contradiction is proven by one sample, whatever is missing;
 * agreement needs all of them, so a gap leaves it open.
 */
#include <stdio.h>

#include "fault_work.h"
#include "put.h"

enum evidence fault_evidence(const struct fault_work *work, size_t metric)
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

void fault_unknown(struct fault_work *work, size_t metric, const char *why)
{
	metric_unknown(&work->metrics[metric], &fault_metrics[metric],
	               shape_unit(fault_metrics[metric].shape, NULL), fault_evidence(work, metric),
	               "%s", why);
}

void fault_answer(struct fault_work *work, size_t metric, bool yes, const char *note)
{
	put_yes_no(&work->metrics[metric], &fault_metrics[metric], fault_evidence(work, metric), yes,
	           note);
}

/* "encoder_loss (3)" or "3". */
const char *fault_code_text(const struct fault_work *work, double code, char *buffer, size_t size)
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

/* The rows of a channel in a span; not usable, with why[size], where there are none or a gap. */
static int rows_between(struct fault_work *work, int channel, int64_t from_ns, int64_t to_ns,
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
void fault_stays_latched(struct fault_work *work)
{
	char why[224], now[64], was[64];
	if (!work->detection.known || !work->detection.seen) {
		fault_unknown(work, STAYS_LATCHED,
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
		               fault_code_text(work, value_at(rows, i), now, sizeof now), ms_at(rows, i),
		               fault_code_text(work, work->raised, was, sizeof was));
		fault_answer(work, STAYS_LATCHED, false, why);
		return;
	}
	if (widest > limit) {
		(void)snprintf(why, sizeof why, "no sample of the indication for %.3f ms",
		               (double)widest / 1e6);
		fault_unknown(work, STAYS_LATCHED, why);
	} else if (work->params->gone >= 0 && (!work->gone || work->gone->latest_ns >= to)) {
		fault_unknown(work, STAYS_LATCHED, "there is no time between the mark gone and the reset");
	} else {
		(void)snprintf(why, sizeof why, "it showed %s to the %s",
		               fault_code_text(work, work->raised, was, sizeof was),
		               work->reset ? "reset" : "end of the stimulus");
		fault_answer(work, STAYS_LATCHED, true, why);
	}
}

/* 1: surely something runs; 0: surely nothing; -1: not known; -2: memory. note says what. */
static int runs(struct fault_work *work, int64_t from_ns, int64_t to_ns, char *note, size_t size)
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

int fault_restart_refused(struct fault_work *work)
{
	char note[224];
	if (work->params->running < 0 && work->params->torque < 0) {
		fault_unknown(work, RESTART_REFUSED, "the check names neither running nor torque");
		return 0;
	}
	if (!work->restart) {
		fault_unknown(work, RESTART_REFUSED,
		              work->params->restart < 0 ? "the check names no mark restart"
		                                        : "the run ended before the mark restart");
		return 0;
	}
	int64_t to = work->reset ? work->reset->earliest_ns : work->in->end_ns;
	int result = runs(work, work->restart->latest_ns, to, note, sizeof note);
	if (result == -2)
		return -1;
	if (result == -1)
		fault_unknown(work, RESTART_REFUSED, note);
	else
		fault_answer(work, RESTART_REFUSED, result == 0, note);
	return 0;
}

int fault_reset_clears(struct fault_work *work)
{
	char note[224], now[64], idle[64];
	struct rows rows;
	bool usable;
	if (!work->reset || !work->detection.known) {
		fault_unknown(work, RESET_CLEARS,
		              !work->reset
		                  ? (work->params->reset < 0 ? "the check names no mark reset"
		                                             : "the run ended before the mark reset")
		                  : work->detection.note);
		return 0;
	}
	if (!work->detection.seen) {
		fault_unknown(work, RESET_CLEARS, "nothing was indicated that could be cleared");
		return 0;
	}
	int64_t to = work->again ? work->again->earliest_ns : work->in->end_ns;
	if (rows_between(work, work->params->indication, work->reset->latest_ns, to, &rows, &usable,
	                 note, sizeof note) < 0)
		return -1;
	if (!usable) {
		fault_unknown(work, RESET_CLEARS, note);
		return 0;
	}
	double last = value_at(&rows, rows.count - 1);
	(void)snprintf(note, sizeof note, "after the reset it showed %s; before the cause %s",
	               fault_code_text(work, last, now, sizeof now),
	               fault_code_text(work, work->idle, idle, sizeof idle));
	fault_answer(work, RESET_CLEARS, last == work->idle, note);
	return 0;
}

int fault_restarts_clean(struct fault_work *work)
{
	char note[224], now[64];
	struct rows running, shown;
	bool usable, shown_usable;
	const struct mark *mark = work->again ? work->again : work->reset;
	if (work->params->running < 0 || !mark || !work->detection.known) {
		fault_unknown(work, RESTARTS_CLEAN,
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
		fault_answer(work, RESTARTS_CLEAN, false, "it never ran again");
		return 0;
	}
	if (!usable) {
		fault_unknown(work, RESTARTS_CLEAN, note);
		return 0;
	}
	for (size_t i = first; i < running.count; i++)
		if (value_at(&running, i) == 0) {
			(void)snprintf(note, sizeof note, "it ran, but had stopped again at %.3f ms",
			               ms_at(&running, i));
			fault_answer(work, RESTARTS_CLEAN, false, note);
			return 0;
		}
	int64_t from = series_latest(&running.series, running.first + first);
	if (rows_between(work, work->params->indication, from, work->in->end_ns, &shown, &shown_usable,
	                 note, sizeof note) < 0)
		return -1;
	if (!shown_usable) {
		fault_unknown(work, RESTARTS_CLEAN, note);
		return 0;
	}
	for (size_t i = 0; i < shown.count; i++)
		if (value_at(&shown, i) != work->idle) {
			(void)snprintf(note, sizeof note, "it runs, but showed %s at %.3f ms",
			               fault_code_text(work, value_at(&shown, i), now, sizeof now),
			               ms_at(&shown, i));
			fault_answer(work, RESTARTS_CLEAN, false, note);
			return 0;
		}
	fault_answer(work, RESTARTS_CLEAN, true, "");
	return 0;
}
