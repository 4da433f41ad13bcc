/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The vector that the phase duties make against the vector commanded.
 *
 * Averaged over a switching period, duties a, b, c (upper switches) make
 *      alpha = Vdc (2 a - b - c) / 3,  beta = Vdc (b - c) / sqrt 3
 * whatever the zero sequence is. Space vector modulation reaches every
 * direction up to Vdc / sqrt 3, the linear limit; beyond it the largest and
 * smallest duty are cut and the vector falls short. The share of the period
 * without voltage, both zero vectors together, is 1 - (largest - smallest).
 * (van der Broeck, Skudelny, Stanke: IEEE Trans. IA 24(1), 1988, from memory.)
 *
 * All are demanded from one transaction: vectors turn, and duties of one
 * period against a command of another say nothing about either.
 */
#include <stdio.h>

#include "put.h"
#include "statistics.h"
#include "window.h"

struct modulation {
	int duties[3], alpha, beta, dc_voltage;
	struct window window;
	double minimum;
};

#define PI 3.14159265358979323846

#define AT(member) offsetof(struct modulation, member)
#define CHANNEL(name, member, says)                                                                \
	{                                                                                              \
		.key = name, .kind = FIELD_CHANNEL, .flags = FIELD_REQUIRED, .offset = AT(member),         \
		.text = says                                                                               \
	}
static const struct field fields[] = {
    CHANNEL("duty_a", duties[0], "duty of the upper switch of phase a, 0 to 1"),
    CHANNEL("duty_b", duties[1], "of phase b"),
    CHANNEL("duty_c", duties[2], "of phase c"),
    CHANNEL("alpha", alpha, "voltage commanded along phase a, of the same instant"),
    CHANNEL("beta", beta, "voltage commanded across phase a, of the same instant"),
    CHANNEL("dc_voltage", dc_voltage, "voltage of the DC link; slow, it may lie in another block"),
    {.key = "window",
     .kind = FIELD_WINDOW,
     .offset = AT(window),
     .text = "the samples that are judged"},
    {.key = "minimum",
     .kind = FIELD_QUANTITY,
     .dimension = &DIM_NUMBER,
     .least = 0,
     .most = 1,
     .fallback = "5 %",
     .offset = AT(minimum),
     .text = "of the linear limit: below it a commanded vector has no angle worth comparing"},
};
static const struct field_table table = {"modulation",
                                         "the vector of the duties against the vector commanded",
                                         fields, FIELD_COUNT(fields)};

enum { ANGLE_ERROR, MAGNITUDE_ERROR, NULL_SHARE, LINEAR_USE };
static const struct metric_kind metrics[] = {
    {"vector_angle_error", METRIC_ANGLE_ELEC, "largest |angle made - angle commanded| of a sample",
     NULL},
    {"vector_magnitude_error", METRIC_PERCENT,
     "largest ||made| - |commanded|| of a sample, of the linear limit Vdc / sqrt 3", NULL},
    {"null_share", METRIC_PERCENT,
     "smallest share of the period without voltage: 1 - (largest - smallest duty)", NULL},
    {"linear_use", METRIC_PERCENT, "largest |commanded| of a sample, of the linear limit", NULL},
};

enum { DC = 5, INPUTS, ROWS_LEAST = 3 };

static void inputs_of(const struct modulation *own, int ret[INPUTS])
{
	for (int i = 0; i < 3; i++)
		ret[i] = own->duties[i];
	ret[3] = own->alpha;
	ret[4] = own->beta;
	ret[DC] = own->dc_voltage;
}

/* Extremes over samples, each with its limits of error: the largest, or the smallest by sign. */
struct extreme {
	double value, low, high;
	size_t row;
	bool any;
};

static void extreme_add(struct extreme *extreme, double value, double doubt, size_t row)
{
	if (!extreme->any || value > extreme->value) {
		extreme->value = value;
		extreme->row = row;
	}
	extreme->low = extreme->any ? fmax(extreme->low, value - doubt) : value - doubt;
	extreme->high = extreme->any ? fmax(extreme->high, value + doubt) : value + doubt;
	extreme->any = true;
}

struct point {
	double duty[3], alpha, beta, dc; /* SI */
	double duty_doubt, command_doubt, dc_doubt;
};

/* alpha and beta in V; doubts as radii of the circle in which a vector may lie. */
static void look_at(const struct point *p, double minimum, size_t row, struct extreme out[4])
{
	double a = p->duty[0], b = p->duty[1], c = p->duty[2];
	double alpha = p->dc * (2 * a - b - c) / 3, beta = p->dc * (b - c) / sqrt(3);
	double made = hypot(alpha, beta), told = hypot(p->alpha, p->beta);
	double limit = p->dc / sqrt(3);
	/* Three unit vectors 120 deg apart with signs add up to 2 at most, times 2/3. */
	double made_doubt = 4.0 / 3 * p->duty_doubt * p->dc;
	/* What is made, as a part of the limit, hangs on the duties alone; what is told on Vdc too. */
	double relative = p->dc > p->dc_doubt ? p->dc_doubt / (p->dc - p->dc_doubt) : (double)INFINITY;
	double least = fmax(a, fmax(b, c)) - fmin(a, fmin(b, c));
	extreme_add(&out[NULL_SHARE], -100 * (1 - least), 200 * p->duty_doubt, row);
	extreme_add(&out[LINEAR_USE], 100 * told / limit,
	            100 * (p->command_doubt + told * relative) / limit, row);
	extreme_add(&out[MAGNITUDE_ERROR], 100 * fabs(made - told) / limit,
	            100 * (made_doubt + (p->command_doubt + told * relative)) / limit, row);
	if (!(told - p->command_doubt >= minimum * limit))
		return;
	double error = wrap_half(atan2(beta, alpha) - atan2(p->beta, p->alpha), 2 * PI);
	double doubt = PI;
	if (made > made_doubt && told > p->command_doubt)
		doubt = asin(made_doubt / made) + asin(p->command_doubt / told);
	extreme_add(&out[ANGLE_ERROR], fabs(error) * 180 / PI, doubt * 180 / PI, row);
}

static double doubt_of(const struct series *series, size_t row)
{
	const struct channel_info *channel = series->channel;
	return (series_error_limit(series, row) + channel->resolution / 2) * channel->unit->scale;
}

/* The rows of six channels; false with why[size] where they cannot be compared. */
static bool aligned(const struct rows rows[INPUTS], char *why, size_t size)
{
	for (int i = 0; i < INPUTS; i++)
		if (!rows[i].usable) {
			(void)snprintf(why, size, "%s", rows[i].why);
			return false;
		}
	for (int i = 1; i < DC; i++) {
		bool same = rows[i].series.block == rows[0].series.block && rows[i].count == rows[0].count;
		for (size_t k = 0; same && k < rows[0].count; k++)
			same = series_sent(&rows[i].series, rows[i].first + k) ==
			       series_sent(&rows[0].series, rows[0].first + k);
		if (!same) {
			(void)snprintf(why, size,
			               "%s and %s were not read in one transaction: lay them side by side, or "
			               "sample them in one group",
			               rows[0].series.channel->name, rows[i].series.channel->name);
			return false;
		}
	}
	if (rows[0].count >= ROWS_LEAST)
		return true;
	(void)snprintf(why, size, "only %zu samples of %s in the window, %d are needed: hold longer",
	               rows[0].count, rows[0].series.channel->name, ROWS_LEAST);
	return false;
}

static void look_at_all(const struct modulation *own, const struct rows rows[INPUTS],
                        struct extreme out[4])
{
	size_t dc = rows[DC].first, dc_end = rows[DC].first + rows[DC].count;
	for (size_t k = 0; k < rows[0].count; k++) {
		double values[5];
		struct point p = {0};
		for (int i = 0; i < 5; i++) {
			size_t row = rows[i].first + k;
			const struct channel_info *channel = rows[i].series.channel;
			values[i] = series_value(&rows[i].series, row) * channel->unit->scale;
			double doubt = doubt_of(&rows[i].series, row);
			if (i < 3)
				p.duty_doubt = fmax(p.duty_doubt, doubt);
			else
				p.command_doubt = hypot(p.command_doubt, doubt);
		}
		int64_t t = series_sent(&rows[0].series, rows[0].first + k);
		while (dc + 1 < dc_end && series_sent(&rows[DC].series, dc + 1) <= t)
			dc++;
		double scale = rows[DC].series.channel->unit->scale;
		p.dc = series_value(&rows[DC].series, dc) * scale;
		p.dc_doubt = doubt_of(&rows[DC].series, dc);
		if (dc + 1 < dc_end) /* it may be on its way to the next row's value */
			p.dc_doubt += fabs(series_value(&rows[DC].series, dc + 1) * scale - p.dc);
		for (int i = 0; i < 3; i++)
			p.duty[i] = values[i];
		p.alpha = values[3];
		p.beta = values[4];
		if (p.dc > 0)
			look_at(&p, own->minimum, k, out);
	}
}

static void put_extreme(const struct extreme *extreme, size_t index, enum evidence evidence,
                        const struct rows *rows, double sign, struct metric *ret)
{
	const struct unit *unit = shape_unit(metrics[index].shape, NULL);
	if (!extreme->any) {
		metric_unknown(ret, &metrics[index], unit, evidence,
		               index == ANGLE_ERROR ? "no vector long enough for an angle was commanded"
		                                    : "there was no voltage of the DC link");
		return;
	}
	double low = sign > 0 ? fmax(0, extreme->low) : fmax(0, -extreme->high);
	double high = sign > 0 ? extreme->high : -extreme->low;
	put_value(ret, &metrics[index], unit, evidence, sign * extreme->value, low, high, 1);
	put_point(ret, series_earliest(&rows->series, rows->first + extreme->row),
	          series_latest(&rows->series, rows->first + extreme->row), (double)NAN);
}

static int evaluate(const struct check_input *in, const void *params, struct metric *ret_metrics,
                    size_t *ret_count, struct err *reterr)
{
	const struct modulation *own = params;
	int inputs[INPUTS];
	struct rows rows[INPUTS] = {0};
	struct span span;
	char why[224] = "";
	enum evidence evidence = EVIDENCE_INDEPENDENT;
	inputs_of(own, inputs);
	*ret_count = FIELD_COUNT(metrics);
	bool good = window_span(in, &own->window, &span, why, sizeof why);
	for (int i = 0; i < INPUTS; i++) {
		if (in->channels[inputs[i]].evidence == EVIDENCE_SELF_REPORTED)
			evidence = EVIDENCE_SELF_REPORTED;
		if (good && rows_take(in, inputs[i], span, &rows[i], reterr) < 0)
			return -1;
	}
	good = good && aligned(rows, why, sizeof why) &&
	       !rows_have_gap(in, &rows[0], why, sizeof why) &&
	       !rows_have_gap(in, &rows[DC], why, sizeof why);
	struct extreme out[4] = {0};
	if (good)
		look_at_all(own, rows, out);
	for (size_t i = 0; i < FIELD_COUNT(metrics); i++)
		if (good)
			put_extreme(&out[i], i, evidence, &rows[0], i == NULL_SHARE ? -1 : 1, &ret_metrics[i]);
		else
			metric_unknown(&ret_metrics[i], &metrics[i], shape_unit(metrics[i].shape, NULL),
			               evidence, "%s", why);
	return 0;
}

static int verify(const void *params, const struct channel_info *channels,
                  const struct machine *machine, struct err *reterr)
{
	const struct modulation *own = params;
	(void)machine;
	int inputs[INPUTS];
	inputs_of(own, inputs);
	for (int i = 0; i < INPUTS; i++) {
		const struct channel_info *channel = &channels[inputs[i]];
		const struct dimension wanted = i < 3 ? DIM_NUMBER : DIM_VOLTAGE;
		if (!dimension_agrees(channel->unit->dimension, wanted))
			return err_set(reterr, ERR_FILE, "%s: %s is in %s", table.fields[i].key, channel->name,
			               channel->unit->name);
		for (int k = 0; k < i; k++)
			if (inputs[k] == inputs[i])
				return err_set(reterr, ERR_FILE, "%s and %s are the same channel, %s",
				               table.fields[k].key, table.fields[i].key, channel->name);
	}
	return 0;
}

const struct check_kind check_modulation = {
    .name = "modulation",
    .text = "the vector of the phase duties against the vector commanded",
    .fields = &table,
    .params_size = sizeof(struct modulation),
    .metrics = metrics,
    .metric_count = FIELD_COUNT(metrics),
    .evaluate = evaluate,
    .verify = verify,
};
