/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Curves for charts. A column of the picture keeps the first, the least, the
 * greatest and the last value that fall into it, in the order in which they
 * came: every extreme of the record is visible, whatever its length. Rejected:
 * every n-th sample (it loses the overshoot) and averaging (it flattens it).
 */
#include <math.h>

#include "chart.h"

struct point {
	double x, y;
	size_t row;
};

struct pen {
	struct xml_out *out;
	const char *stroke, *dash;
	struct text points;
	size_t count;
	struct point last;
};

static void pen_lift(struct pen *pen)
{
	if (pen->count == 1) {
		/* A value alone, between two gaps. */
		xml_open(pen->out, "circle");
		xml_attrf(pen->out, "cx", "%.1f", pen->last.x);
		xml_attrf(pen->out, "cy", "%.1f", pen->last.y);
		xml_attr(pen->out, "r", "1.5");
		xml_attr(pen->out, "fill", pen->stroke);
		xml_close_void(pen->out);
	} else if (pen->count > 1) {
		xml_open(pen->out, "polyline");
		xml_attr(pen->out, "fill", "none");
		xml_attr(pen->out, "stroke", pen->stroke);
		xml_attr(pen->out, "stroke-width", "1.4");
		xml_attr(pen->out, "stroke-linejoin", "round");
		if (pen->dash)
			xml_attr(pen->out, "stroke-dasharray", pen->dash);
		xml_attr(pen->out, "points", text_string(&pen->points));
		xml_close_void(pen->out);
	}
	text_clear(&pen->points);
	pen->count = 0;
}

static void pen_to(struct pen *pen, double x, double y)
{
	if (pen->points.length > XML_TEXT_MOST - 100) {
		struct point last = pen->last;
		pen_lift(pen);
		pen_to(pen, last.x, last.y);
	}
	text_printf(&pen->points, "%s%.1f,%.1f", pen->count ? " " : "", x, y);
	pen->last = (struct point){.x = x, .y = y};
	pen->count++;
}

/* What has been seen of the present column. */
struct column {
	int number;
	bool used;
	struct point first, least, greatest, last;
};

static void column_out(struct pen *pen, struct column *column)
{
	if (!column->used)
		return;
	/* y grows downwards, but which of the two is greater does not matter for drawing them. */
	struct point a = column->least, b = column->greatest;
	if (a.row > b.row) {
		struct point swap = a;
		a = b;
		b = swap;
	}
	pen_to(pen, column->first.x, column->first.y);
	if (a.row != column->first.row && a.row != column->last.row)
		pen_to(pen, a.x, a.y);
	if (b.row != column->first.row && b.row != column->last.row && b.row != a.row)
		pen_to(pen, b.x, b.y);
	if (column->last.row != column->first.row)
		pen_to(pen, column->last.x, column->last.y);
	column->used = false;
}

static void column_add(struct column *column, struct point point)
{
	if (!column->used)
		column->first = column->least = column->greatest = point;
	column->used = true;
	column->last = point;
	if (point.y < column->least.y)
		column->least = point;
	if (point.y > column->greatest.y)
		column->greatest = point;
}

void chart_curve(struct xml_out *out, const struct series *series, const struct chart_scale *scale,
                 int columns, int64_t gap_ns)
{
	struct pen pen = {.out = out, .stroke = "#1f4e6b"};
	struct column column = {0};
	double wraps = series->channel->wraps, last_value = (double)NAN;
	/* A code does not pass through the codes between: it holds until the next sample. */
	bool stepped = series->channel->name_count > 0;
	int64_t last_ns = 0;
	text_init(&pen.points, 0);
	for (size_t row = series_first_at(series, scale->t0_ns); row < series->rows; row++) {
		int64_t sent = series_sent(series, row), received = series_received(series, row);
		int64_t t = sent + (received - sent) / 2;
		double value = series_value(series, row);
		if (t > scale->t1_ns)
			break;
		if (t < scale->t0_ns)
			continue;
		bool joined = isfinite(value) && isfinite(last_value) &&
		              !(gap_ns > 0 && t - last_ns > gap_ns) &&
		              !(wraps > 0 && fabs(value - last_value) > wraps / 2);
		int number =
		    (int)((double)(t - scale->t0_ns) * columns / (double)(scale->t1_ns - scale->t0_ns));
		if (!joined || number != column.number)
			column_out(&pen, &column);
		if (!joined)
			pen_lift(&pen);
		if (joined && stepped && value != last_value) {
			column_out(&pen, &column);
			pen_to(&pen, chart_x(scale, (double)t), chart_y(scale, last_value));
		}
		last_value = value;
		last_ns = t;
		if (!isfinite(value))
			continue;
		column.number = number;
		column_add(&column, (struct point){chart_x(scale, (double)t), chart_y(scale, value), row});
	}
	column_out(&pen, &column);
	pen_lift(&pen);
	text_release(&pen.points);
}

void chart_commands(struct xml_out *out, const struct command *commands, size_t count, int channel,
                    double factor, const struct chart_scale *scale)
{
	struct pen pen = {.out = out, .stroke = "#b3681d", .dash = "6 3"};
	bool begun = false;
	double y = 0, drawn_x = 0;
	text_init(&pen.points, 0);
	for (size_t i = 0; i < count; i++) {
		if (commands[i].channel != channel || commands[i].earliest_ns > scale->t1_ns)
			continue;
		double t = (double)commands[i].earliest_ns +
		           (double)(commands[i].latest_ns - commands[i].earliest_ns) / 2;
		double x = chart_x(scale, fmax(t, (double)scale->t0_ns));
		double next = chart_y(scale, commands[i].value * factor);
		if (!begun) {
			pen_to(&pen, x, next);
		} else if (x - drawn_x >= 0.5 || next != y) {
			pen_to(&pen, x, y);
			pen_to(&pen, x, next);
		}
		begun = true;
		drawn_x = x;
		y = next;
	}
	if (begun)
		pen_to(&pen, scale->x1, y);
	pen_lift(&pen);
	text_release(&pen.points);
}
