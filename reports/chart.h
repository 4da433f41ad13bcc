/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_CHART_H
#define DRIVETRIAL_CHART_H
/*
 * One check as a picture: inline SVG with presentation attributes only, on a
 * light panel of its own, so that it looks the same in dark mode, in print and
 * without the stylesheet. Lines differ by dash and by label, not by hue alone.
 * Private to this folder.
 */
#include "judge.h"
#include "xml_out.h"

enum { CHART_COLUMNS_LEAST = 60, CHART_COLUMNS_MOST = 640 };

/* Whether there is something to draw: a channel of the check that was sampled. */
bool chart_possible(const struct rig *rig, const struct test_result *test,
                    const struct check_result *check);
/*
 * Writes <figure>...</figure>. id: unique in the page. columns: how finely a
 * curve is drawn; each column keeps its least and greatest value.
 */
void chart_write(struct xml_out *out, const struct rig *rig, const struct test_result *test,
                 const struct check_result *check, const char *id, int columns);

/* ---- shared by chart.c and chart_axes.c ------------------------------------- */

enum { PANELS_MOST = 3, POINTS_MOST = 12, TICKS_MOST = 12 };

/* Sizes in the units of the viewBox. */
#define CHART_WIDTH 760.0
#define CHART_LEFT  96.0
#define CHART_RIGHT 22.0

/* Where words stand already, so that the next ones find a free place. */
struct chart_words {
	struct {
		double x1, y1, x2, y2;
	} boxes[80];
	size_t count;
};

struct chart {
	struct chart_words *words;
	struct xml_out *out;
	const struct rig *rig;
	const struct test_result *test;
	const struct check_result *check;
	const char *id;
	int columns;
	int channels[PANELS_MOST];
	size_t panel_count;
	bool primary; /* the first channel is the field "channel": points' levels are on its axis */
	int64_t t0_ns, t1_ns;
	double t_factor; /* from ns to what the axis shows */
	const char *t_unit;
};

struct chart_scale {
	int64_t t0_ns, t1_ns;
	double x0, x1; /* of t0, t1 */
	double low, high;
	double y_low, y_high; /* of low, high; y grows downwards */
};

static inline double chart_x(const struct chart_scale *scale, double t_ns)
{
	return scale->x0 + (t_ns - (double)scale->t0_ns) * (scale->x1 - scale->x0) /
	                       (double)(scale->t1_ns - scale->t0_ns);
}

static inline double chart_y(const struct chart_scale *scale, double value)
{
	return scale->y_low +
	       (value - scale->low) * (scale->y_high - scale->y_low) / (scale->high - scale->low);
}

/* ---- chart_axes.c: primitives and axes ---------------------------------------- */

void chart_line(struct xml_out *out, double x1, double y1, double x2, double y2, const char *stroke,
                const char *dash);
void chart_rectangle(struct xml_out *out, double x, double y, double width, double height,
                     const char *fill, const char *opacity);
void chart_label(struct xml_out *out, double x, double y, const char *anchor, const char *fill,
                 const char *text);
/*
 * A label at the first of `count` places that is free, the last one where none
 * is. x and y as of chart_label(), anchors "start", "middle" or "end".
 */
struct chart_place {
	double x, y;
	const char *anchor;
};
void chart_place_label(struct chart_words *words, struct xml_out *out,
                       const struct chart_place *places, size_t count, const char *fill,
                       const char *text);
void chart_y_axis(const struct chart *chart, const struct chart_scale *scale,
                  const struct channel_info *info);
void chart_x_axis(const struct chart *chart, double bottom);

/* A drawing of that height: its root element, title and panel. `id` is unique in the page. */
void chart_begin(struct xml_out *out, const char *id, double height, const char *title);
/* A hatching that can be named as "url(#ID-out)": what lies outside a limit. */
void chart_hatching(struct xml_out *out, const char *id);

/* ---- chart_step.c: what a step response has besides ------------------------- */

/* The levels of a step, from where its metrics lie. */
struct chart_step {
	double final, hundred, band; /* band: half its width, same unit; 0: not known */
	double sign;                 /* +1: upwards */
	double overshoot_most;       /* level of the limit; NaN: none */
};
bool chart_step_find(const struct check_result *check, struct chart_step *ret_step);

/* ---- chart_polar.c: angles round the rotor ---------------------------------- */

bool chart_polar_possible(const struct chart *chart);
void chart_polar(const struct chart *chart);

/* ---- chart_events.c: what happened when, one line each ---------------------- */

/* How many lines; 0: this check has no use for them. */
size_t chart_event_count(const struct chart *chart);
enum { EVENT_HEIGHT = 19 };
/* From `top` downwards, over the time axis of the chart; bottom: where the panels end. */
void chart_events(const struct chart *chart, double top, double bottom);

/* ---- chart_curve.c: one polyline after another ---------------------------- */

/* gap_ns: neighbours further apart are not joined; 0: all are. */
void chart_curve(struct xml_out *out, const struct series *series, const struct chart_scale *scale,
                 int columns, int64_t gap_ns);
/* A command holds its value until the next one of the same channel. factor: to the panel's unit. */
void chart_commands(struct xml_out *out, const struct command *commands, size_t count, int channel,
                    double factor, const struct chart_scale *scale);

#endif
