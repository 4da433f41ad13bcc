/* SPDX-License-Identifier: Apache-2.0 */
/* Lines, boxes, labels and the two axes of a chart. Ticks stand at 1, 2 and 5 times powers of ten.
 */
#include <math.h>
#include <stdio.h>
#include <string.h>

#include "chart.h"

void chart_line(struct xml_out *out, double x1, double y1, double x2, double y2, const char *stroke,
                const char *dash)
{
	xml_open(out, "line");
	xml_attrf(out, "x1", "%.1f", x1);
	xml_attrf(out, "y1", "%.1f", y1);
	xml_attrf(out, "x2", "%.1f", x2);
	xml_attrf(out, "y2", "%.1f", y2);
	xml_attr(out, "stroke", stroke);
	if (dash)
		xml_attr(out, "stroke-dasharray", dash);
	xml_close_void(out);
}

void chart_rectangle(struct xml_out *out, double x, double y, double width, double height,
                     const char *fill, const char *opacity)
{
	xml_open(out, "rect");
	xml_attrf(out, "x", "%.1f", x);
	xml_attrf(out, "y", "%.1f", y);
	xml_attrf(out, "width", "%.1f", width);
	xml_attrf(out, "height", "%.1f", height);
	xml_attr(out, "fill", fill);
	if (opacity)
		xml_attr(out, "fill-opacity", opacity);
	xml_close_void(out);
}

void chart_label(struct xml_out *out, double x, double y, const char *anchor, const char *fill,
                 const char *text)
{
	xml_open(out, "text");
	xml_attrf(out, "x", "%.1f", x);
	xml_attrf(out, "y", "%.1f", y);
	xml_attr(out, "text-anchor", anchor);
	xml_attr(out, "fill", fill);
	xml_text(out, text);
	xml_close(out);
}

/* About as wide as sans-serif letters of this size are; too wide does no harm. */
static double word_width(const char *text)
{
	return 6.6 * (double)text_columns(text, strlen(text));
}

void chart_place_label(struct chart_words *words, struct xml_out *out,
                       const struct chart_place *places, size_t count, const char *fill,
                       const char *text)
{
	double width = word_width(text);
	for (size_t i = 0; i < count; i++) {
		const struct chart_place *place = &places[i];
		double x1 = place->anchor[0] == 's'   ? place->x
		            : place->anchor[0] == 'e' ? place->x - width
		                                      : place->x - width / 2;
		double y1 = place->y - 10, x2 = x1 + width, y2 = place->y + 3;
		bool is_free = true;
		for (size_t w = 0; w < words->count; w++)
			is_free = is_free && (x2 <= words->boxes[w].x1 || x1 >= words->boxes[w].x2 ||
			                      y2 <= words->boxes[w].y1 || y1 >= words->boxes[w].y2);
		bool inside = x1 >= CHART_LEFT - 4 && x2 <= CHART_WIDTH;
		if (!(is_free && inside) && i + 1 < count)
			continue;
		if (words->count < sizeof words->boxes / sizeof words->boxes[0]) {
			words->boxes[words->count].x1 = x1;
			words->boxes[words->count].y1 = y1;
			words->boxes[words->count].x2 = x2;
			words->boxes[words->count++].y2 = y2;
		}
		chart_label(out, place->x, place->y, place->anchor, fill, text);
		return;
	}
}

void chart_begin(struct xml_out *out, const char *id, double height, const char *title)
{
	xml_open(out, "svg");
	xml_attr(out, "xmlns", "http://www.w3.org/2000/svg");
	xml_attr(out, "role", "img");
	xml_attrf(out, "aria-labelledby", "%s-title", id);
	xml_attrf(out, "viewBox", "0 0 %.0f %.0f", CHART_WIDTH, height);
	xml_attrf(out, "width", "%.0f", CHART_WIDTH);
	xml_attrf(out, "height", "%.0f", height);
	xml_attr(out, "font-family", "system-ui, sans-serif");
	xml_attr(out, "font-size", "11");
	xml_open(out, "title");
	xml_attrf(out, "id", "%s-title", id);
	xml_text(out, title);
	xml_close(out);
	chart_rectangle(out, 0, 0, CHART_WIDTH, height, "#fbfaf5", NULL);
}

void chart_hatching(struct xml_out *out, const char *id)
{
	xml_open(out, "pattern");
	xml_attrf(out, "id", "%s-out", id);
	xml_attr(out, "width", "7");
	xml_attr(out, "height", "7");
	xml_attr(out, "patternUnits", "userSpaceOnUse");
	xml_attr(out, "patternTransform", "rotate(45)");
	chart_rectangle(out, 0, 0, 7, 7, "#fbe4e0", NULL);
	chart_rectangle(out, 0, 0, 2, 7, "#d99a93", NULL);
	xml_close(out);
}

/* 1, 2 or 5 times a power of ten, so that at most `most` ticks fit into the span. */
static double tick_step(double span, int most)
{
	double raw = span / most, power = pow(10, floor(log10(raw)));
	double share = raw / power;
	return power * (share <= 1 ? 1 : share <= 2 ? 2 : share <= 5 ? 5 : 10);
}

static void tick_text(double value, double step, char *buffer, size_t size)
{
	double decimals = fmin(fmax(-floor(log10(step) + 1e-9), 0), 9);
	(void)snprintf(buffer, size, "%.*f", (int)decimals, fabs(value) < step * 1e-6 ? 0.0 : value);
}

void chart_y_axis(const struct chart *chart, const struct chart_scale *scale,
                  const struct channel_info *info)
{
	char text[80];
	if (info->name_count) {
		for (size_t i = 0; i < info->name_count && i < 24; i++) {
			double value = info->named_values[i];
			if (value < scale->low || value > scale->high)
				continue;
			chart_line(chart->out, scale->x0, chart_y(scale, value), scale->x1,
			           chart_y(scale, value), "#ddd8ca", NULL);
			(void)snprintf(text, sizeof text, "%.15s", info->value_names[i]);
			/* Long names get smaller letters, to stay in their margin. */
			xml_open(chart->out, "g");
			xml_attr(chart->out, "font-size", strlen(text) > 12 ? "9" : "11");
			chart_label(chart->out, scale->x0 - 6, chart_y(scale, value) + 4, "end", "#3a3833",
			            text);
			xml_close(chart->out);
		}
		return;
	}
	double step = tick_step(scale->high - scale->low, 5);
	double first = ceil(scale->low / step);
	for (int i = 0; i < TICKS_MOST; i++) {
		double value = (first + i) * step;
		if (value > scale->high)
			break;
		double y = chart_y(scale, value);
		chart_line(chart->out, scale->x0, y, scale->x1, y, "#ddd8ca", NULL);
		tick_text(value, step, text, sizeof text);
		chart_label(chart->out, scale->x0 - 6, y + 4, "end", "#3a3833", text);
	}
}

void chart_x_axis(const struct chart *chart, double bottom)
{
	char text[80];
	struct chart_scale scale = {.t0_ns = chart->t0_ns,
	                            .t1_ns = chart->t1_ns,
	                            .x0 = CHART_LEFT,
	                            .x1 = CHART_WIDTH - CHART_RIGHT};
	double begin = (double)chart->test->recorded->begin_ns;
	double low = ((double)chart->t0_ns - begin) * chart->t_factor;
	double high = ((double)chart->t1_ns - begin) * chart->t_factor;
	double step = tick_step(high - low, 8), first = ceil(low / step);
	for (int i = 0; i < TICKS_MOST; i++) {
		double value = (first + i) * step;
		if (value > high)
			break;
		double x = chart_x(&scale, value / chart->t_factor + begin);
		chart_line(chart->out, x, bottom, x, bottom + 4, "#3a3833", NULL);
		tick_text(value, step, text, sizeof text);
		chart_label(chart->out, x, bottom + 16, "middle", "#3a3833", text);
	}
	(void)snprintf(text, sizeof text, "time since the stimulus began, %s", chart->t_unit);
	chart_label(chart->out, (CHART_LEFT + CHART_WIDTH - CHART_RIGHT) / 2, bottom + 32, "middle",
	            "#3a3833", text);
}
