/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Charts of checks. Which channels belong to a check is read from its table of
 * fields; where a limit or a metric lies, from the points that the check gave.
 * So a new kind of check has its picture without a line here. What cannot be
 * placed for certain is not drawn: a limit line in the wrong place would be
 * believed.
 */
#include "chart.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include "report_text.h"

/* In the units of the viewBox. */
static const double TOP = 40, HEIGHT = 150, GAP = 30, BOTTOM = 26;

/* ---- what there is to draw ------------------------------------------------ */

static void add_channel(struct chart *chart, int channel)
{
	if (channel < 0 || (size_t)channel >= chart->rig->channel_count ||
	    chart->panel_count == PANELS_MOST || !chart->test->series ||
	    chart->test->series[channel].rows == 0)
		return;
	for (size_t i = 0; i < chart->panel_count; i++)
		if (chart->channels[i] == channel)
			return;
	chart->channels[chart->panel_count++] = channel;
}

static void find_channels(struct chart *chart)
{
	const struct check_use *use = chart->check->use;
	if (!use->params || !use->kind->fields)
		return;
	for (size_t i = 0; i < use->kind->fields->count; i++) {
		const struct field *field = &use->kind->fields->fields[i];
		const char *at = (const char *)use->params + field->offset;
		if (field->kind == FIELD_CHANNEL) {
			int channel;
			memcpy(&channel, at, sizeof channel);
			add_channel(chart, channel);
			if (strcmp(field->key, "channel") == 0 && chart->panel_count == 1)
				chart->primary = true;
		} else if (field->kind == FIELD_CONDITION) {
			struct condition condition;
			memcpy(&condition, at, sizeof condition);
			add_channel(chart, condition.channel);
		} else if (field->kind == FIELD_CHANNELS) {
			struct int_list list;
			memcpy(&list, at, sizeof list);
			for (size_t j = 0; list.items && j < list.count; j++)
				add_channel(chart, list.items[j]);
		}
	}
}

static bool is_placed(const struct metric_point *point)
{
	return point->earliest_ns <= point->latest_ns && point->latest_ns > 0;
}

static const struct mark *mark_of_field(const struct chart *chart)
{
	const struct check_use *use = chart->check->use;
	const struct recorded_test *recorded = chart->test->recorded;
	for (size_t i = 0; use->params && use->kind->fields && i < use->kind->fields->count; i++) {
		const struct field *field = &use->kind->fields->fields[i];
		int mark;
		if (field->kind != FIELD_MARK)
			continue;
		memcpy(&mark, (const char *)use->params + field->offset, sizeof mark);
		if (mark >= 0 && (size_t)mark < recorded->mark_count && recorded->marks[mark].reached)
			return &recorded->marks[mark];
	}
	return NULL;
}

static void widen(int64_t *t0, int64_t *t1, int64_t earliest, int64_t latest)
{
	if (earliest < *t0)
		*t0 = earliest;
	if (latest > *t1)
		*t1 = latest;
}

/*
 * The whole stimulus; where the times that were measured lie in a small part
 * of it, that part and its surroundings.
 */
static void find_times(struct chart *chart)
{
	const struct recorded_test *recorded = chart->test->recorded;
	int64_t begin = recorded->begin_ns, end = recorded->end_ns, t0 = INT64_MAX, t1 = INT64_MIN;
	if (end <= begin)
		end = begin + NS_PER_MS;
	const struct mark *mark = mark_of_field(chart);
	if (mark)
		widen(&t0, &t1, mark->earliest_ns, mark->latest_ns);
	bool timed = false;
	for (size_t m = 0; m < chart->check->metric_count; m++) {
		const struct metric *metric = &chart->check->metrics[m].metric;
		if (metric->kind->shape != METRIC_TIME)
			continue;
		for (size_t p = 0; p < metric->point_count; p++)
			if (is_placed(&metric->points[p])) {
				timed = true;
				widen(&t0, &t1, metric->points[p].earliest_ns, metric->points[p].latest_ns);
			}
	}
	chart->t0_ns = begin;
	chart->t1_ns = end;
	if (timed && t0 >= begin && t1 <= end && t1 > t0 && t1 - t0 < (end - begin) / 8) {
		int64_t span = t1 - t0;
		chart->t0_ns = t0 - span > begin ? t0 - span : begin;
		chart->t1_ns = t1 + 3 * span < end ? t1 + 3 * span : end;
	}
	bool short_time = chart->t1_ns - begin < 2 * NS_PER_S;
	chart->t_factor = short_time ? 1e-6 : 1e-9;
	chart->t_unit = short_time ? "ms" : "s";
}

/* ---- limits --------------------------------------------------------------- */

/* True where the value of a metric is a level on the axis of the first panel. */
static bool is_level(const struct chart *chart, const struct metric *metric)
{
	enum metric_shape shape = metric->kind->shape;
	if (!chart->primary || !isfinite(metric->value) ||
	    (shape != METRIC_LEVEL && shape != METRIC_ANGLE_ELEC && shape != METRIC_ANGLE_MECH) ||
	    metric->unit != chart->rig->infos[chart->channels[0]].unit)
		return false;
	for (size_t i = 0; i < metric->point_count; i++)
		if (fabs(metric->points[i].level - metric->value) <= 1e-9 * fmax(1, fabs(metric->value)))
			return true;
	return false;
}

/* True where a metric is the time from the mark of the check to one of its points. */
static bool is_time_from(const struct mark *mark, const struct metric *metric)
{
	if (!mark || metric->kind->shape != METRIC_TIME || !isfinite(metric->value))
		return false;
	double from = (double)mark->earliest_ns + (double)(mark->latest_ns - mark->earliest_ns) / 2;
	double slack = fmax(metric_uncertainty(metric), 1e-6) * 1e9;
	for (size_t i = 0; i < metric->point_count; i++) {
		const struct metric_point *point = &metric->points[i];
		double at =
		    (double)point->earliest_ns + (double)(point->latest_ns - point->earliest_ns) / 2;
		if (is_placed(point) && fabs(at - from - metric->value * 1e9) <= slack)
			return true;
	}
	return false;
}

/* ---- drawing -------------------------------------------------------------- */

static bool same_quantity(const struct channel_info *command, const struct channel_info *panel)
{
	return panel->unit != unit_one() && panel->name_count == 0 &&
	       dimension_agrees(command->unit->dimension, panel->unit->dimension);
}

static void take(double value, double *low, double *high)
{
	if (!isfinite(value))
		return;
	if (value < *low)
		*low = value;
	if (value > *high)
		*high = value;
}

/* Least and greatest of what is drawn in a panel, with some air. */
static void value_range(const struct chart *chart, size_t panel, double *ret_low, double *ret_high)
{
	const struct series *series = &chart->test->series[chart->channels[panel]];
	const struct recorded_test *recorded = chart->test->recorded;
	const struct channel_info *info = &chart->rig->infos[chart->channels[panel]];
	double low = (double)INFINITY, high = -(double)INFINITY;
	for (size_t row = series_first_at(series, chart->t0_ns); row < series->rows; row++) {
		if (series_sent(series, row) > chart->t1_ns)
			break;
		take(series_value(series, row), &low, &high);
	}
	for (size_t i = 0; i < recorded->command_count; i++) {
		const struct channel_info *command = &chart->rig->infos[recorded->commands[i].channel];
		if (same_quantity(command, info) && recorded->commands[i].earliest_ns <= chart->t1_ns)
			take(recorded->commands[i].value * command->unit->scale / info->unit->scale, &low,
			     &high);
	}
	for (size_t m = 0; panel == 0 && m < chart->check->metric_count; m++) {
		const struct metric_result *metric = &chart->check->metrics[m];
		for (size_t l = 0; is_level(chart, &metric->metric) && l < metric->limit_count; l++) {
			take(metric->limits[l].limit->min, &low, &high);
			take(metric->limits[l].limit->max, &low, &high);
		}
	}
	struct chart_step step;
	if (panel == 0 && chart->primary && chart_step_find(chart->check, &step)) {
		take(step.final - step.band, &low, &high);
		take(step.final + step.band, &low, &high);
		take(step.overshoot_most, &low, &high);
	}
	if (!isfinite(low)) {
		low = 0;
		high = 1;
	}
	double air = (high - low) * 0.08;
	if (air <= 0)
		air = fmax(fabs(high) * 0.1, info->resolution > 0 ? info->resolution : 0.5);
	*ret_low = low - air;
	*ret_high = high + air;
}

/* An area in which a limit is broken: hatched, so that it is seen without colours too. */
static void outside(const struct chart *chart, double x1, double y1, double x2, double y2)
{
	char fill[112];
	if (x2 <= x1 || y2 <= y1)
		return;
	(void)snprintf(fill, sizeof fill, "url(#%s-out)", chart->id);
	chart_rectangle(chart->out, x1, y1, x2 - x1, y2 - y1, fill, "0.6");
}

/* The band of the settling time and the overshoot that is allowed, where the step is known. */
static void step_bands(const struct chart *chart, const struct chart_scale *scale)
{
	const struct mark *mark = mark_of_field(chart);
	struct chart_step step;
	if (!chart->primary || !mark || !chart_step_find(chart->check, &step))
		return;
	double x0 = fmin(fmax(chart_x(scale, (double)mark->latest_ns), scale->x0), scale->x1);
	double y1 = chart_y(scale, step.final + step.band), y2 = chart_y(scale, step.final - step.band);
	if (step.band > 0) {
		chart_rectangle(chart->out, x0, y1, scale->x1 - x0, y2 - y1, "#6f9aa8", "0.25");
		chart_line(chart->out, x0, y1, scale->x1, y1, "#6f9aa8", NULL);
		chart_line(chart->out, x0, y2, scale->x1, y2, "#6f9aa8", NULL);
	}
	if (isnan(step.overshoot_most))
		return;
	double y = chart_y(scale, step.overshoot_most);
	if (step.sign > 0)
		outside(chart, x0, scale->y_high, scale->x1, y);
	else
		outside(chart, x0, y, scale->x1, scale->y_low);
	chart_line(chart->out, x0, y, scale->x1, y, "#9b2335", "2 3");
	const struct chart_place places[] = {{scale->x1 - 4, step.sign > 0 ? y - 4 : y + 11, "end"},
	                                     {scale->x1 - 4, step.sign > 0 ? y + 11 : y - 4, "end"}};
	chart_place_label(chart->words, chart->out, places, 2, "#9b2335", "overshoot at most");
}

static void limit_lines(const struct chart *chart, const struct chart_scale *scale)
{
	const struct mark *mark = mark_of_field(chart);
	char text[120];
	for (size_t m = 0; m < chart->check->metric_count; m++) {
		const struct metric_result *result = &chart->check->metrics[m];
		bool level = is_level(chart, &result->metric), time = is_time_from(mark, &result->metric);
		for (size_t l = 0; l < result->limit_count; l++) {
			const struct limit *limit = result->limits[l].limit;
			const double values[2] = {limit->min, limit->max};
			for (int i = 0; i < 2; i++) {
				const char *name = result->metric.kind->name;
				if (!isfinite(values[i]) || !(level || time))
					continue;
				(void)snprintf(text, sizeof text, "%.40s %s", name,
				               i == 0 ? "at least" : "at most");
				if (level) {
					double y = chart_y(scale, values[i]);
					outside(chart, scale->x0, i == 0 ? y : scale->y_high, scale->x1,
					        i == 0 ? scale->y_low : y);
					chart_line(chart->out, scale->x0, y, scale->x1, y, "#9b2335", "2 3");
					const struct chart_place places[] = {
					    {scale->x1 - 4, i == 0 ? y + 11 : y - 4, "end"},
					    {scale->x1 - 4, i == 0 ? y - 4 : y + 11, "end"},
					    {scale->x1 - 170, y - 4, "end"}};
					chart_place_label(chart->words, chart->out, places, 3, "#9b2335", text);
					continue;
				}
				double x = chart_x(scale, (double)mark->latest_ns + values[i] * 1e9);
				if (x < scale->x0 || x > scale->x1)
					continue;
				if (i == 1)
					outside(chart, x, scale->y_low - 7, scale->x1, scale->y_low);
				chart_line(chart->out, x, scale->y_high, x, scale->y_low, "#9b2335", "2 3");
				bool right = x > (scale->x0 + scale->x1) / 2;
				struct chart_place places[8];
				for (int row = 0; row < 8; row++)
					places[row] =
					    (struct chart_place){right ? x - 3 : x + 3, scale->y_low - 10 - 13.0 * row,
					                         right ? "end" : "start"};
				chart_place_label(chart->words, chart->out, places, 8, "#9b2335", text);
			}
		}
	}
}

static void mark_name(const struct chart *chart, const struct chart_scale *scale, double x,
                      const char *name)
{
	struct chart_place places[8];
	for (int row = 0; row < 4; row++) {
		places[row] = (struct chart_place){x + 3, scale->y_high + 11 + 13.0 * row, "start"};
		places[row + 4] = (struct chart_place){x - 3, scale->y_high + 11 + 13.0 * row, "end"};
	}
	chart_place_label(chart->words, chart->out, places, 8, "#5a5547", name);
}

static void mark_bands(const struct chart *chart, const struct chart_scale *scale, bool named)
{
	const struct recorded_test *recorded = chart->test->recorded;
	for (size_t i = 0; i < recorded->mark_count; i++) {
		const struct mark *mark = &recorded->marks[i];
		if (!mark->reached || mark->latest_ns < chart->t0_ns || mark->earliest_ns > chart->t1_ns)
			continue;
		double x1 = fmax(chart_x(scale, (double)mark->earliest_ns), scale->x0);
		double x2 = fmin(chart_x(scale, (double)mark->latest_ns), scale->x1);
		chart_rectangle(chart->out, x1, scale->y_high, fmax(x2 - x1, 1),
		                scale->y_low - scale->y_high, "#6b6658", x2 - x1 < 3 ? "0.6" : "0.2");
		if (named)
			mark_name(chart, scale, x1, mark->name);
	}
}

static void bad_bands(const struct chart *chart, const struct chart_scale *scale,
                      const struct series *series)
{
	for (size_t i = 0; i < series->bad_count && i < 200; i++) {
		if (series->bad[i].first >= series->rows || series->bad[i].last >= series->rows)
			continue;
		double x1 = chart_x(scale, (double)series_sent(series, series->bad[i].first));
		double x2 = chart_x(scale, (double)series_received(series, series->bad[i].last));
		x1 = fmax(x1, scale->x0);
		x2 = fmin(x2, scale->x1);
		if (x2 > x1)
			chart_rectangle(chart->out, x1, scale->y_high, x2 - x1, scale->y_low - scale->y_high,
			                "#9b2335", "0.15");
	}
}

/* Where the metrics lie: a bar over the interval, a number that the caption explains. */
static void metric_points(const struct chart *chart, const struct chart_scale *scale)
{
	char number[16];
	int count = 0, base = 0;
	for (size_t m = 0; m < chart->check->metric_count; m++) {
		const struct metric *metric = &chart->check->metrics[m].metric;
		for (size_t p = 0; p < metric->point_count && count < POINTS_MOST; p++) {
			const struct metric_point *point = &metric->points[p];
			if (!is_placed(point) || point->latest_ns < chart->t0_ns ||
			    point->earliest_ns > chart->t1_ns)
				continue;
			bool on_axis = chart->primary && isfinite(point->level) && point->level >= scale->low &&
			               point->level <= scale->high;
			double x1 = fmax(chart_x(scale, (double)point->earliest_ns), scale->x0);
			double x2 = fmin(chart_x(scale, (double)point->latest_ns), scale->x1);
			/* Those without a level stand on the axis of time, one above the other. */
			double y = on_axis ? chart_y(scale, point->level) : scale->y_low - 4 - 10.0 * base++;
			chart_rectangle(chart->out, x1 - 1.5, y - 2, fmax(x2 - x1, 0) + 3, 4, "#111111",
			                "0.75");
			(void)snprintf(number, sizeof number, "%d", ++count);
			double middle = on_axis ? (x1 + x2) / 2 : x2 + 5;
			const char *anchor = on_axis ? "middle" : "start";
			const struct chart_place places[] = {{middle, on_axis ? y - 5 : y + 4, anchor},
			                                     {middle, y + 13, anchor},
			                                     {x2 + 5, y + 4, "start"},
			                                     {x1 - 5, y + 4, "end"},
			                                     {middle, y - 18, anchor},
			                                     {middle, y + 26, anchor},
			                                     {middle + 12, y - 18, anchor},
			                                     {middle + 12, y + 26, anchor},
			                                     {middle + 24, y - 5, anchor},
			                                     {middle + 24, y + 13, anchor}};
			chart_place_label(chart->words, chart->out, places, sizeof places / sizeof *places,
			                  "#111111", number);
		}
	}
}

static void panel(const struct chart *chart, size_t index, double top)
{
	const struct channel_info *info = &chart->rig->infos[chart->channels[index]];
	const struct series *series = &chart->test->series[chart->channels[index]];
	const struct recorded_test *recorded = chart->test->recorded;
	const struct test *test = chart->test->test;
	struct chart_scale scale = {.t0_ns = chart->t0_ns,
	                            .t1_ns = chart->t1_ns,
	                            .x0 = CHART_LEFT,
	                            .x1 = CHART_WIDTH - CHART_RIGHT,
	                            .y_low = top + HEIGHT,
	                            .y_high = top};
	char text[320];
	int64_t every = test->group_count ? test->groups[0].every_ns : 0;
	value_range(chart, index, &scale.low, &scale.high);
	bad_bands(chart, &scale, series);
	chart_y_axis(chart, &scale, info);
	if (index == 0) {
		step_bands(chart, &scale);
		limit_lines(chart, &scale);
	}
	mark_bands(chart, &scale, index == 0);
	bool commanded = false;
	for (size_t c = 0; c < chart->rig->channel_count; c++)
		if (chart->rig->channels[c].command && same_quantity(&chart->rig->infos[c], info)) {
			for (size_t i = 0; i < recorded->command_count && !commanded; i++)
				commanded = recorded->commands[i].channel == (int)c;
			chart_commands(chart->out, recorded->commands, recorded->command_count, (int)c,
			               chart->rig->infos[c].unit->scale / info->unit->scale, &scale);
		}
	chart_curve(chart->out, series, &scale, chart->columns, 5 * every);
	if (index == 0 && chart_event_count(chart) == 0)
		metric_points(chart, &scale);
	chart_line(chart->out, scale.x0, scale.y_low, scale.x1, scale.y_low, "#3a3833", NULL);
	chart_line(chart->out, scale.x0, scale.y_low, scale.x0, scale.y_high, "#3a3833", NULL);
	(void)snprintf(text, sizeof text, "%.64s%s%.40s (%s)%s", info->name,
	               info->unit == unit_one() ? "" : ", ",
	               info->unit == unit_one() ? "" : info->unit->name, evidence_name(info->evidence),
	               commanded ? "; dashed: what was commanded" : "");
	chart_label(chart->out, scale.x0, top - 7, "start", "#1f4e6b", text);
}

static void caption(const struct chart *chart)
{
	int count = 0;
	xml_open(chart->out, "figcaption");
	xml_textf(chart->out,
	          "%.64s. Grey: marks with their interval. Dotted and hatched: "
	          "limits and what lies outside.%s",
	          chart->check->use->name,
	          chart_step_find(chart->check, &(struct chart_step){0})
	              ? " Blue-grey band: where the answer counts as settled."
	              : "");
	if (chart->t0_ns > chart->test->recorded->begin_ns ||
	    chart->t1_ns < chart->test->recorded->end_ns)
		xml_textf(chart->out, " A part of the stimulus, which took %.4g %s.",
		          (double)(chart->test->recorded->end_ns - chart->test->recorded->begin_ns) *
		              chart->t_factor,
		          chart->t_unit);
	size_t metrics = chart_event_count(chart) ? 0 : chart->check->metric_count;
	for (size_t m = 0; m < metrics; m++) {
		const struct metric *metric = &chart->check->metrics[m].metric;
		for (size_t p = 0; p < metric->point_count && count < POINTS_MOST; p++) {
			const struct metric_point *point = &metric->points[p];
			if (!is_placed(point) || point->latest_ns < chart->t0_ns ||
			    point->earliest_ns > chart->t1_ns)
				continue;
			bool own = point->label && *point->label && strcmp(point->label, metric->kind->name);
			xml_textf(chart->out, " %d: %s%s%s.", ++count, metric->kind->name, own ? ", " : "",
			          own ? point->label : "");
		}
	}
	xml_close(chart->out);
}

bool chart_possible(const struct rig *rig, const struct test_result *test,
                    const struct check_result *check)
{
	struct chart chart = {.rig = rig, .test = test, .check = check};
	if (!rig || !test->recorded || !test->series || check->verdict == VERDICT_SKIPPED)
		return false;
	find_channels(&chart);
	return chart.panel_count > 0;
}

void chart_write(struct xml_out *out, const struct rig *rig, const struct test_result *test,
                 const struct check_result *check, const char *id, int columns)
{
	struct chart_words words = {.count = 0};
	struct chart chart = {
	    .words = &words, .out = out, .rig = rig, .test = test, .check = check, .id = id};
	chart.columns = columns < CHART_COLUMNS_LEAST  ? CHART_COLUMNS_LEAST
	                : columns > CHART_COLUMNS_MOST ? CHART_COLUMNS_MOST
	                                               : columns;
	if (!chart_possible(rig, test, check))
		return;
	find_channels(&chart);
	find_times(&chart);
	char title[320];
	double top = TOP + EVENT_HEIGHT * (double)chart_event_count(&chart);
	double bottom =
	    top + HEIGHT * (double)chart.panel_count + GAP * (double)(chart.panel_count - 1);
	xml_open(out, "figure");
	if (chart_polar_possible(&chart))
		chart_polar(&chart);
	(void)snprintf(title, sizeof title, "%.60s of test %.120s: %.60s over time", check->use->name,
	               test->test->name, rig->infos[chart.channels[0]].name);
	chart_begin(out, id, bottom + BOTTOM, title);
	chart_hatching(out, id);
	for (size_t i = 0; i < chart.panel_count; i++)
		panel(&chart, i, top - 14 + (HEIGHT + GAP) * (double)i);
	chart_events(&chart, 8, bottom - 14);
	chart_x_axis(&chart, bottom - 14);
	xml_close(out);
	caption(&chart);
	xml_close(out);
}
