/* SPDX-License-Identifier: Apache-2.0 */
/*
 * One function a kind of metric, in a table by check and metric. Each states
 * the widths that its check makes, from what the rig file says:
 *
 *   h  from sample to sample    w  from the begin to the end of a row: the
 *                                  transaction, refresh, and span of delay
 *   m  width of the mark        a  limits of error     q  step of the coding
 *
 * A guaranteed interval of an event reaches from the begin of the row before
 * to the end of the row after, so its width is h + w + m; by how much it is
 * too late alone hangs on where the samples fall.
 *
 * Running the checks on invented samples was rejected: the samples would have
 * to be invented, and what they show would be taken for a property of the
 * bench.
 */
#include "plan_forecast.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include "window.h"

#define PI 3.14159265358979323846

/* ---- what the tables of a check hold ------------------------------------------------ */

static const void *field_at(const struct check_use *use, const char *key)
{
	const struct field *field = field_find(use->kind->fields, key, strlen(key));
	for (size_t m = 0; !field && m < use->kind->metric_count; m++)
		if (use->kind->metrics[m].options)
			field = field_find(use->kind->metrics[m].options, key, strlen(key));
	return field ? (const char *)use->params + field->offset : NULL;
}

static int int_of(const struct check_use *use, const char *key)
{
	const int *value = field_at(use, key);
	return value ? *value : -1;
}

static int64_t ns_of(const struct check_use *use, const char *key)
{
	const int64_t *value = field_at(use, key);
	return value ? *value : 0;
}

static double number_of(const struct check_use *use, const char *key)
{
	const double *value = field_at(use, key);
	return value ? *value : (double)NAN;
}

static struct window window_of(const struct check_use *use)
{
	const struct window *value = field_at(use, "window");
	return value ? *value : (struct window){-1, 0, 0};
}

size_t check_channels(const struct check_use *use, int *ret_channels)
{
	size_t count = 0;
	const struct field_table *table = use->kind->fields;
	for (size_t i = 0; i < table->count; i++) {
		const struct field *field = &table->fields[i];
		const void *at = (const char *)use->params + field->offset;
		if (field->kind == FIELD_CHANNEL && !(field->flags & FIELD_COMMAND) &&
		    *(const int *)at >= 0 && count < CHANNELS_OF_CHECK_MOST)
			ret_channels[count++] = *(const int *)at;
		if (field->kind == FIELD_CHANNELS)
			for (size_t c = 0; c < ((const struct int_list *)at)->count; c++)
				if (count < CHANNELS_OF_CHECK_MOST)
					ret_channels[count++] = ((const struct int_list *)at)->items[c];
	}
	return count;
}

/* ---- what is known of a channel ------------------------------------------------------- */

struct facts {
	double h, h_most, w, w_most; /* s */
	double a, q;                 /* in the channel's unit */
	bool read;
};

static double limits_of_error(const struct channel_info *info, double level)
{
	const struct accuracy *a = &info->accuracy;
	if (!a->given)
		return 0;
	return a->of_reading * fabs(level) + a->of_range * a->range + a->absolute;
}

/*
 * Where a derived channel is looked at: a current vector of half the rated
 * amplitude on the q axis, at a rotor angle of 0.5 rad electrical.
 */
static double typical_input(const struct rig *rig, const char *key, int input)
{
	static const double ANGLE = 0.5;
	const struct unit *unit = rig->infos[input].unit;
	double amplitude =
	    rig->machine.rated_current.value > 0 ? rig->machine.rated_current.value / 2 : 1;
	double si = amplitude;
	if (dimension_agrees(unit->dimension, DIM_ANGLE_ELEC))
		si = ANGLE;
	else if (strcmp(key, "x") == 0)
		si = 0;
	else if (strcmp(key, "a") == 0)
		si = amplitude * cos(ANGLE + PI / 2);
	else if (strcmp(key, "b") == 0)
		si = amplitude * cos(ANGLE + PI / 2 - 2 * PI / 3);
	else if (strcmp(key, "c") == 0)
		si = amplitude * cos(ANGLE + PI / 2 + 2 * PI / 3);
	return si / unit->scale;
}

/* Worst case, linear, as derive_series does it: each input moved by its limit and half a step. */
static void derived_error(const struct rig *rig, int channel, double *ret_a)
{
	const struct rig_channel *own = &rig->channels[channel];
	const struct derivation *derivation = &own->derivation;
	struct channel_info infos[DERIVE_INPUTS_MOST];
	double inputs[DERIVE_INPUTS_MOST];
	for (int i = 0; i < DERIVE_INPUTS_MOST; i++) {
		int input = derivation->inputs[i];
		infos[i] = rig->infos[input >= 0 ? input : channel];
		inputs[i] =
		    input >= 0 ? typical_input(rig, derivation->kind->inputs[i], input) : (double)NAN;
	}
	double centre = derive_value(derivation, infos, inputs, &own->info, &rig->machine), sum = 0;
	for (int i = 0; i < DERIVE_INPUTS_MOST; i++) {
		if (derivation->inputs[i] < 0)
			continue;
		double kept = inputs[i];
		inputs[i] += limits_of_error(&infos[i], kept) + infos[i].resolution / 2;
		double moved = derive_value(derivation, infos, inputs, &own->info, &rig->machine) - centre;
		if (derivation->kind->circular)
			moved = wrap_half(moved, 2 * PI / own->info.unit->scale);
		sum += isnan(moved) ? 0 : fabs(moved);
		inputs[i] = kept;
	}
	*ret_a = sum;
}

static struct facts facts_of(const struct forecast_case *c, int channel, double level)
{
	const struct rig *rig = c->timing->rig;
	struct facts facts = {0};
	if (channel < 0)
		return facts;
	const struct plan_channel *plan = &c->plan->channel[channel];
	const struct channel_info *info = &rig->infos[channel];
	double more = (double)(info->refresh_ns + info->delay_most_ns - info->delay_least_ns);
	facts.read = plan->read;
	facts.h = (double)(c->interval_ns > 0 ? c->interval_ns : plan->interval_ns) / 1e9;
	facts.h_most = (double)(c->interval_ns > 0 ? c->interval_ns : plan->interval_most_ns) / 1e9;
	facts.w = ((double)plan->row_ns + more) / 1e9;
	facts.w_most = ((double)plan->row_most_ns + more) / 1e9;
	facts.q = info->resolution;
	facts.a = limits_of_error(info, level);
	if (rig->channels[channel].place == PLACE_DERIVED)
		derived_error(rig, channel, &facts.a);
	return facts;
}

static const struct plan_mark *mark_of(const struct forecast_case *c, const char *key)
{
	int mark = int_of(c->use, key);
	return mark >= 0 && c->plan->mark[mark].set ? &c->plan->mark[mark] : NULL;
}

__attribute__((format(printf, 2, 3))) static void impossible(struct forecast *ret,
                                                             const char *format, ...)
{
	va_list args;
	va_start(args, format);
	(void)vsnprintf(ret->why, sizeof ret->why, format, args);
	va_end(args);
	ret->impossible = true;
	ret->up = ret->down = ret->up_least = ret->down_least = (double)INFINITY;
}

/* How many rows surely fit into a time; and at most. */
static double rows_in(double seconds, const struct facts *f)
{
	return floor((seconds - f->w_most) / f->h_most + 1e-9);
}

static double rows_most_in(double seconds, const struct facts *f)
{
	return floor((seconds - f->w) / f->h) + 1;
}

/* Too few rows: impossible, or left to chance. */
static bool enough(struct forecast *ret, double seconds, const struct facts *f, double least,
                   const char *where)
{
	char time[40], interval[40];
	if (rows_in(seconds, f) >= least)
		return true;
	(void)snprintf(ret->why, sizeof ret->why, "%g samples are needed %s (%s), at one each %s",
	               least, where, duration_text((int64_t)(seconds * 1e9), time, sizeof time),
	               duration_text((int64_t)(f->h * 1e9), interval, sizeof interval));
	if (rows_most_in(seconds, f) >= least) {
		ret->chance = true;
		return true;
	}
	impossible(ret, "%g samples are needed %s (%s), at one each %s", least, where, time, interval);
	return false;
}

static double half_width(double a, double q)
{
	/* GUM: a as a rectangle u = a / sqrt(3), rounding u = q / sqrt(12); U = 2 u. */
	return 2 * sqrt(a * a / 3 + q * q / 12);
}

static void same_all(struct forecast *ret, double most, double least)
{
	ret->up = ret->down = most;
	ret->up_least = ret->down_least = least;
}

/* What noise an earlier run showed beyond what the rig file explains: U of it. */
static double noise_of(const struct forecast_case *c, double explained)
{
	double square = c->known_u * c->known_u - explained * explained;
	return square > 0 ? sqrt(square) : 0;
}

/* ---- step_response -------------------------------------------------------------------- */

/* |new - old| of the command at the mark, in the unit of the channel; NaN: not known. */
static double step_size(const struct forecast_case *c, const struct plan_mark *mark, int channel,
                        double *ret_target)
{
	const struct rig *rig = c->timing->rig;
	int command = int_of(c->use, "command");
	double step = (double)NAN;
	*ret_target = (double)NAN;
	for (size_t i = 0; i < mark->step->assign_count; i++) {
		const struct assignment *assign = &mark->step->assigns[i];
		const struct unit *unit = rig->infos[assign->channel].unit;
		if (command >= 0 ? assign->channel != command
		                 : !dimension_agrees(unit->dimension, rig->infos[channel].unit->dimension))
			continue;
		double before = mark->before[assign->channel];
		double scale = unit->scale / rig->infos[channel].unit->scale;
		step = fabs(assign->value - (isnan(before) ? 0 : before)) * scale;
		*ret_target = assign->value * scale;
	}
	return step;
}

struct stepping {
	struct facts f;
	const struct plan_mark *mark;
	double m, m_most, step, target, hundred, judged;
};

/* Levels, and the rows before and after that prove them. False: the forecast is made. */
static bool stepping_of(const struct forecast_case *c, struct stepping *s, struct forecast *ret)
{
	int channel = int_of(c->use, "channel");
	const struct rig *rig = c->timing->rig;
	s->mark = mark_of(c, "from");
	if (!s->mark) {
		impossible(ret, "the mark is not in the stimulus");
		return false;
	}
	s->step = step_size(c, s->mark, channel, &s->target);
	s->f = facts_of(c, channel, isnan(s->target) ? 0 : s->target);
	s->m = (double)s->mark->width_ns / 1e9;
	s->m_most = (double)s->mark->width_most_ns / 1e9;
	s->hundred = s->step;
	if (int_of(c->use, "percent_of") == 1) /* rated */
		s->hundred = dimension_agrees(rig->infos[channel].unit->dimension, DIM_SPEED_MECH)
		                 ? rig->machine.rated_speed.value / rig->infos[channel].unit->scale
		                 : (double)NAN;
	double before = (double)s->mark->at_ns / 1e9;
	double initial = fmin((double)ns_of(c->use, "initial_for") / 1e9, before);
	double after = (double)(c->plan->stimulus_ns - s->mark->at_ns) / 1e9 - s->m;
	double wanted = (double)ns_of(c->use, "for") / 1e9;
	s->judged = wanted > 0 ? fmin(wanted, after) : after;
	double final = (double)ns_of(c->use, "final_for") / 1e9;
	final = final > 0 ? final : s->judged / 5;
	if (!s->mark->certain)
		return true; /* how long an await holds is not known */
	return enough(ret, initial, &s->f, 3, "before the mark") &&
	       enough(ret, final, &s->f, 5, "in the settled part");
}

/* A time that is read off between rows, when too few of them lie in the passage to trust a line. */
static void between_rows(const struct stepping *s, double edges, struct forecast *ret)
{
	same_all(ret, edges * (s->f.h_most + s->f.w_most), 0);
	ret->formula = "samples too sparse to interpolate: h + w at each edge";
}

static void rise_time(const struct forecast_case *c, double value, struct forecast *ret)
{
	struct stepping s;
	if (!stepping_of(c, &s, ret))
		return;
	/* A passage is interpolated where at least four samples lie in it. */
	if (s.f.h_most > value / 4) {
		between_rows(&s, 2, ret);
		return;
	}
	/* Two crossings, each with u = w / sqrt(12); a bend y'' = 2.2 y' / T shifts each by
	 * y'' (h/2)^2 / (2 y') = 0.275 h^2 / T. */
	double rows = 2 * sqrt(2) * s.f.w_most / sqrt(12);
	double level = half_width(s.f.a, s.f.q) * 2 * value / (0.8 * fmax(s.step, 1e-12));
	double bend = 0.55 * s.f.h_most * s.f.h_most / value;
	double noise = noise_of(c, hypot(rows, level));
	same_all(ret, hypot(rows, level) + bend + 2 * noise, 0);
	ret->formula =
	    "U of two interpolated crossings: sqrt(2) w / sqrt(3), levels, 0.55 h^2 / T of bend";
}

static void settling_time(const struct forecast_case *c, double value, struct forecast *ret)
{
	struct stepping s;
	if (!stepping_of(c, &s, ret))
		return;
	/* From the last row outside to the first of rows that all are inside; rows that noise or the
	 * edge's own uncertainty put in doubt add one interval, averaging its half length. */
	double band = number_of(c->use, "band") * s.hundred, sigma = s.f.q / sqrt(12);
	double averaged = band > 0 ? fmax(0, (144 * sigma * sigma / (band * band) - 1) / 2) : 0;
	double reach = ceil(averaged) * s.f.h_most;
	double width = 2 * s.f.h_most + s.f.w_most + s.m_most + reach;
	/* With few samples on the way up the answer may leave the band unseen, up to four
	 * times the time that it seems to take. */
	double rise = isnan(c->known_rise) ? value / 2 : c->known_rise;
	if (4 * s.f.h_most > rise)
		width = fmax(width, 4 * (rise + 2 * s.f.h_most + s.f.w_most) + s.m_most - value);
	same_all(ret, width, 0);
	ret->formula = "from the last row outside the band to the first inside: 2 h + w + m";
}

static void from_mark(const struct forecast_case *c, double value, struct forecast *ret)
{
	struct stepping s;
	if (!stepping_of(c, &s, ret))
		return;
	(void)value;
	same_all(ret, s.f.h_most + s.f.w_most + s.m_most, 0);
	ret->formula = "between two rows, from the mark: h + w + m";
}

static void overshoot(const struct forecast_case *c, double value, struct forecast *ret)
{
	struct stepping s;
	if (!stepping_of(c, &s, ret))
		return;
	if (!(s.hundred > 0)) {
		impossible(ret, "no command in the channel's unit is made at the mark");
		return;
	}
	/* Near its peak (at about twice the rise time) a response bends like a cosine of period
	 * 4 t_rise: between rows it can be higher by (1 - cos(pi h / (4 t_rise))). */
	double rise = !isnan(c->known_rise) ? c->known_rise : s.judged / 20;
	double phase = PI * s.f.h_most / (4 * rise);
	if (phase > PI / 2) {
		impossible(ret, "samples are further apart than the peak is wide");
		return;
	}
	double hidden = (1 - cos(phase)) * (100 + value);
	double level = 100 * half_width(s.f.a, s.f.q) * sqrt(2) / s.hundred;
	ret->up = level + hidden + 2 * noise_of(c, level);
	ret->down = level + 2 * noise_of(c, level);
	ret->formula =
	    "U of peak and levels, and what a peak can hide between rows: 1 - cos(pi h / (4 T))";
}

static void steady_state_error(const struct forecast_case *c, double value, struct forecast *ret)
{
	struct stepping s;
	if (!stepping_of(c, &s, ret))
		return;
	(void)value;
	/* Limits of error do not average out; rounding does where noise is larger than a step. */
	double system = 2 * s.f.a / sqrt(3), rounding = 2 * (s.f.q / 2) / sqrt(3);
	double noise = noise_of(c, system);
	same_all(ret, sqrt(system * system + rounding * rounding) + 0.5 * noise, system);
	ret->formula = "U = 2 sqrt(a^2 / 3 + (q/2)^2 / 3)";
}

static void ripple(const struct forecast_case *c, double value, struct forecast *ret)
{
	struct stepping s;
	if (!stepping_of(c, &s, ret))
		return;
	(void)value;
	same_all(ret, s.f.q + 2 * s.f.a, s.f.q + 2 * s.f.a);
	ret->formula = "peak to peak: q + 2 a";
}

static void ripple_rms(const struct forecast_case *c, double value, struct forecast *ret)
{
	struct stepping s;
	if (!stepping_of(c, &s, ret))
		return;
	(void)value;
	double width = half_width(s.f.a, s.f.q);
	same_all(ret, width + noise_of(c, width), 0);
	ret->formula = "U = 2 sqrt(a^2 / 3 + q^2 / 12)";
}

/* ---- angles ------------------------------------------------------------------------- */

/* Seconds that a window holds; false: the forecast is made. */
static bool window_seconds(const struct forecast_case *c, struct window window, double *ret,
                           bool *ret_certain, struct forecast *forecast)
{
	double from = 0;
	*ret_certain = true;
	if (window.from >= 0) {
		const struct plan_mark *mark = &c->plan->mark[window.from];
		if (!mark->set) {
			impossible(forecast, "the mark of the window is not in the stimulus");
			return false;
		}
		from = (double)(mark->at_ns + mark->width_ns) / 1e9;
		*ret_certain = mark->certain;
	}
	double left = (double)c->plan->stimulus_ns / 1e9 - from - (double)window.after_ns / 1e9;
	double wanted = (double)window.for_ns / 1e9;
	*ret = wanted > 0 ? fmin(wanted, left) : left;
	if (*ret <= 0 && *ret_certain) {
		impossible(forecast, "the stimulus ends before the window begins: hold longer");
		return false;
	}
	return true;
}

static double in_degrees(const struct forecast_case *c, int channel)
{
	return c->timing->rig->infos[channel].unit->scale * 180 / PI;
}

/*
 * The window is proven steady where t sqrt(12 / n) times the noise is below a
 * quarter of the tolerance (the standard error of a drift over n rows). With
 * fewer than STEADY_ROWS rows noise above a sixth of the tolerance spoils it.
 */
enum { STEADY_ROWS = 24 };

/* Noise of the rows as an earlier run shows it, U of a mean over the window in *ret_noise. */
static bool angle_facts(const struct forecast_case *c, const char *key, struct facts *f,
                        double *ret_noise, struct forecast *ret)
{
	double seconds;
	bool certain;
	int channel = int_of(c->use, key);
	*f = facts_of(c, channel, 0);
	f->a *= in_degrees(c, channel);
	f->q *= in_degrees(c, channel);
	*ret_noise = 0;
	if (!window_seconds(c, window_of(c->use), &seconds, &certain, ret))
		return false;
	if (!certain)
		return true;
	if (!enough(ret, seconds, f, 5, "in the window"))
		return false;
	double rows = fmax(rows_in(seconds, f), 1);
	if (!isnan(c->known_spread))
		*ret_noise = 2 * c->known_spread / sqrt(rows);
	if (rows < STEADY_ROWS && !ret->chance) {
		ret->chance = true;
		(void)snprintf(ret->why, sizeof ret->why,
		               "%g samples in the window prove it steady only where there is little noise",
		               rows);
	}
	return true;
}

/*
 * The current at which an angle will be measured is a guess, and its limits of
 * error go with one over the current: a tenth is added, half is sure.
 */
static void put_angle(double system, double rounding, double noise, struct forecast *ret)
{
	same_all(ret, 1.1 * sqrt(system * system + rounding * rounding + noise * noise) + noise,
	         0.5 * system);
}

static void angle_mean(const struct forecast_case *c, double value, struct forecast *ret)
{
	struct facts f;
	double noise;
	(void)value;
	if (!angle_facts(c, "channel", &f, &noise, ret))
		return;
	put_angle(2 * f.a / sqrt(3), f.q / sqrt(3), noise, ret);
	ret->formula = "U of a mean: 2 sqrt(a^2 / 3 + (q/2)^2 / 3); at half the rated current";
}

static void angle_spread(const struct forecast_case *c, double value, struct forecast *ret)
{
	struct facts f;
	double noise;
	if (!angle_facts(c, "channel", &f, &noise, ret))
		return;
	/* The relative uncertainty of a standard deviation of n rows is 1 / sqrt(2 n); U is twice that,
	 * and the value itself scatters as much. */
	same_all(ret, 2 * f.q / sqrt(12) + 2 * noise / sqrt(2) + 0.1 * value, 0);
	ret->formula = "U = 2 sqrt(q^2 / 12 + s^2 / (2 n))";
}

static void angle_worst(const struct forecast_case *c, double value, struct forecast *ret)
{
	struct facts f;
	double noise;
	if (!angle_facts(c, "channel", &f, &noise, ret))
		return;
	/* An extreme of noisy rows does not come again: it is taken to vary by half. */
	ret->up = f.a + f.q / 2 + 0.5 * value;
	ret->down = f.a + f.q / 2 + 0.5 * value;
	ret->formula = "limits of error of a row a + q / 2, and half of the value for noise";
}

static void torque_lost(const struct forecast_case *c, double value, struct forecast *ret)
{
	struct facts f;
	double noise;
	if (!angle_facts(c, "channel", &f, &noise, ret))
		return;
	double system = 2 * f.a / sqrt(3);
	double wide = (1.1 * sqrt(system * system + f.q * f.q / 3) + 2 * noise) * PI / 180;
	double error = acos(fmax(1 - value / 100, -1));
	ret->up = 100 * (cos(error) - cos(fmin(error + wide, PI)));
	ret->down = 100 * (cos(fmax(error - wide, 0)) - cos(error));
	ret->formula = "1 - cos(error + U)";
}

static void frame_offset(const struct forecast_case *c, double value, struct forecast *ret)
{
	struct facts own, bench;
	double noise;
	(void)value;
	if (!angle_facts(c, "own", &own, &noise, ret) || !angle_facts(c, "bench", &bench, &noise, ret))
		return;
	double system = 2 * hypot(own.a, bench.a) / sqrt(3);
	put_angle(system, hypot(own.q, bench.q) / sqrt(3), noise_of(c, 1.1 * system), ret);
	ret->formula = "both means: 2 sqrt((a1^2 + a2^2) / 3); at half the rated current";
}

/* ---- events ------------------------------------------------------------------------- */

/* Latency of an event on a channel from a mark: guaranteed bounds. */
static void latency(const struct forecast_case *c, int channel, const struct plan_mark *mark,
                    int64_t dwell_ns, double value, struct forecast *ret)
{
	struct facts f = facts_of(c, channel, 0);
	double m = mark ? (double)mark->width_most_ns / 1e9 : 0, dwell = (double)dwell_ns / 1e9;
	char interval[40];
	if (!mark) {
		impossible(ret, "the mark is not in the stimulus");
		return;
	}
	(void)duration_text((int64_t)(f.h * 1e9), interval, sizeof interval);
	if (mark->certain && (double)mark->at_ns / 1e9 < f.h + f.w) {
		impossible(ret, "no sample lies before the mark: hold longer before it");
		return;
	}
	if (f.h > 0.2 - f.w) {
		impossible(ret, "no sample within 200 ms before the mark, at one each %s", interval);
		return;
	}
	if (dwell > 0 && f.h > dwell) {
		impossible(ret, "it must stay so for %.4g ms, and samples come each %s", dwell * 1e3,
		           interval);
		return;
	}
	if (dwell > 0 && f.h_most > dwell) {
		ret->chance = true;
		(void)snprintf(ret->why, sizeof ret->why, "samples each %s can hardly show %.4g ms",
		               interval, dwell * 1e3);
	}
	double after = (double)(c->plan->stimulus_ns - mark->at_ns) / 1e9;
	if (mark->certain && value + dwell + f.h + f.w > after) {
		impossible(ret, "the stimulus ends %.4g ms after the mark: hold longer", after * 1e3);
		return;
	}
	/* high - truth: up to m (effect at once) + refresh, h and the transaction; at least w - m.
	 * truth - low: the same the other way round, and never below 0. */
	double width = f.h_most + f.w_most + m;
	ret->up = width;
	ret->down = width;
	ret->formula = "guaranteed: from the row before to the row after, h + w + m";
}

static void detection_time(const struct forecast_case *c, double value, struct forecast *ret)
{
	latency(c, int_of(c->use, "indication"), mark_of(c, "from"), 0, value, ret);
}

static void torque_off_time(const struct forecast_case *c, double value, struct forecast *ret)
{
	if (int_of(c->use, "torque") < 0 || !(number_of(c->use, "torque_below") > 0))
		impossible(ret, "the check names no torque and torque_below");
	else
		latency(c, int_of(c->use, "torque"), mark_of(c, "from"), ns_of(c->use, "torque_for"), value,
		        ret);
}

static void reaction_time(const struct forecast_case *c, double value, struct forecast *ret)
{
	latency(c, int_of(c->use, "channel"), mark_of(c, "from"), ns_of(c->use, "for"), value, ret);
}

/* Rows between two marks, or to the end. False: the forecast is made. */
static bool rows_between(const struct forecast_case *c, int channel, const struct plan_mark *from,
                         const struct plan_mark *to, struct forecast *ret)
{
	struct facts f = facts_of(c, channel, 0);
	double begin = (double)(from->at_ns + from->width_ns) / 1e9;
	double end = (double)(to ? to->at_ns : c->plan->stimulus_ns) / 1e9;
	if (!from->certain || (to && !to->certain))
		return true;
	return enough(ret, end - begin, &f, 1, "after the mark");
}

static void answer_between(const struct forecast_case *c, int channel, const char *from,
                           const char *to, struct forecast *ret)
{
	const struct plan_mark *mark = mark_of(c, from);
	if (channel < 0)
		impossible(ret, "the check names no channel for it");
	else if (!mark)
		impossible(ret, "the check names no mark %s", from);
	else
		(void)rows_between(c, channel, mark, to ? mark_of(c, to) : NULL, ret);
	ret->formula = "yes or no: at least one sample between the marks";
}

static void code_right(const struct forecast_case *c, double value, struct forecast *ret)
{
	(void)value;
	answer_between(c, int_of(c->use, "indication"), "from", "reset", ret);
}

static void code_after_silence(const struct forecast_case *c, double value, struct forecast *ret)
{
	(void)value;
	answer_between(c, int_of(c->use, "indication"), "back", NULL, ret);
}

static void stays_latched(const struct forecast_case *c, double value, struct forecast *ret)
{
	const struct plan_mark *gone = mark_of(c, "gone"), *reset = mark_of(c, "reset");
	(void)value;
	answer_between(c, int_of(c->use, "indication"), "from", "reset", ret);
	if (!ret->impossible && gone && reset && gone->at_ns >= reset->at_ns)
		impossible(ret, "there is no time between the mark gone and the reset");
}

static void restart_refused(const struct forecast_case *c, double value, struct forecast *ret)
{
	int running = int_of(c->use, "running");
	(void)value;
	answer_between(c, running >= 0 ? running : int_of(c->use, "torque"), "restart", "reset", ret);
}

static void reset_clears(const struct forecast_case *c, double value, struct forecast *ret)
{
	(void)value;
	answer_between(c, int_of(c->use, "indication"), "reset",
	               int_of(c->use, "again") >= 0 ? "again" : NULL, ret);
}

static void restarts_clean(const struct forecast_case *c, double value, struct forecast *ret)
{
	(void)value;
	answer_between(c, int_of(c->use, "running"), int_of(c->use, "again") >= 0 ? "again" : "reset",
	               NULL, ret);
}

static void stays_off(const struct forecast_case *c, double value, struct forecast *ret)
{
	reaction_time(c, value, ret);
	if (!ret->impossible)
		same_all(ret, 0, 0);
	ret->formula = "yes or no: decided where the reaction is seen";
}

/* ---- the rest ------------------------------------------------------------------------ */

/* Whether something as long as ignore_shorter_than could hide between two rows. */
static void hides(const struct forecast_case *c, const struct facts *f, struct forecast *ret)
{
	double ignore = (double)ns_of(c->use, "ignore_shorter_than") / 1e9;
	char hidden[40];
	double longest = f->h + f->w, most = f->h_most + f->w_most;
	(void)duration_text((int64_t)(longest * 1e9), hidden, sizeof hidden);
	if (longest > ignore) {
		impossible(ret, "%s without a sample can hide an excursion longer than %.4g ms", hidden,
		           ignore * 1e3);
	} else if (most > ignore) {
		ret->chance = true;
		(void)snprintf(ret->why, sizeof ret->why,
		               "%s without a sample, and at times more, is near to %.4g ms", hidden,
		               ignore * 1e3);
	}
}

static void stays_inside(const struct forecast_case *c, double value, struct forecast *ret)
{
	struct facts f = facts_of(c, int_of(c->use, "channel"), 0);
	double seconds;
	bool certain;
	(void)value;
	if (!window_seconds(c, window_of(c->use), &seconds, &certain, ret))
		return;
	if (!certain || enough(ret, seconds, &f, 1, "in the window"))
		hides(c, &f, ret);
	ret->formula = "yes or no: h + w must not exceed ignore_shorter_than";
}

static void extreme(const struct forecast_case *c, double value, struct forecast *ret)
{
	struct facts f = facts_of(c, int_of(c->use, "channel"), value);
	stays_inside(c, value, ret);
	if (!ret->impossible)
		same_all(ret, f.a + f.q / 2, f.a + f.q / 2);
	ret->formula = "limits of error of a row: a + q / 2";
}

static void always(const struct forecast_case *c, double value, struct forecast *ret)
{
	(void)c;
	(void)value;
	ret->formula = "yes or no: the reply itself decides";
}

static const struct step *attempt_step(const struct step *steps, size_t count, const char *name,
                                       int64_t *before_ns)
{
	for (size_t i = 0; i < count; i++) {
		int64_t least, most;
		if (steps[i].kind == STEP_ATTEMPT && strcmp(steps[i].attempt.name, name) == 0)
			return &steps[i];
		steps_duration(&steps[i], 1, &least, &most);
		*before_ns += least;
	}
	return NULL;
}

static void unchanged(const struct forecast_case *c, double value, struct forecast *ret)
{
	const struct int_list *channels = field_at(c->use, "unchanged");
	const char *const *name = field_at(c->use, "attempt");
	double within = (double)ns_of(c->use, "within") / 1e9;
	int64_t before = 0;
	(void)value;
	ret->formula = "yes or no: three samples before and after the attempt";
	if (!channels || channels->count == 0 || !name || !*name) {
		impossible(ret, "the check names no channels");
		return;
	}
	const struct test *test = c->plan->test;
	if (!attempt_step(test->stimulus, test->stimulus_count, *name, &before))
		return; /* inside a cycle */
	double after = (double)(c->plan->stimulus_ns - before) / 1e9;
	for (size_t i = 0; i < channels->count; i++) {
		struct facts f = facts_of(c, channels->items[i], 0);
		if (!enough(ret, fmin(within, (double)before / 1e9), &f, 3, "before the attempt") ||
		    !enough(ret, fmin(within, after), &f, 3, "after the attempt"))
			return;
	}
}

static void agree(const struct forecast_case *c, double value, struct forecast *ret)
{
	const struct int_list *channels = field_at(c->use, "channels");
	double seconds;
	bool certain;
	(void)value;
	ret->formula = "yes or no: three samples in the window, and a value beyond its uncertainty";
	if (!window_seconds(c, window_of(c->use), &seconds, &certain, ret))
		return;
	for (size_t i = 0; channels && i < channels->count; i++) {
		struct facts f = facts_of(c, channels->items[i], 0);
		if (certain && !enough(ret, seconds, &f, 3, "in the window"))
			return;
	}
}

static const struct forecaster {
	const char *check, *metric;
	void (*forecast)(const struct forecast_case *c, double value, struct forecast *ret);
	bool from_zero; /* the metric is never below 0 */
} FORECASTERS[] = {
    {"step_response", "dead_time", from_mark, true},
    {"step_response", "rise_time", rise_time, true},
    {"step_response", "peak_time", from_mark, true},
    {"step_response", "overshoot", overshoot, true},
    {"step_response", "undershoot", overshoot, true},
    {"step_response", "settling_time", settling_time, true},
    {"step_response", "steady_state_error", steady_state_error, false},
    {"step_response", "ripple", ripple, true},
    {"step_response", "ripple_rms", ripple_rms, true},
    {"torque_angle", "mean", angle_mean, false},
    {"torque_angle", "mean_error", angle_mean, false},
    {"torque_angle", "spread", angle_spread, true},
    {"torque_angle", "worst_error", angle_worst, true},
    {"torque_angle", "torque_lost", torque_lost, true},
    {"alignment", "frame_offset", frame_offset, false},
    {"fault_reaction", "detection_time", detection_time, true},
    {"fault_reaction", "code_right", code_right, true},
    {"fault_reaction", "torque_off_time", torque_off_time, true},
    {"fault_reaction", "stays_latched", stays_latched, true},
    {"fault_reaction", "restart_refused", restart_refused, true},
    {"fault_reaction", "reset_clears", reset_clears, true},
    {"fault_reaction", "restarts_clean", restarts_clean, true},
    {"silence_reaction", "reaction_time", reaction_time, true},
    {"silence_reaction", "code_right", code_after_silence, true},
    {"silence_reaction", "stays_off", stays_off, true},
    {"refusal", "refused", always, true},
    {"refusal", "exception_right", always, true},
    {"refusal", "unchanged", unchanged, true},
    {"stays_within", "largest", extreme, false},
    {"stays_within", "smallest", extreme, false},
    {"stays_within", "inside", stays_inside, true},
    {"same_sign", "agree", agree, true},
};

static const struct forecaster *forecaster_of(const struct forecast_case *c)
{
	const char *metric = c->use->kind->metrics[c->limit->metric].name;
	for (size_t i = 0; i < sizeof FORECASTERS / sizeof FORECASTERS[0]; i++)
		if (strcmp(FORECASTERS[i].check, c->use->kind->name) == 0 &&
		    strcmp(FORECASTERS[i].metric, metric) == 0)
			return &FORECASTERS[i];
	return NULL;
}

void forecast_at(const struct forecast_case *c, double value, struct forecast *ret)
{
	const struct forecaster *forecaster = forecaster_of(c);
	*ret = (struct forecast){0};
	if (forecaster)
		forecaster->forecast(c, value, ret);
}

/* ---- the answer ------------------------------------------------------------------------ */

/* How an interval around a value will lie to the limit. */
static enum answer at_value(const struct forecast_case *c, double v, const struct forecast *f,
                            bool from_zero)
{
	const struct limit *limit = c->limit;
	double low = v - f->down, high = v + f->up;
	if (from_zero && low < 0)
		low = 0;
	if (f->impossible)
		return ANSWER_UNDECIDABLE;
	if (limit->rule == DECISION_SIMPLE)
		return f->chance ? ANSWER_OPEN : ANSWER_DECIDABLE;
	bool pass = low >= limit->min && high <= limit->max;
	bool fail = low > limit->max || high < limit->min;
	if (pass || fail)
		return f->chance ? ANSWER_OPEN : ANSWER_DECIDABLE;
	double low_least = v - f->down_least, high_least = v + f->up_least;
	bool across = (high_least > limit->max && low_least <= limit->max) ||
	              (low_least < limit->min && high_least >= limit->min);
	return across ? ANSWER_UNDECIDABLE : ANSWER_OPEN;
}

static bool passes(const struct forecast_case *c, double v, bool from_zero, struct forecast *f)
{
	forecast_at(c, v, f);
	double low = v - f->down;
	if (from_zero && low < 0)
		low = 0;
	return !f->impossible && low >= c->limit->min && v + f->up <= c->limit->max;
}

enum { SCAN = 400 };

/* No value known: for which values would conformity surely be shown? */
static void scan(const struct forecast_case *c, bool from_zero, struct answered *ret)
{
	double least = from_zero && isinf(c->limit->min) ? 0 : c->limit->min, most = c->limit->max;
	bool open_ended = isinf(least) || isinf(most), any = false, possible = false;
	if (open_ended) { /* one side is far away: only the edge matters */
		double edge = isinf(least) ? most : least, f_width;
		forecast_at(c, edge, &ret->forecast);
		f_width = isinf(least) ? ret->forecast.up : ret->forecast.down;
		ret->answer = ret->forecast.impossible || isinf(f_width) ? ANSWER_UNDECIDABLE
		              : ret->forecast.chance                     ? ANSWER_OPEN
		                                                         : ANSWER_DECIDABLE;
		ret->sure_from = isinf(least) ? -(double)INFINITY : least + f_width;
		ret->sure_to = isinf(least) ? most - f_width : (double)INFINITY;
		return;
	}
	size_t sure = 0;
	struct forecast f;
	for (int i = 0; i <= SCAN; i++) {
		double v = least + (most - least) * i / SCAN;
		bool pass = passes(c, v, from_zero, &f);
		possible = possible || (!f.impossible && v + f.up_least <= most &&
		                        (v - f.down_least >= least || (from_zero && least == 0)));
		if (!pass)
			continue;
		sure++;
		ret->sure_from = any ? ret->sure_from : v;
		ret->sure_to = v;
		any = true;
	}
	forecast_at(c, least + (most - least) / 2, &ret->forecast);
	if (2 * sure > SCAN)
		ret->answer = ret->forecast.chance ? ANSWER_OPEN : ANSWER_DECIDABLE;
	else
		ret->answer = possible ? ANSWER_OPEN : ANSWER_UNDECIDABLE;
}

void forecast_answer(const struct forecast_case *c, struct answered *ret)
{
	const struct forecaster *forecaster = forecaster_of(c);
	bool yes_no = c->use->kind->metrics[c->limit->metric].shape == METRIC_YES_NO;
	*ret =
	    (struct answered){.answer = ANSWER_NONE, .sure_from = (double)NAN, .sure_to = (double)NAN};
	if (!forecaster)
		return;
	if (yes_no) {
		forecast_at(c, 1, &ret->forecast);
		ret->answer = ret->forecast.impossible ? ANSWER_UNDECIDABLE
		              : ret->forecast.chance   ? ANSWER_OPEN
		                                       : ANSWER_DECIDABLE;
		return;
	}
	scan(c, forecaster->from_zero, ret);
	if (isnan(c->known))
		return;
	forecast_at(c, c->known, &ret->forecast);
	ret->answer = at_value(c, c->known, &ret->forecast, forecaster->from_zero);
}

const char *answer_name(enum answer answer)
{
	static const char *const NAMES[] = {"decidable", "open", "undecidable", "not foreseen"};
	return NAMES[answer];
}
