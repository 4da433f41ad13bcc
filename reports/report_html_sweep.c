/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Sweeps at a glance: the least margin at each point. Two swept values make a
 * map, as speed and torque do; one, or more than two, make a list of bars. The
 * number stands in every cell; light and dark carry the size, hatching says
 * "outside", so that nothing hangs on hue.
 */
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "chart.h"
#include "report_html.h"
#include "report_text.h"

enum { AXIS_MOST = 16, BARS_MOST = 80 };
static const double CELL_HEIGHT = 46, MAP_TOP = 22, MAP_BOTTOM = 42, BAR_HEIGHT = 22;

struct sweep {
	struct xml_out *out;
	const struct suite_result *suite;
	size_t index; /* of the suite */
	size_t first, count;
	const char *base;
	char id[64];
	const char *axes[2][AXIS_MOST]; /* values shown, in order */
	size_t axis_counts[2];
};

static bool same_sweep(const struct test *a, const struct test *b)
{
	return b->sweep_count == a->sweep_count && strcmp(a->base, b->base) == 0;
}

static bool take_axis_value(struct sweep *sweep, int axis, const char *shown)
{
	for (size_t i = 0; i < sweep->axis_counts[axis]; i++)
		if (strcmp(sweep->axes[axis][i], shown) == 0)
			return true;
	if (sweep->axis_counts[axis] == AXIS_MOST)
		return false;
	size_t at = sweep->axis_counts[axis]++;
	/* By their numbers; the unit is the same within a sweep nearly always. */
	while (at > 0 && strtod(sweep->axes[axis][at - 1], NULL) > strtod(shown, NULL)) {
		sweep->axes[axis][at] = sweep->axes[axis][at - 1];
		at--;
	}
	sweep->axes[axis][at] = shown;
	return true;
}

static bool is_map(struct sweep *sweep)
{
	for (size_t i = 0; i < sweep->count; i++) {
		const struct test *test = sweep->suite->tests[sweep->first + i].test;
		if (test->sweep_count != 2 || !take_axis_value(sweep, 0, test->sweep[0].shown) ||
		    !take_axis_value(sweep, 1, test->sweep[1].shown))
			return false;
	}
	return sweep->axis_counts[0] > 1 && sweep->axis_counts[1] > 1;
}

/* From paper (no margin) to a green that black text still stands on; it darkens evenly. */
static const char *shade(double margin, char buffer[8])
{
	double share = fmin(fmax(margin / 100, 0), 1);
	(void)snprintf(buffer, 8, "#%02x%02x%02x", (unsigned)(0xf4 - share * (0xf4 - 0x8a)),
	               (unsigned)(0xf1 - share * (0xf1 - 0xbd)),
	               (unsigned)(0xe6 - share * (0xe6 - 0xa6)));
	return buffer;
}

static const char *fill_of(const struct sweep *sweep, const struct test_result *test, double margin,
                           char buffer[80])
{
	if (test->verdict == VERDICT_FAIL || margin < 0)
		(void)snprintf(buffer, 80, "url(#%s-out)", sweep->id);
	else if (isnan(margin))
		(void)snprintf(buffer, 80, "#fbfaf5");
	else
		(void)shade(margin, buffer);
	return buffer;
}

static void margin_text(const struct test_result *test, double margin, char *buffer, size_t size)
{
	bool plain = test->verdict == VERDICT_PASS;
	if (isnan(margin))
		(void)snprintf(buffer, size, "%s", verdict_name(test->verdict));
	else
		(void)snprintf(buffer, size, "%.0f %%%s%s", margin, plain ? "" : " ",
		               plain ? "" : verdict_name(test->verdict));
}

static void plate(struct xml_out *out, double x, double y, double width)
{
	chart_rectangle(out, x - width / 2, y - 11, width, 15, "#fbfaf5", "0.85");
}

static void cell(const struct sweep *sweep, const struct test_result *test, double x, double y,
                 double width)
{
	const struct metric_result *metric;
	double margin = test_margin(test, &metric);
	char fill[80], text[80];
	struct xml_out *out = sweep->out;
	chart_rectangle(out, x + 1, y + 1, width - 2, CELL_HEIGHT - 2,
	                fill_of(sweep, test, margin, fill), NULL);
	margin_text(test, margin, text, sizeof text);
	if (fill[0] == 'u') {
		plate(out, x + width / 2, y + 20, fmin(width - 6, 7.0 * (double)strlen(text) + 8));
		if (metric)
			plate(out, x + width / 2, y + 36,
			      fmin(width - 6, 6.2 * (double)strlen(metric->metric.kind->name) + 8));
	}
	xml_open(out, "text");
	xml_attrf(out, "x", "%.1f", x + width / 2);
	xml_attrf(out, "y", "%.1f", y + 20);
	xml_attr(out, "text-anchor", "middle");
	xml_attr(out, "fill", "#111111");
	xml_attr(out, "font-weight", test->verdict == VERDICT_PASS ? "400" : "700");
	xml_text(out, text);
	xml_close(out);
	if (metric)
		chart_label(out, x + width / 2, y + 36, "middle", "#3a3833", metric->metric.kind->name);
}

static const struct test_result *at_point(const struct sweep *sweep, const char *x, const char *y)
{
	for (size_t i = 0; i < sweep->count; i++) {
		const struct test_result *test = &sweep->suite->tests[sweep->first + i];
		if (strcmp(test->test->sweep[0].shown, x) == 0 &&
		    strcmp(test->test->sweep[1].shown, y) == 0)
			return test;
	}
	return NULL;
}

static void svg_open(const struct sweep *sweep, double height)
{
	char title[200];
	(void)snprintf(title, sizeof title, "%.100s: least margin at each point of the sweep",
	               sweep->base);
	chart_begin(sweep->out, sweep->id, height, title);
	chart_hatching(sweep->out, sweep->id);
}

static void map(const struct sweep *sweep)
{
	size_t columns = sweep->axis_counts[0], rows = sweep->axis_counts[1];
	double width = (CHART_WIDTH - CHART_LEFT - CHART_RIGHT) / (double)columns;
	double bottom = MAP_TOP + CELL_HEIGHT * (double)rows;
	const struct test *any = sweep->suite->tests[sweep->first].test;
	svg_open(sweep, bottom + MAP_BOTTOM);
	chart_label(sweep->out, 8, 15, "start", "#3a3833", any->sweep[1].name);
	for (size_t r = 0; r < rows; r++) {
		/* The greatest on top, as on an axis. */
		const char *y_value = sweep->axes[1][rows - 1 - r];
		double y = MAP_TOP + CELL_HEIGHT * (double)r;
		chart_label(sweep->out, CHART_LEFT - 8, y + CELL_HEIGHT / 2 + 4, "end", "#3a3833", y_value);
		for (size_t c = 0; c < columns; c++) {
			const struct test_result *test = at_point(sweep, sweep->axes[0][c], y_value);
			if (test)
				cell(sweep, test, CHART_LEFT + width * (double)c, y, width);
		}
	}
	for (size_t c = 0; c < columns; c++)
		chart_label(sweep->out, CHART_LEFT + width * ((double)c + 0.5), bottom + 15, "middle",
		            "#3a3833", sweep->axes[0][c]);
	chart_label(sweep->out, CHART_WIDTH - CHART_RIGHT, bottom + 33, "end", "#3a3833",
	            any->sweep[0].name);
	xml_close(sweep->out);
}

static void bars(const struct sweep *sweep)
{
	const double left = 250, right = CHART_WIDTH - 160;
	size_t count = sweep->count < BARS_MOST ? sweep->count : BARS_MOST;
	double zero = left + (right - left) * 0.25;
	svg_open(sweep, 16 + BAR_HEIGHT * (double)count);
	for (size_t i = 0; i < count; i++) {
		const struct test_result *test = &sweep->suite->tests[sweep->first + i];
		const struct metric_result *metric;
		double margin = test_margin(test, &metric), y = 8 + BAR_HEIGHT * (double)i;
		/* A full bar is 100 %; what lies outside by more than 33 % ends at the edge. */
		double x = zero + (right - zero) * fmin(fmax(margin, -100.0 / 3), 100) / 100;
		char text[160], fill[80];
		int used = 0;
		text[0] = '\0';
		for (size_t k = 0; k < test->test->sweep_count; k++)
			used += snprintf(text + used, sizeof text - (size_t)used, "%s%.20s %.20s",
			                 k ? ", " : "", test->test->sweep[k].name, test->test->sweep[k].shown);
		chart_label(sweep->out, left - 8, y + 15, "end", "#3a3833", text);
		if (!isnan(margin))
			chart_rectangle(sweep->out, fmin(x, zero), y + 3, fabs(x - zero), BAR_HEIGHT - 6,
			                fill_of(sweep, test, margin, fill), NULL);
		margin_text(test, margin, text, sizeof text);
		if (metric) {
			size_t length = strlen(text);
			(void)snprintf(text + length, sizeof text - length, ", %.30s",
			               metric->metric.kind->name);
		}
		chart_label(sweep->out, isnan(margin) ? zero + 6 : fmax(x, zero) + 6, y + 15, "start",
		            "#111111", text);
	}
	chart_line(sweep->out, zero, 6, zero, 10 + BAR_HEIGHT * (double)count, "#3a3833", NULL);
	xml_close(sweep->out);
}

static void one_sweep(struct sweep *sweep)
{
	xml_open(sweep->out, "figure");
	if (is_map(sweep))
		map(sweep);
	else
		bars(sweep);
	xml_open(sweep->out, "figcaption");
	xml_textf(sweep->out,
	          "%.100s: the least margin of all limits at each point, and whose it is. 100 %%: the "
	          "value stands as far from its limit as it can (in the middle between two limits, or "
	          "at zero under one). Hatched: outside, or failed.",
	          sweep->base);
	if (sweep->count > BARS_MOST)
		xml_textf(sweep->out, " The first %d of %zu points.", BARS_MOST, sweep->count);
	xml_close(sweep->out);
	xml_close(sweep->out);
}

void html_sweeps(struct xml_out *out, const struct run_result *run)
{
	bool begun = false;
	for (size_t s = 0; s < run->suite_count; s++) {
		const struct suite_result *suite = &run->suites[s];
		for (size_t t = 0; t < suite->test_count;) {
			const struct test *first = suite->tests[t].test;
			size_t count = 1;
			while (t + count < suite->test_count && same_sweep(first, suite->tests[t + count].test))
				count++;
			if (first->sweep_count > 0 && count > 1) {
				struct sweep sweep = {.out = out,
				                      .suite = suite,
				                      .index = s,
				                      .first = t,
				                      .count = count,
				                      .base = first->base};
				(void)snprintf(sweep.id, sizeof sweep.id, "s%zu-%zu", s, t);
				if (!begun) {
					xml_open(out, "section");
					xml_element(out, "h2", NULL, "Sweeps");
				}
				begun = true;
				one_sweep(&sweep);
			}
			t += count;
		}
	}
	if (begun)
		xml_close(out);
}
