/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Whether a channel stays in limits. Only sampled instants are known, so the
 * suite says which excursions are too short to matter; an excursion of that
 * length must not fit between two samples.
 */
#include <stdio.h>

#include "put.h"
#include "window.h"

struct stays_within {
	int channel;
	struct window window;
	double between[2], above, below;
	int64_t ignore_ns;
};

#define AT(member) offsetof(struct stays_within, member)
static const struct field fields[] = {
    {.key = "channel",
     .kind = FIELD_CHANNEL,
     .flags = FIELD_REQUIRED,
     .offset = AT(channel),
     .text = "what is watched"},
    {.key = "window",
     .kind = FIELD_WINDOW,
     .offset = AT(window),
     .text = "the samples that are judged"},
    {.key = "between", .kind = FIELD_LEVELS, .offset = AT(between), .text = "inside: both bounds"},
    {.key = "above", .kind = FIELD_LEVEL, .offset = AT(above), .text = "inside: the lower bound"},
    {.key = "below", .kind = FIELD_LEVEL, .offset = AT(below), .text = "inside: the upper bound"},
    {.key = "ignore_shorter_than",
     .kind = FIELD_DURATION,
     .flags = FIELD_REQUIRED | FIELD_POSITIVE,
     .offset = AT(ignore_ns),
     .text = "excursions shorter than this do not matter; a longer interval between samples is "
             "inconclusive"},
};
static const struct field_table table = {
    "stays_within", "a channel stays in limits during a window", fields, FIELD_COUNT(fields)};

enum { LARGEST, SMALLEST, INSIDE };
static const struct metric_kind metrics[] = {
    {"largest", METRIC_LEVEL, "largest value of a sample", NULL},
    {"smallest", METRIC_LEVEL, "smallest value of a sample", NULL},
    {"inside", METRIC_YES_NO, "no excursion beyond the bounds lasts as long as ignore_shorter_than",
     NULL},
};

struct bounds {
	double least, most; /* in the channel's unit; infinite where open */
};

static struct bounds bounds_of(const struct stays_within *own)
{
	struct bounds bounds = {-(double)INFINITY, (double)INFINITY};
	if (!isnan(own->between[0]))
		bounds = (struct bounds){own->between[0], own->between[1]};
	if (!isnan(own->above))
		bounds.least = own->above;
	if (!isnan(own->below))
		bounds.most = own->below;
	return bounds;
}

static double doubt_of(const struct rows *rows, size_t i)
{
	return series_error_limit(&rows->series, rows->first + i) +
	       rows->series.channel->resolution / 2;
}

/* +1: surely outside; -1: surely inside; 0: neither. */
static int side_of(const struct rows *rows, size_t i, const struct bounds *bounds)
{
	double value = series_value(&rows->series, rows->first + i), doubt = doubt_of(rows, i);
	if (value - doubt > bounds->most || value + doubt < bounds->least)
		return 1;
	return value + doubt <= bounds->most && value - doubt >= bounds->least ? -1 : 0;
}

static int64_t earliest(const struct rows *rows, size_t i)
{
	return series_earliest(&rows->series, rows->first + i);
}

static int64_t latest(const struct rows *rows, size_t i)
{
	return series_latest(&rows->series, rows->first + i);
}

/*
 * Longest time in which something could hide between two neighbours, and
 * before the first and after the last row of the window.
 */
static bool too_sparse(const struct rows *rows, int64_t ignore_ns, char *why, size_t size)
{
	int64_t longest = earliest(rows, 0) - rows->span.from_ns, at = rows->span.from_ns;
	for (size_t i = 1; i <= rows->count; i++) {
		int64_t before = i < rows->count ? earliest(rows, i - 1) : latest(rows, i - 1);
		int64_t now = i < rows->count ? latest(rows, i) : rows->span.to_ns;
		if (now - before > longest) {
			longest = now - before;
			at = before;
		}
	}
	if (longest <= ignore_ns)
		return false;
	(void)snprintf(why, size,
	               "%.3f ms without a sample of %s from %.3f ms could hide an excursion longer "
	               "than %.3f ms: sample faster",
	               (double)longest / 1e6, rows->series.channel->name, (double)at / 1e6,
	               (double)ignore_ns / 1e6);
	return true;
}

static void extremes(const struct rows *rows, bool sparse, const char *why,
                     struct metric *ret_metrics)
{
	const struct channel_info *channel = rows->series.channel;
	size_t at[2] = {0, 0};
	double low[2] = {-(double)INFINITY, (double)INFINITY},
	       high[2] = {-(double)INFINITY, (double)INFINITY};
	for (size_t i = 0; i < rows->count; i++) {
		double value = series_value(&rows->series, rows->first + i), doubt = doubt_of(rows, i);
		at[0] = value > series_value(&rows->series, rows->first + at[0]) ? i : at[0];
		at[1] = value < series_value(&rows->series, rows->first + at[1]) ? i : at[1];
		low[0] = fmax(low[0], value - doubt);
		high[0] = fmax(high[0], value + doubt);
		low[1] = fmin(low[1], value - doubt);
		high[1] = fmin(high[1], value + doubt);
	}
	for (size_t m = LARGEST; m <= SMALLEST; m++) {
		if (sparse || rows->missing) {
			metric_unknown(&ret_metrics[m], &metrics[m], channel->unit, channel->evidence, "%s",
			               why);
			continue;
		}
		put_value(&ret_metrics[m], &metrics[m], channel->unit, channel->evidence,
		          series_value(&rows->series, rows->first + at[m]), low[m], high[m], 1);
		put_point(&ret_metrics[m], earliest(rows, at[m]), latest(rows, at[m]),
		          ret_metrics[m].value);
	}
}

struct excursions {
	bool proven, possible;
	size_t at;
	char why[224];
};

/*
 * Runs of rows outside. Surely outside in neighbouring rows counts as outside
 * between them; the run is at least as long as its own rows, and at most as
 * long as from the inside row before to the inside row after it.
 */
static void find_excursions(const struct rows *rows, const struct bounds *bounds, int64_t ignore_ns,
                            struct excursions *ret)
{
	*ret = (struct excursions){0};
	const struct channel_info *channel = rows->series.channel;
	size_t i = 0;
	while (i < rows->count && !ret->proven) {
		size_t begin = i;
		if (side_of(rows, i, bounds) == -1) {
			i++;
			continue;
		}
		int64_t sure = 0;
		size_t sure_from = SIZE_MAX;
		for (; i < rows->count && side_of(rows, i, bounds) != -1; i++) {
			if (side_of(rows, i, bounds) != 1) {
				sure_from = SIZE_MAX;
				continue;
			}
			sure_from = sure_from == SIZE_MAX ? i : sure_from;
			int64_t lasted = earliest(rows, i) - latest(rows, sure_from);
			sure = lasted > sure ? lasted : sure;
		}
		int64_t from = begin > 0 ? earliest(rows, begin - 1) : rows->span.from_ns;
		int64_t to = i < rows->count ? latest(rows, i) : rows->span.to_ns;
		ret->proven = sure >= ignore_ns;
		if (to - from < ignore_ns && begin > 0 && i < rows->count)
			continue;
		if (!ret->possible || ret->proven)
			(void)snprintf(
			    ret->why, sizeof ret->why,
			    "%s was %.4g %s at %.3f ms; the excursion lasted between %.3f and %.3f ms",
			    channel->name, series_value(&rows->series, rows->first + begin),
			    channel->unit->name, (double)latest(rows, begin) / 1e6, (double)sure / 1e6,
			    (double)(to - from) / 1e6);
		ret->at = begin;
		ret->possible = true;
	}
}

static void inside(const struct rows *rows, const struct stays_within *own, bool sparse,
                   const char *why, struct metric *metric)
{
	const struct channel_info *channel = rows->series.channel;
	struct bounds bounds = bounds_of(own);
	if (isinf(bounds.least) && isinf(bounds.most)) {
		metric_unknown(metric, &metrics[INSIDE], NULL, channel->evidence,
		               "the check gives no bounds: between, above or below");
		return;
	}
	struct excursions excursions;
	find_excursions(rows, &bounds, own->ignore_ns, &excursions);
	if (excursions.proven) {
		put_yes_no(metric, &metrics[INSIDE], channel->evidence, false, excursions.why);
		put_point(metric, earliest(rows, excursions.at), latest(rows, excursions.at),
		          series_value(&rows->series, rows->first + excursions.at));
	} else if (excursions.possible || sparse || rows->missing) {
		metric_unknown(metric, &metrics[INSIDE], NULL, channel->evidence, "%s",
		               excursions.possible ? excursions.why : why);
	} else {
		put_yes_no(metric, &metrics[INSIDE], channel->evidence, true, "");
	}
}

static int evaluate(const struct check_input *in, const void *params, struct metric *ret_metrics,
                    size_t *ret_count, struct err *reterr)
{
	const struct stays_within *own = params;
	const struct channel_info *channel = &in->channels[own->channel];
	*ret_count = FIELD_COUNT(metrics);
	char why[224] = "";
	struct span span;
	struct rows rows = {0};
	if (window_span(in, &own->window, &span, why, sizeof why)) {
		if (rows_take(in, own->channel, span, &rows, reterr) < 0)
			return -1;
		if (!rows.usable)
			(void)snprintf(why, sizeof why, "%s", rows.why);
	}
	if (!rows.usable) {
		for (size_t i = 0; i < FIELD_COUNT(metrics); i++)
			metric_unknown(&ret_metrics[i], &metrics[i],
			               shape_unit(metrics[i].shape, channel->unit), channel->evidence, "%s",
			               why);
		return 0;
	}
	bool sparse = too_sparse(&rows, own->ignore_ns, why, sizeof why);
	if (!sparse && rows.missing)
		(void)snprintf(why, sizeof why, "%zu samples of %s in the window are no measurement",
		               rows.missing, channel->name);
	extremes(&rows, sparse, why, ret_metrics);
	inside(&rows, own, sparse, why, &ret_metrics[INSIDE]);
	return 0;
}

static int verify(const void *params, const struct channel_info *channels,
                  const struct machine *machine, struct err *reterr)
{
	(void)machine;
	const struct stays_within *own = params;
	struct bounds bounds = bounds_of(own);
	if (!isnan(own->between[0]) && (!isnan(own->above) || !isnan(own->below)))
		return err_set(reterr, ERR_FILE, "between says both bounds; leave out above and below");
	if (bounds.least > bounds.most)
		return err_set(reterr, ERR_FILE, "no value of %s can be above %g and below %g",
		               channels[own->channel].name, bounds.least, bounds.most);
	return 0;
}

const struct check_kind check_stays_within = {
    .name = "stays_within",
    .text = "a channel stays in limits during a window",
    .fields = &table,
    .params_size = sizeof(struct stays_within),
    .metrics = metrics,
    .metric_count = FIELD_COUNT(metrics),
    .evaluate = evaluate,
    .verify = verify,
};
