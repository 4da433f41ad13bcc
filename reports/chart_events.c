/* SPDX-License-Identifier: Apache-2.0 */
/*
 * A time line above the curves: the marks of a check and the times that it
 * measured from them, each as a bar over its interval, with the latest instant
 * that its limit allows. For checks of reactions: cause, detection, torque off.
 */
#include <math.h>
#include <string.h>

#include "chart.h"
#include "report_text.h"

enum { MARKS_MOST = 6, TIMES_MOST = 6 };

/* The marks that the fields of the check name, in their order, as far as the picture shows them. */
static size_t check_marks(const struct chart *chart, const struct mark **ret_marks)
{
	const struct check_use *use = chart->check->use;
	const struct recorded_test *recorded = chart->test->recorded;
	size_t count = 0;
	for (size_t i = 0; use->params && use->kind->fields && i < use->kind->fields->count; i++) {
		const struct field *field = &use->kind->fields->fields[i];
		int mark;
		if (field->kind != FIELD_MARK || count == MARKS_MOST)
			continue;
		memcpy(&mark, (const char *)use->params + field->offset, sizeof mark);
		if (mark < 0 || (size_t)mark >= recorded->mark_count)
			continue;
		const struct mark *one = &recorded->marks[mark];
		if (one->reached && one->latest_ns >= chart->t0_ns && one->earliest_ns <= chart->t1_ns)
			ret_marks[count++] = one;
	}
	return count;
}

static size_t check_times(const struct chart *chart, const struct metric_result **ret_times)
{
	size_t count = 0;
	for (size_t m = 0; m < chart->check->metric_count && count < TIMES_MOST; m++) {
		const struct metric *metric = &chart->check->metrics[m].metric;
		if (metric->kind->shape == METRIC_TIME && metric->point_count > 0)
			ret_times[count++] = &chart->check->metrics[m];
	}
	return count;
}

size_t chart_event_count(const struct chart *chart)
{
	const struct mark *marks[MARKS_MOST];
	const struct metric_result *times[TIMES_MOST];
	size_t mark_count = check_marks(chart, marks), time_count = check_times(chart, times);
	/* A response has its times in the picture of the curve itself. */
	return chart->primary || mark_count == 0 || time_count == 0 ? 0 : mark_count + time_count;
}

struct line {
	const struct chart *chart;
	const struct chart_scale *scale;
	double y;
};

static void guide(const struct line *line, double x, double bottom)
{
	chart_line(line->chart->out, x, line->y + 6, x, bottom, "#8a8576", "1 4");
}

static void bar(const struct line *line, int64_t earliest_ns, int64_t latest_ns, const char *name,
                const char *fill)
{
	double x1 =
	    fmin(fmax(chart_x(line->scale, (double)earliest_ns), line->scale->x0), line->scale->x1);
	double x2 =
	    fmin(fmax(chart_x(line->scale, (double)latest_ns), line->scale->x0), line->scale->x1);
	bool right = x2 > line->scale->x0 + (line->scale->x1 - line->scale->x0) * 0.6;
	chart_rectangle(line->chart->out, x1 - 1.5, line->y - 4, x2 - x1 + 3, 9, fill, NULL);
	chart_label(line->chart->out, right ? x1 - 7 : x2 + 7, line->y + 4, right ? "end" : "start",
	            "#111111", name);
}

static void time_line(const struct line *line, const struct metric_result *result,
                      const struct mark *from, double bottom)
{
	const struct metric *metric = &result->metric;
	const struct metric_point *point = &metric->points[0];
	char text[280], value[64], interval[96], bounds[96];
	const struct limit *limit = result->limit_count ? result->limits[0].limit : NULL;
	struct shown_unit shown = metric_shown(metric, limit);
	(void)value_text(metric, shown, value, sizeof value);
	(void)interval_text(metric, shown, interval, sizeof interval);
	(void)snprintf(text, sizeof text, "%.40s %.30s %.12s%s%.60s%s", metric->kind->name, value,
	               shown.name, interval[0] ? " (" : "", interval, interval[0] ? ")" : "");
	if (limit) {
		size_t used = strlen(text);
		(void)snprintf(text + used, sizeof text - used, ", limit %.60s %.12s",
		               limit_text(metric, limit, shown, bounds, sizeof bounds), shown.name);
	}
	if (limit && isfinite(limit->max)) {
		double x = chart_x(line->scale, (double)from->latest_ns + limit->max * 1e9);
		if (x > line->scale->x0 && x < line->scale->x1) {
			char fill[112];
			(void)snprintf(fill, sizeof fill, "url(#%s-out)", line->chart->id);
			chart_rectangle(line->chart->out, x, line->y - 8, line->scale->x1 - x, 17, fill, "0.6");
			chart_line(line->chart->out, x, line->y - 8, x, line->y + 9, "#9b2335", NULL);
		}
	}
	bool failed = result->limit_count && result->limits[0].verdict == VERDICT_FAIL;
	bar(line, point->earliest_ns, point->latest_ns, text, failed ? "#9b2335" : "#1f4e6b");
	guide(line,
	      fmin(fmax(chart_x(line->scale, (double)point->latest_ns), line->scale->x0),
	           line->scale->x1),
	      bottom);
}

void chart_events(const struct chart *chart, double top, double bottom)
{
	const struct mark *marks[MARKS_MOST];
	const struct metric_result *times[TIMES_MOST];
	if (chart_event_count(chart) == 0)
		return;
	size_t mark_count = check_marks(chart, marks), time_count = check_times(chart, times);
	struct chart_scale scale = {.t0_ns = chart->t0_ns,
	                            .t1_ns = chart->t1_ns,
	                            .x0 = CHART_LEFT,
	                            .x1 = CHART_WIDTH - CHART_RIGHT};
	struct line line = {.chart = chart, .scale = &scale, .y = top + EVENT_HEIGHT / 2.0};
	for (size_t i = 0; i < mark_count + time_count; i++) {
		/* The cause, what was measured from it, then the marks after it. */
		bool is_mark = i == 0 || i > time_count;
		const struct mark *mark = marks[i == 0 ? 0 : i > time_count ? i - time_count : 0];
		chart_label(chart->out, scale.x0 - 6, line.y + 4, "end", "#3a3833",
		            i == 0    ? "cause"
		            : is_mark ? "then"
		                      : "measured");
		chart_line(chart->out, scale.x0, line.y, scale.x1, line.y, "#ddd8ca", NULL);
		if (!is_mark)
			time_line(&line, times[i - 1], marks[0], bottom);
		else
			bar(&line, mark->earliest_ns, mark->latest_ns, mark->name, "#5a5547");
		line.y += EVENT_HEIGHT;
	}
}
