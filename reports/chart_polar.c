/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Electrical angles of a check, over the window that it judged: once round the
 * rotor, where a wrong quadrant shows, and once unrolled about the target,
 * where degrees show. The first angle is filled, a second one is outlined;
 * both are named. Angles grow counter-clockwise from the d axis, as in the
 * README's conventions.
 */
#include <math.h>
#include <string.h>

#include "chart.h"

#define PI 3.14159265358979323846
static const double MIDDLE_X = 140, MIDDLE_Y = 118, RADIUS = 84, STRIP_X0 = 330, STRIP_X1 = 730;
static const double POLAR_HEIGHT = 238;
enum { ANGLES_MOST = 2, BINS = 360 };

struct seen_angle {
	const struct channel_info *info;
	double mean, spread;      /* deg */
	double least, most;       /* deg, from the mean */
	unsigned char bins[BINS]; /* of the whole turn: whether a sample lies there */
	size_t count;
};

struct polar {
	const struct chart *chart;
	struct seen_angle angles[ANGLES_MOST];
	size_t count;
	double target;                       /* deg; NaN: none */
	double low, high;                    /* limits about the target, deg; infinite: none */
	double error, error_low, error_high; /* of the metric that the limits are of */
	const char *name;
	double span; /* of the strip, deg to either side */
};

static double wrapped(double deg)
{
	return remainder(deg, 360);
}

static bool span_of(const struct chart *chart, int64_t *ret_from, int64_t *ret_to)
{
	for (size_t m = 0; m < chart->check->metric_count; m++) {
		const struct metric *metric = &chart->check->metrics[m].metric;
		if (metric->kind->shape == METRIC_ANGLE_ELEC && metric->point_count > 0 &&
		    metric->points[0].latest_ns > metric->points[0].earliest_ns) {
			*ret_from = metric->points[0].earliest_ns;
			*ret_to = metric->points[0].latest_ns;
			return true;
		}
	}
	return false;
}

static bool is_angle(const struct channel_info *info)
{
	return info->unit != unit_one() && info->unit->dimension.sort != SORT_MECHANICAL &&
	       dimension_agrees(info->unit->dimension, DIM_ANGLE_ELEC);
}

bool chart_polar_possible(const struct chart *chart)
{
	int64_t from, to;
	bool any = false;
	for (size_t i = 0; i < chart->panel_count; i++)
		any |= is_angle(&chart->rig->infos[chart->channels[i]]);
	return any && span_of(chart, &from, &to);
}

/* Circular mean and standard deviation sqrt(-2 ln R), as of Mardia and Jupp, 2.3. */
static void look(const struct chart *chart, int channel, int64_t from, int64_t to,
                 struct seen_angle *angle)
{
	const struct series *series = &chart->test->series[channel];
	double scale = series->channel->unit->scale, sum_x = 0, sum_y = 0;
	*angle = (struct seen_angle){.info = series->channel};
	for (int pass = 0; pass < 2; pass++) {
		for (size_t row = series_first_at(series, from); row < series->rows; row++) {
			double value = series_value(series, row) * scale;
			if (series_sent(series, row) > to)
				break;
			if (!isfinite(value))
				continue;
			if (pass == 0) {
				sum_x += cos(value);
				sum_y += sin(value);
				angle->count++;
				angle->bins[(int)floor(fmod(fmod(value * 180 / PI, 360) + 360, 360)) % BINS] = 1;
			} else {
				double deviation = wrapped(value * 180 / PI - angle->mean);
				angle->least = fmin(angle->least, deviation);
				angle->most = fmax(angle->most, deviation);
			}
		}
		if (angle->count == 0)
			return;
		double length = hypot(sum_x, sum_y) / (double)angle->count;
		angle->mean = atan2(sum_y, sum_x) * 180 / PI;
		angle->spread = length < 1 ? sqrt(-2 * log(length)) * 180 / PI : 0;
	}
}

static const struct metric_result *find(const struct chart *chart, const char *name)
{
	for (size_t m = 0; m < chart->check->metric_count; m++)
		if (strcmp(chart->check->metrics[m].metric.kind->name, name) == 0 &&
		    isfinite(chart->check->metrics[m].metric.value))
			return &chart->check->metrics[m];
	return NULL;
}

/* The target: of torque_angle what the mean is compared with, of alignment the bench's angle. */
static void find_target(struct polar *polar)
{
	const struct metric_result *error = find(polar->chart, "mean_error"),
	                           *offset = find(polar->chart, "frame_offset"),
	                           *of = error ? error : offset;
	polar->target = (double)NAN;
	polar->low = -(double)INFINITY;
	polar->high = (double)INFINITY;
	if (!of)
		return;
	polar->name = of->metric.kind->name;
	polar->error = of->metric.value;
	polar->error_low = of->metric.low;
	polar->error_high = of->metric.high;
	polar->target = wrapped(polar->angles[0].mean - of->metric.value);
	for (size_t l = 0; l < of->limit_count; l++) {
		polar->low = fmax(polar->low, of->limits[l].limit->min);
		polar->high = fmin(polar->high, of->limits[l].limit->max);
	}
}

static void find_span(struct polar *polar)
{
	double span = 1;
	double centre = isnan(polar->target) ? polar->angles[0].mean : polar->target;
	for (size_t i = 0; i < polar->count; i++) {
		double at = wrapped(polar->angles[i].mean - centre);
		span =
		    fmax(span, fmax(fabs(at + polar->angles[i].least), fabs(at + polar->angles[i].most)));
	}
	if (isfinite(polar->low))
		span = fmax(span, fabs(polar->low));
	if (isfinite(polar->high))
		span = fmax(span, fabs(polar->high));
	if (isfinite(polar->error_low) && isfinite(polar->error_high))
		span = fmax(span, fmax(fabs(polar->error_low), fabs(polar->error_high)));
	polar->span = fmin(span * 1.15, 180);
}

/* ---- round ------------------------------------------------------------------ */

static double round_x(double radius, double deg)
{
	return MIDDLE_X + radius * cos(deg * PI / 180);
}

static double round_y(double radius, double deg)
{
	return MIDDLE_Y - radius * sin(deg * PI / 180);
}

static void sector(struct xml_out *out, double radius, double from, double to, const char *fill,
                   const char *opacity)
{
	xml_open(out, "path");
	xml_attrf(out, "d", "M%.1f,%.1f L%.1f,%.1f A%.1f,%.1f 0 %d 0 %.1f,%.1f Z", MIDDLE_X, MIDDLE_Y,
	          round_x(radius, from), round_y(radius, from), radius, radius, to - from > 180,
	          round_x(radius, to), round_y(radius, to));
	xml_attr(out, "fill", fill);
	xml_attr(out, "fill-opacity", opacity);
	xml_close_void(out);
}

static void thick_line(struct xml_out *out, double x1, double y1, double x2, double y2,
                       const char *width, const char *dash)
{
	xml_open(out, "line");
	xml_attrf(out, "x1", "%.1f", x1);
	xml_attrf(out, "y1", "%.1f", y1);
	xml_attrf(out, "x2", "%.1f", x2);
	xml_attrf(out, "y2", "%.1f", y2);
	xml_attr(out, "stroke", "#1f4e6b");
	xml_attr(out, "stroke-width", width);
	if (dash)
		xml_attr(out, "stroke-dasharray", dash);
	xml_close_void(out);
}

static void ring(const struct polar *polar)
{
	struct xml_out *out = polar->chart->out;
	static const char *const names[] = {"0\xC2\xB0 (d axis)", "90\xC2\xB0 (q axis)", "180\xC2\xB0",
	                                    "-90\xC2\xB0"};
	xml_open(out, "circle");
	xml_attrf(out, "cx", "%.1f", MIDDLE_X);
	xml_attrf(out, "cy", "%.1f", MIDDLE_Y);
	xml_attrf(out, "r", "%.1f", RADIUS);
	xml_attr(out, "fill", "#ffffff");
	xml_attr(out, "stroke", "#3a3833");
	xml_close_void(out);
	for (int i = 0; i < 12; i++)
		chart_line(out, round_x(i % 3 ? RADIUS - 6 : 0, i * 30),
		           round_y(i % 3 ? RADIUS - 6 : 0, i * 30), round_x(RADIUS, i * 30),
		           round_y(RADIUS, i * 30), i % 3 ? "#3a3833" : "#ddd8ca", NULL);
	chart_label(out, MIDDLE_X + RADIUS + 6, MIDDLE_Y + 4, "start", "#3a3833", names[0]);
	chart_label(out, MIDDLE_X, MIDDLE_Y - RADIUS - 8, "middle", "#3a3833", names[1]);
	chart_label(out, MIDDLE_X - RADIUS - 6, MIDDLE_Y + 4, "end", "#3a3833", names[2]);
	chart_label(out, MIDDLE_X, MIDDLE_Y + RADIUS + 17, "middle", "#3a3833", names[3]);
	if (!isnan(polar->target) && isfinite(polar->low) && isfinite(polar->high))
		sector(out, RADIUS, polar->target + polar->low, polar->target + polar->high, "#6f9aa8",
		       "0.35");
	if (!isnan(polar->target))
		chart_line(out, MIDDLE_X, MIDDLE_Y, round_x(RADIUS, polar->target),
		           round_y(RADIUS, polar->target), "#3a3833", "2 3");
	for (size_t i = 0; i < polar->count; i++) {
		const struct seen_angle *angle = &polar->angles[i];
		double radius = RADIUS - 12 - 14 * (double)i;
		for (int bin = 0; bin < BINS; bin++)
			if (angle->bins[bin])
				thick_line(out, round_x(radius, bin + 0.5), round_y(radius, bin + 0.5),
				           round_x(radius + 7, bin + 0.5), round_y(radius + 7, bin + 0.5), "1.5",
				           NULL);
		thick_line(out, MIDDLE_X, MIDDLE_Y, round_x(radius, angle->mean),
		           round_y(radius, angle->mean), "2.5", i ? "5 3" : NULL);
	}
}

/* ---- unrolled --------------------------------------------------------------- */

static double strip_x(const struct polar *polar, double deviation)
{
	double x = (STRIP_X0 + STRIP_X1) / 2 + deviation / polar->span * (STRIP_X1 - STRIP_X0) / 2;
	return fmin(fmax(x, STRIP_X0), STRIP_X1);
}

static void strip_limits(const struct polar *polar, double top, double bottom)
{
	struct xml_out *out = polar->chart->out;
	char fill[112], text[64];
	const double bounds[2] = {polar->low, polar->high};
	(void)snprintf(fill, sizeof fill, "url(#%s-round-out)", polar->chart->id);
	for (int i = 0; i < 2; i++) {
		if (!isfinite(bounds[i]))
			continue;
		double x = strip_x(polar, bounds[i]), edge = i ? STRIP_X1 : STRIP_X0;
		chart_rectangle(out, fmin(x, edge), top, fabs(edge - x), bottom - top, fill, "0.6");
		chart_line(out, x, top, x, bottom, "#9b2335", "2 3");
		(void)snprintf(text, sizeof text, "%s %.4g\xC2\xB0", i ? "at most" : "at least", bounds[i]);
		chart_label(out, x, top - 5, "middle", "#9b2335", text);
	}
}

static void strip_row(const struct polar *polar, size_t index, double y)
{
	struct xml_out *out = polar->chart->out;
	const struct seen_angle *angle = &polar->angles[index];
	double centre = isnan(polar->target) ? polar->angles[0].mean : polar->target;
	double at = wrapped(angle->mean - centre);
	char text[240];
	(void)snprintf(text, sizeof text,
	               "%.60s (%s): mean %.2f\xC2\xB0, spread %.2f\xC2\xB0, %zu samples",
	               angle->info->name,
	               angle->info->evidence == EVIDENCE_INDEPENDENT ? "independent" : "self-reported",
	               angle->mean, angle->spread, angle->count);
	chart_rectangle(out, STRIP_X0 + 2, y - 25,
	                fmin(6.1 * (double)strlen(text), STRIP_X1 - STRIP_X0 - 4), 15, "#fbfaf5",
	                "0.9");
	chart_label(out, STRIP_X0 + 5, y - 14, "start", "#1f4e6b", text);
	chart_line(out, strip_x(polar, at + angle->least), y, strip_x(polar, at + angle->most), y,
	           "#1f4e6b", NULL);
	chart_rectangle(out, strip_x(polar, at - angle->spread), y - 4,
	                strip_x(polar, at + angle->spread) - strip_x(polar, at - angle->spread), 8,
	                "#1f4e6b", index ? "0.15" : "0.35");
	thick_line(out, strip_x(polar, at), y - 8, strip_x(polar, at), y + 8, "2.5", NULL);
	if (index == 0 && isfinite(polar->error_low) && isfinite(polar->error_high)) {
		double x1 = strip_x(polar, polar->error_low), x2 = strip_x(polar, polar->error_high);
		chart_line(out, x1, y + 12, x2, y + 12, "#111111", NULL);
		chart_line(out, x1, y + 8, x1, y + 16, "#111111", NULL);
		chart_line(out, x2, y + 8, x2, y + 16, "#111111", NULL);
	}
}

static void strip(const struct polar *polar)
{
	struct xml_out *out = polar->chart->out;
	const double top = 34, bottom = POLAR_HEIGHT - 48;
	char text[160];
	chart_rectangle(out, STRIP_X0, top, STRIP_X1 - STRIP_X0, bottom - top, "#ffffff", NULL);
	strip_limits(polar, top, bottom);
	double raw = polar->span / 3, power = pow(10, floor(log10(raw)));
	double step = power * (raw / power > 5 ? 5 : raw / power > 2 ? 2 : 1);
	for (int i = -12; i <= 12; i++) {
		double value = i * step;
		if (fabs(value) > polar->span)
			continue;
		chart_line(out, strip_x(polar, value), bottom, strip_x(polar, value), bottom + 4, "#3a3833",
		           NULL);
		(void)snprintf(text, sizeof text, "%.6g", value);
		chart_label(out, strip_x(polar, value), bottom + 16, "middle", "#3a3833", text);
	}
	chart_line(out, strip_x(polar, 0), top, strip_x(polar, 0), bottom, "#3a3833", "2 3");
	chart_line(out, STRIP_X0, bottom, STRIP_X1, bottom, "#3a3833", NULL);
	for (size_t i = 0; i < polar->count; i++)
		strip_row(polar, i, top + 40 + 66 * (double)i);
	double centre = isnan(polar->target) ? polar->angles[0].mean : polar->target;
	(void)snprintf(text, sizeof text, "deg from %s, %.2f\xC2\xB0",
	               isnan(polar->target) ? "the mean"
	               : polar->name && strcmp(polar->name, "frame_offset") == 0
	                   ? "the angle of the bench"
	                   : "the target",
	               centre);
	chart_label(out, (STRIP_X0 + STRIP_X1) / 2, bottom + 34, "middle", "#3a3833", text);
}

void chart_polar(const struct chart *chart)
{
	struct polar polar = {
	    .chart = chart, .error_low = -(double)INFINITY, .error_high = (double)INFINITY};
	int64_t from, to;
	char id[112], title[240];
	if (!span_of(chart, &from, &to))
		return;
	for (size_t i = 0; i < chart->panel_count && polar.count < ANGLES_MOST; i++) {
		if (!is_angle(&chart->rig->infos[chart->channels[i]]))
			continue;
		look(chart, chart->channels[i], from, to, &polar.angles[polar.count]);
		polar.count += polar.angles[polar.count].count > 0;
	}
	if (polar.count == 0)
		return;
	find_target(&polar);
	find_span(&polar);
	(void)snprintf(id, sizeof id, "%.80s-round", chart->id);
	(void)snprintf(title, sizeof title, "%.60s of test %.120s: the angle round the rotor",
	               chart->check->use->name, chart->test->test->name);
	chart_begin(chart->out, id, POLAR_HEIGHT, title);
	chart_hatching(chart->out, id);
	ring(&polar);
	strip(&polar);
	xml_close(chart->out);
}
