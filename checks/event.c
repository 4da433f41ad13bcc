/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Guaranteed intervals of latencies. Interpolating between polls was rejected:
 * nothing is known of how a code changes between two readings, and a latency
 * of a safety function should not rest on a guess.
 */
#include "event.h"

#include <stdio.h>

static const int64_t look_back_ns = 200 * NS_PER_MS;

int event_rows(const struct check_input *in, int channel, const struct mark *mark, int64_t to_ns,
               struct rows *ret_rows, struct err *reterr)
{
	struct span span = {mark->earliest_ns - look_back_ns, to_ns};
	return rows_take(in, channel, span, ret_rows, reterr);
}

size_t event_rows_before(const struct rows *rows, const struct mark *mark)
{
	size_t count = 0;
	while (count < rows->count &&
	       series_latest(&rows->series, rows->first + count) <= mark->earliest_ns)
		count++;
	return count;
}

int event_side(const struct rows *rows, size_t row, double level)
{
	size_t at = rows->first + row;
	double value = fabs(series_value(&rows->series, at));
	double doubt = series_error_limit(&rows->series, at) + rows->series.channel->resolution / 2;
	if (value + doubt < level)
		return -1;
	return value - doubt > level ? 1 : 0;
}

static double seconds(int64_t ns)
{
	return (double)ns / 1e9;
}

static void bound_below(const struct rows *rows, const struct mark *mark, struct latency *latency)
{
	int64_t low = series_earliest(&rows->series, rows->first + latency->before) - mark->latest_ns;
	latency->known = true;
	latency->low = low > 0 ? seconds(low) : 0;
	latency->high = (double)INFINITY;
	latency->value = (double)INFINITY;
}

static void bound_above(const struct rows *rows, const struct mark *mark, struct latency *latency)
{
	latency->seen = true;
	latency->high =
	    seconds(series_latest(&rows->series, rows->first + latency->after) - mark->earliest_ns);
	latency->value = latency->low + (latency->high - latency->low) / 2;
}

/* Says where missing or sparse rows made the interval wide. */
static void note_gap(const struct rows *rows, struct latency *latency)
{
	int64_t widest = 0;
	for (size_t i = latency->before + 1; i <= latency->after; i++) {
		int64_t gap = series_received(&rows->series, rows->first + i) -
		              series_received(&rows->series, rows->first + i - 1);
		widest = gap > widest ? gap : widest;
	}
	if (widest > 5 * rows->interval_ns)
		(void)snprintf(latency->note, sizeof latency->note,
		               "widened by %.3f ms without a sample of %s", (double)widest / 1e6,
		               rows->series.channel->name);
}

void event_change(const struct rows *rows, const struct mark *mark, struct latency *ret_latency)
{
	struct latency *latency = ret_latency;
	*latency = (struct latency){0};
	const struct channel_info *channel = rows->series.channel;
	size_t before = event_rows_before(rows, mark);
	if (before == 0) {
		(void)snprintf(latency->note, sizeof latency->note,
		               "%s was not read in the %.0f ms before the mark %s", channel->name,
		               (double)look_back_ns / 1e6, mark->name);
		return;
	}
	double idle = series_value(&rows->series, rows->first + before - 1);
	size_t after = before;
	while (after < rows->count && series_value(&rows->series, rows->first + after) == idle)
		after++;
	latency->before = after - 1;
	bound_below(rows, mark, latency);
	if (after == rows->count) {
		(void)snprintf(latency->note, sizeof latency->note,
		               "%s still had not changed at the last sample, %.4g s after the mark %s",
		               channel->name, latency->low, mark->name);
		return;
	}
	latency->after = after;
	bound_above(rows, mark, latency);
	note_gap(rows, latency);
}

static void was_on(const struct rows *rows, const struct mark *mark, double level, size_t before,
                   struct latency *latency)
{
	const struct channel_info *channel = rows->series.channel;
	if (before == 0)
		(void)snprintf(latency->note, sizeof latency->note,
		               "%s was not read in the %.0f ms before the mark %s", channel->name,
		               (double)look_back_ns / 1e6, mark->name);
	else if (event_side(rows, before - 1, level) != 1)
		(void)snprintf(
		    latency->note, sizeof latency->note,
		    "%s was %.3g %s before the mark %s, not surely above %.3g: nothing could go off",
		    channel->name, series_value(&rows->series, rows->first + before - 1),
		    channel->unit->name, mark->name, level);
	else
		latency->known = true;
}

void event_off(const struct rows *rows, const struct mark *mark, double level, int64_t dwell_ns,
               struct latency *ret_latency)
{
	struct latency *latency = ret_latency;
	*latency = (struct latency){0};
	size_t start = event_rows_before(rows, mark);
	was_on(rows, mark, level, start, latency);
	if (!latency->known)
		return;
	latency->before = start - 1;
	size_t off = SIZE_MAX;
	for (size_t i = start; i < rows->count; i++) {
		int side = event_side(rows, i, level);
		if (side == 1)
			latency->before = i;
		int64_t gap = series_received(&rows->series, rows->first + i) -
		              series_received(&rows->series, rows->first + i - 1);
		if (side != -1)
			off = SIZE_MAX;
		else if (off == SIZE_MAX || gap > dwell_ns)
			off = i;
		if (off != SIZE_MAX && series_earliest(&rows->series, rows->first + i) -
		                               series_latest(&rows->series, rows->first + off) >=
		                           dwell_ns) {
			latency->after = off;
			break;
		}
	}
	bound_below(rows, mark, latency);
	if (latency->after > 0) {
		bound_above(rows, mark, latency);
		note_gap(rows, latency);
		return;
	}
	if (latency->before + 1 < rows->count)
		latency->value = (double)NAN; /* it may have gone off, but not for long enough to say so */
	(void)snprintf(latency->note, sizeof latency->note,
	               "%s was not below %.3g %s for %.4g ms before the samples ended",
	               rows->series.channel->name, level, rows->series.channel->unit->name,
	               (double)dwell_ns / 1e6);
}
