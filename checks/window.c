/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Row ranges of windows. Missing rows are dropped once, here, so that no check
 * has to step around NaN; interpolating them was rejected, because an invented
 * value may be the one that decides.
 */
#include "window.h"

#include <stdio.h>

static double ms(int64_t ns)
{
	return (double)ns / 1e6;
}

const struct mark *mark_reached(const struct check_input *in, int mark, char *why, size_t size)
{
	if (mark < 0 || (size_t)mark >= in->mark_count) {
		(void)snprintf(why, size, "the mark is not known");
		return NULL;
	}
	if (!in->marks[mark].reached) {
		(void)snprintf(why, size, "the run ended before the mark %s", in->marks[mark].name);
		return NULL;
	}
	return &in->marks[mark];
}

bool window_span(const struct check_input *in, const struct window *window, struct span *ret_span,
                 char *why, size_t size)
{
	int64_t from = in->begin_ns;
	if (window->from >= 0) {
		const struct mark *mark = mark_reached(in, window->from, why, size);
		if (!mark)
			return false;
		from = mark->latest_ns;
	}
	from += window->after_ns;
	int64_t to = in->end_ns;
	if (window->for_ns > 0) {
		if (from + window->for_ns > in->end_ns) {
			(void)snprintf(
			    why, size,
			    "the window ends at %.3f ms, but the stimulus ended at %.3f ms: hold longer",
			    ms(from + window->for_ns), ms(in->end_ns));
			return false;
		}
		to = from + window->for_ns;
	}
	if (to <= from) {
		(void)snprintf(why, size,
		               "the window begins at %.3f ms, after the stimulus ended (%.3f ms)", ms(from),
		               ms(in->end_ns));
		return false;
	}
	*ret_span = (struct span){from, to};
	return true;
}

/* Rows that touch the span, by their own times; the series must be in order. */
static void find_range(const struct series *series, struct span span, size_t *ret_first,
                       size_t *ret_end)
{
	size_t first = series_first_at(series, span.from_ns);
	while (first < series->rows && series_earliest(series, first) < span.from_ns)
		first++;
	size_t low = first, high = series->rows;
	while (low < high) {
		size_t middle = low + (high - low) / 2;
		if (series_latest(series, middle) <= span.to_ns)
			low = middle + 1;
		else
			high = middle;
	}
	*ret_first = first;
	*ret_end = low;
}

enum { PART_ROWS = 512 }; /* fit into the first cache */

/*
 * One pass that finds nothing wrong in most recordings: rows in order, none
 * missing in [first, end), and the longest time between two of them. False:
 * look closer.
 */
static bool all_well(const struct series *series, size_t first, size_t end, int64_t *ret_gap,
                     size_t *ret_gap_row)
{
	int64_t sent_before = series_sent(series, 0), received_before = series_received(series, 0);
	int64_t backwards = received_before - sent_before, gap = 0; /* negative: a sign bit is set */
	int wrong = series->bad_count > 0;
	*ret_gap_row = first;
	for (size_t part = 0; part < series->rows; part += PART_ROWS) {
		size_t last = part + PART_ROWS < series->rows ? part + PART_ROWS : series->rows;
		for (size_t row = part > 0 ? part : 1; row < last; row++) {
			int64_t sent = series_sent(series, row), received = series_received(series, row);
			int64_t later = received - received_before;
			backwards |= (received - sent) | (sent - sent_before) | later;
			wrong |= (sent == sent_before) & (later == 0);
			if (later > gap && row > first && row < end) {
				gap = later;
				*ret_gap_row = row - 1;
			}
			sent_before = sent;
			received_before = received;
		}
		/* The values, while the part is at hand. */
		for (size_t row = part > first ? part : first; row < last && row < end; row++) {
			double value = series_value(series, row);
			wrong |= value != value;
		}
	}
	*ret_gap = gap;
	return backwards >= 0 && !wrong;
}

/* Out of order, repeated, dated backwards: nothing can be dated then. */
static bool disordered(const struct series *series, size_t first, size_t end, char *why,
                       size_t size)
{
	for (size_t row = first; row < end; row++) {
		bool wrong = series_received(series, row) < series_sent(series, row);
		if (row > first)
			wrong |= series_sent(series, row) < series_sent(series, row - 1) ||
			         series_received(series, row) < series_received(series, row - 1) ||
			         (series_sent(series, row) == series_sent(series, row - 1) &&
			          series_received(series, row) == series_received(series, row - 1));
		if (wrong) {
			(void)snprintf(
			    why, size,
			    "%s: rows are out of order or stand twice at %.3f ms, so nothing can be dated",
			    series->channel->name, ms(series_received(series, row)));
			return true;
		}
	}
	return false;
}

static bool row_is_bad(const struct series *series, size_t row)
{
	if (isnan(series_value(series, row)))
		return true;
	for (size_t i = 0; i < series->bad_count; i++)
		if (row >= series->bad[i].first && row <= series->bad[i].last)
			return true;
	return false;
}

struct packed_row {
	int64_t earliest, latest;
	double value;
};

/* Copies the rows that are measurements. -1: memory ran out. */
static int pack(const struct check_input *in, struct rows *rows, size_t first, size_t end,
                struct err *reterr)
{
	size_t good = end - first - rows->missing;
	struct packed_row *copy = arena_array(in->scratch, good ? good : 1, sizeof *copy);
	double *extra = arena_array(in->scratch, good ? good : 1, sizeof *extra);
	if (!copy || !extra)
		return err_set(reterr, ERR_NOMEM, "memory ran out while judging %s",
		               rows->series.channel->name);
	size_t at = 0;
	for (size_t row = first; row < end; row++) {
		if (row_is_bad(&rows->series, row))
			continue;
		copy[at] = (struct packed_row){series_sent(&rows->series, row),
		                               series_received(&rows->series, row),
		                               series_value(&rows->series, row)};
		extra[at] = rows->series.extra ? rows->series.extra[row] : 0;
		at++;
	}
	rows->series = (struct series){
	    .channel = rows->series.channel,
	    .rows = good,
	    .row0 = (const unsigned char *)copy,
	    .stride = sizeof *copy,
	    .earliest_at = offsetof(struct packed_row, earliest),
	    .latest_at = offsetof(struct packed_row, latest),
	    .value_at = offsetof(struct packed_row, value),
	    .block = rows->series.block,
	    .extra = extra,
	};
	rows->first = 0;
	rows->count = good;
	return 0;
}

static void measure_interval(struct rows *rows)
{
	if (rows->count > 1)
		rows->interval_ns = (series_received(&rows->series, rows->first + rows->count - 1) -
		                     series_received(&rows->series, rows->first)) /
		                    (int64_t)(rows->count - 1);
}

/* A gap of the span's edges beside the longest one between rows. */
static void add_gap(struct rows *rows, int64_t gap_ns, int64_t at_ns)
{
	if (gap_ns <= rows->gap_ns)
		return;
	rows->gap_ns = gap_ns;
	rows->gap_at_ns = at_ns;
}

static void measure_gaps(struct rows *rows)
{
	int64_t before = rows->span.from_ns;
	for (size_t i = 0; i <= rows->count; i++) {
		int64_t now =
		    i < rows->count ? series_received(&rows->series, rows->first + i) : rows->span.to_ns;
		if (now - before > rows->gap_ns) {
			rows->gap_ns = now - before;
			rows->gap_at_ns = before;
		}
		before = now;
	}
	measure_interval(rows);
}

/* Why a range without a single measurement has none. */
static void say_nothing_there(struct rows *rows, const struct series *series, size_t first)
{
	const char *name = series->channel->name;
	const char *bad = NULL;
	for (size_t i = 0; i < series->bad_count && rows->missing && !bad; i++)
		if (first >= series->bad[i].first && first <= series->bad[i].last)
			bad = series->bad[i].why;
	if (rows->missing)
		(void)snprintf(rows->why, sizeof rows->why,
		               "none of the %zu samples of %s from %.3f ms to %.3f ms is a measurement%s%s",
		               rows->missing, name, ms(rows->span.from_ns), ms(rows->span.to_ns),
		               bad ? ": " : "", bad ? bad : "");
	else
		(void)snprintf(rows->why, sizeof rows->why,
		               "%s was not sampled from %.3f ms to %.3f ms: hold longer or sample faster",
		               name, ms(rows->span.from_ns), ms(rows->span.to_ns));
}

int rows_take(const struct check_input *in, int channel, struct span span, struct rows *ret_rows,
              struct err *reterr)
{
	*ret_rows = (struct rows){.span = span};
	struct rows *rows = ret_rows;
	if (channel < 0 || (size_t)channel >= in->channel_count)
		return err_set(reterr, ERR_STATE, "a check was given a channel that does not exist");
	const struct series *series = &in->series[channel];
	if (series->rows == 0) {
		(void)snprintf(rows->why, sizeof rows->why, "%s was not sampled in this test",
		               in->channels[channel].name);
		return 0;
	}
	rows->series = *series;
	size_t first, end, gap_row;
	int64_t gap_ns;
	find_range(series, span, &first, &end);
	if (end > first && all_well(series, first, end, &gap_ns, &gap_row)) {
		rows->first = first;
		rows->count = end - first;
		add_gap(rows, series_received(series, first) - span.from_ns, span.from_ns);
		add_gap(rows, gap_ns, series_received(series, gap_row));
		add_gap(rows, span.to_ns - series_received(series, end - 1),
		        series_received(series, end - 1));
		measure_interval(rows);
		rows->usable = true;
		return 0;
	}
	if (disordered(series, 0, series->rows, rows->why, sizeof rows->why))
		return 0;
	for (size_t row = first; row < end; row++)
		rows->missing += row_is_bad(series, row);
	rows->first = first;
	rows->count = end - first;
	if (rows->missing && pack(in, rows, first, end, reterr) < 0)
		return -1;
	if (rows->count == 0) {
		say_nothing_there(rows, series, first);
		return 0;
	}
	measure_gaps(rows);
	rows->usable = true;
	return 0;
}

int64_t rows_gap_limit(const struct check_input *in, const struct rows *rows)
{
	int64_t interval = in->sample_ns > rows->interval_ns ? in->sample_ns : rows->interval_ns;
	return 5 * interval;
}

static bool say_gap(const struct check_input *in, const struct rows *rows, int64_t gap_ns,
                    int64_t at_ns, char *why, size_t size)
{
	int64_t limit = rows_gap_limit(in, rows);
	if (gap_ns <= limit)
		return false;
	(void)snprintf(
	    why, size,
	    "no sample of %s for %.3f ms after %.3f ms, where the answer lies (%.3f ms would do)",
	    rows->series.channel->name, ms(gap_ns), ms(at_ns), ms(limit));
	return true;
}

bool rows_have_gap(const struct check_input *in, const struct rows *rows, char *why, size_t size)
{
	return say_gap(in, rows, rows->gap_ns, rows->gap_at_ns, why, size);
}

bool rows_gap_within(const struct check_input *in, const struct rows *rows, size_t begin,
                     size_t end, int64_t to_ns, char *why, size_t size)
{
	int64_t longest = 0, at = 0;
	if (to_ns <= rows->span.to_ns && rows->gap_ns <= rows_gap_limit(in, rows))
		return false; /* none anywhere */
	for (size_t i = begin; i < end; i++) {
		int64_t before = series_received(&rows->series, rows->first + i);
		int64_t next = i + 1 < end ? series_received(&rows->series, rows->first + i + 1)
		                           : (to_ns > before ? to_ns : before);
		if (next - before > longest) {
			longest = next - before;
			at = before;
		}
	}
	return say_gap(in, rows, longest, at, why, size);
}

struct stretch rows_stretch(const struct rows *rows, size_t begin, size_t end, int64_t origin_ns)
{
	return (struct stretch){
	    .series = &rows->series,
	    .first = rows->first + begin,
	    .count = end - begin,
	    .origin_ns = origin_ns,
	};
}

double rows_error_limit(const struct rows *rows, size_t begin, size_t end)
{
	double limit = 0;
	if (!rows->series.channel->accuracy.given && !rows->series.extra)
		return 0;
	for (size_t i = begin; i < end; i++) {
		double here = series_error_limit(&rows->series, rows->first + i);
		limit = here > limit ? here : limit;
	}
	return limit;
}

bool command_constant(const struct check_input *in, int channel, struct span span,
                      double *ret_value, char *why, size_t size)
{
	const char *name = in->channels[channel].name;
	bool found = false;
	for (size_t i = 0; i < in->command_count; i++) {
		const struct command *command = &in->commands[i];
		if (command->channel != channel)
			continue;
		if (command->latest_ns <= span.from_ns) {
			*ret_value = command->value;
			found = true;
		} else if (command->earliest_ns < span.to_ns) {
			(void)snprintf(why, size, "%s was commanded anew within the window", name);
			return false;
		}
	}
	if (!found)
		(void)snprintf(why, size, "%s was not commanded before the window", name);
	return found;
}
