/* SPDX-License-Identifier: Apache-2.0 */
/*
 * A comparison as a page: what got worse first, then what changed, then the
 * rest, each metric with a small plot of its values, their intervals and its
 * limits. Same rules as report.html: no script, no inline style.
 */
#include <fcntl.h>
#include <string.h>
#include <unistd.h>

#include "chart.h"
#include "comparison.h"
#include "report_html.h"
#include "xml_out.h"

static const double PLOT_WIDTH = 150, PLOT_HEIGHT = 46;

static void take(double value, double *low, double *high)
{
	if (!isfinite(value))
		return;
	*low = fmin(*low, value);
	*high = fmax(*high, value);
}

/* Whether a limit is so far from the values that it would flatten the plot. */
static bool is_near(double limit, double low, double high)
{
	double span = fmax(high - low, 1e-12 + fabs(high) * 1e-6);
	return isfinite(limit) && limit > low - 3 * span && limit < high + 3 * span;
}

static void plot(struct xml_out *out, const struct comparison *all,
                 const struct compared_metric *metric)
{
	double low = (double)INFINITY, high = -(double)INFINITY;
	const struct compared_value *last = &metric->values[all->run_count - 1];
	for (size_t r = 0; r < all->run_count; r++)
		if (metric->values[r].there && isfinite(metric->values[r].value)) {
			take(metric->values[r].value, &low, &high);
			take(metric->values[r].low, &low, &high);
			take(metric->values[r].high, &low, &high);
		}
	if (!isfinite(low))
		return;
	double lines[2] = {last->there ? last->min : (double)NAN,
	                   last->there ? last->max : (double)NAN};
	double values_low = low, values_high = high;
	for (int i = 0; i < 2; i++)
		if (is_near(lines[i], values_low, values_high))
			take(lines[i], &low, &high);
		else
			lines[i] = (double)NAN;
	double air = fmax((high - low) * 0.12, fabs(high) * 1e-9 + 1e-12);
	struct chart_scale scale = {
	    .low = low - air, .high = high + air, .y_low = PLOT_HEIGHT - 2, .y_high = 2};
	xml_open(out, "svg");
	xml_attr(out, "xmlns", "http://www.w3.org/2000/svg");
	xml_attr(out, "role", "img");
	xml_attrf(out, "aria-label", "%s of %s, run by run", metric->name, metric->test);
	xml_attrf(out, "viewBox", "0 0 %.0f %.0f", PLOT_WIDTH, PLOT_HEIGHT);
	xml_attrf(out, "width", "%.0f", PLOT_WIDTH);
	xml_attrf(out, "height", "%.0f", PLOT_HEIGHT);
	chart_rectangle(out, 0, 0, PLOT_WIDTH, PLOT_HEIGHT, "#fbfaf5", NULL);
	for (int i = 0; i < 2; i++)
		if (!isnan(lines[i]))
			chart_line(out, 0, chart_y(&scale, lines[i]), PLOT_WIDTH, chart_y(&scale, lines[i]),
			           "#9b2335", "2 3");
	double x_last = 0, y_last = (double)NAN;
	for (size_t r = 0; r < all->run_count; r++) {
		const struct compared_value *value = &metric->values[r];
		double x = 14 + (PLOT_WIDTH - 28) * (double)r / (double)(all->run_count - 1);
		if (!value->there || !isfinite(value->value)) {
			y_last = (double)NAN;
			continue;
		}
		double y = chart_y(&scale, value->value);
		if (!isnan(y_last))
			chart_line(out, x_last, y_last, x, y, "#1f4e6b", NULL);
		if (isfinite(value->low) && isfinite(value->high)) {
			double y1 = chart_y(&scale, value->low), y2 = chart_y(&scale, value->high);
			chart_line(out, x, y1, x, y2, "#111111", NULL);
			chart_line(out, x - 3, y1, x + 3, y1, "#111111", NULL);
			chart_line(out, x - 3, y2, x + 3, y2, "#111111", NULL);
		}
		chart_rectangle(out, x - 2.5, y - 2.5, 5, 5, "#1f4e6b", NULL);
		x_last = x;
		y_last = y;
	}
	xml_close(out);
}

static void cell(struct xml_out *out, double value, double uncertainty, const char *note)
{
	char text[64];
	if (isnan(value))
		xml_elementf(out, "td", "number", "%s", note);
	else
		xml_element(out, "td", "number",
		            number_text(value, isfinite(uncertainty) ? uncertainty : 0, text, sizeof text));
}

static void metric_row(struct xml_out *out, const struct comparison *all,
                       const struct compared_metric *metric)
{
	size_t last = all->run_count - 1;
	xml_open(out, "tr");
	xml_open(out, "th");
	xml_attr(out, "scope", "row");
	html_name(out, metric->test);
	xml_textf(out, " %s of %s", metric->name, metric->check);
	xml_close(out);
	for (size_t r = 0; r <= last; r++) {
		const struct compared_value *value = &metric->values[r];
		if (r > 0 && r < last)
			continue; /* the plot has them */
		cell(out, value->there ? value->value : (double)NAN,
		     fmax(value->high - value->value, value->value - value->low),
		     value->there ? "unknown" : "not there");
	}
	cell(out, metric->change, metric->uncertainty, "");
	cell(out, metric->uncertainty, metric->uncertainty, "");
	xml_element(out, "td", NULL, strcmp(metric->unit, "1") == 0 ? "" : metric->unit);
	xml_open(out, "td");
	if (!isnan(metric->margin_before) && !isnan(metric->margin_after))
		xml_textf(out, "%.3g to %.3g", metric->margin_before, metric->margin_after);
	if (isfinite(metric->lost) && metric->significant && metric->lost != 0)
		xml_textf(out, " (%.0f %% %s)", 100 * fabs(metric->lost),
		          metric->lost > 0 ? "lost" : "gained");
	xml_close(out);
	xml_open(out, "td");
	xml_attr(out, "class", "word");
	xml_text(out, metric->worse ? "worse" : metric->significant ? "changed" : "not significant");
	if (metric->flipped)
		xml_textf(out, "; %s to %s", metric->values[0].verdict, metric->values[last].verdict);
	if (metric->limit_changed)
		xml_text(out, "; limit changed");
	if (metric->trend)
		xml_textf(out, "; trend %.3g a run", metric->slope);
	xml_close(out);
	xml_open(out, "td");
	plot(out, all, metric);
	xml_close(out);
	xml_close(out);
}

/* 0: worse, 1: changed or flipped, 2: the rest. */
static int class_of(const struct compared_metric *metric)
{
	return metric->worse                                                                      ? 0
	       : metric->significant || metric->flipped || metric->trend || metric->limit_changed ? 1
	                                                                                          : 2;
}

static void metric_table(struct xml_out *out, const struct comparison *all, int class,
                         const char *title)
{
	static const char *const heads[] = {"Metric", "Old",    "New",     "Change", "Uncertainty",
	                                    "Unit",   "Margin", "Finding", "Values"};
	bool begun = false;
	for (size_t i = 0; i < all->metric_count; i++) {
		if (class_of(&all->metrics[i]) != class)
			continue;
		if (!begun) {
			xml_element(out, "h2", NULL, title);
			xml_open(out, "table");
			xml_open(out, "thead");
			xml_open(out, "tr");
			for (size_t h = 0; h < sizeof heads / sizeof *heads; h++) {
				xml_open(out, "th");
				xml_attr(out, "scope", "col");
				if (h > 0 && h < 5)
					xml_attr(out, "class", "number");
				xml_text(out, heads[h]);
				xml_close(out);
			}
			xml_close(out);
			xml_close(out);
			xml_open(out, "tbody");
		}
		begun = true;
		metric_row(out, all, &all->metrics[i]);
	}
	if (begun) {
		xml_close(out);
		xml_close(out);
	}
}

static void flips(struct xml_out *out, const struct comparison *all)
{
	size_t last = all->run_count - 1;
	bool begun = false;
	for (size_t i = 0; i < all->test_count; i++) {
		const struct compared_test *test = &all->tests[i];
		const char *old = test->verdicts[0], *new = test->verdicts[last];
		if (old && new && !test->flipped)
			continue;
		if (!begun) {
			xml_element(out, "h2", NULL, "Verdicts of tests that differ");
			xml_open(out, "ul");
		}
		begun = true;
		xml_open(out, "li");
		html_name(out, test->test);
		xml_textf(out, ": %s to %s%s", old ? old : "not there", new ? new : "not there",
		          test->worse ? " (worse)" : "");
		xml_close(out);
	}
	if (begun)
		xml_close(out);
}

static void runs(struct xml_out *out, const struct comparison *all)
{
	xml_open(out, "dl");
	for (size_t r = 0; r < all->run_count; r++) {
		const struct compared_run *run = &all->runs[r];
		xml_element(out, "dt", NULL, r == 0 ? "Old" : r + 1 == all->run_count ? "New" : "Between");
		xml_elementf(out, "dd", NULL,
		             "%.300s: rig %.100s, begun %.40s UTC, %.300s, verdict %.20s%s%s", run->path,
		             run->rig, run->started, run->identities, run->verdict,
		             run->partial ? ", partial" : "", run->rehearsal ? ", rehearsed" : "");
	}
	xml_close(out);
}

static void body(struct xml_out *out, const struct comparison *all)
{
	xml_open(out, "header");
	xml_open(out, "h1");
	xml_attr(out, "class", all->worse ? "fail" : "pass");
	xml_text(out, all->worse ? "Comparison: worse" : "Comparison: nothing got worse");
	xml_close(out);
	xml_elementf(
	    out, "p", "counts",
	    "%zu metrics: %zu changed significantly, %zu verdicts flipped, %zu in one run only.",
	    all->metric_count, all->significant, all->flips, all->missing);
	xml_close(out);
	xml_open(out, "main");
	runs(out, all);
	xml_elementf(out, "p", "note",
	             "A change is significant where it is larger than the uncertainties of both values "
	             "combined. Worse: significantly nearer to the limit or beyond it, by more than "
	             "%.4g %% of the margin that there was. In the plots: values with their intervals, "
	             "run by run; dotted: a limit that is near.",
	             100 * all->share);
	flips(out, all);
	metric_table(out, all, 0, "What got worse");
	metric_table(out, all, 1, "What else changed");
	metric_table(out, all, 2, "What did not change significantly");
	xml_close(out);
}

int comparison_html(const struct comparison *comparison, const struct run_folder *folder,
                    const char *name, struct err *reterr)
{
	struct xml_out out;
	if (xml_out_init(&out, reterr) < 0)
		return -1;
	html_begin(&out);
	html_head(&out, comparison->worse ? "Comparison: worse" : "Comparison: nothing got worse");
	xml_open(&out, "body");
	body(&out, comparison);
	xml_close(&out);
	xml_close(&out);
	/* One that is there already may belong to a report: it is left as it is. */
	if (faccessat(folder->fd, "report.css", F_OK, AT_SYMLINK_NOFOLLOW) != 0 &&
	    run_folder_write(folder, "report.css", report_css, report_css_length, reterr) < 0) {
		xml_out_release(&out);
		return -1;
	}
	return xml_out_write(&out, folder, name, reterr);
}
