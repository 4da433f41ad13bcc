/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The encoder: counts between index pulses, direction, and the error of its
 * angle against a reference.
 *
 *   error of the angle        ~~~~~~~ once_per_turn: amplitude of the sine that
 *      |      _     _                 comes again each turn (eccentric disc)
 *      |   _/  \_ /   \_  __ drift: what a line rises over the window (an index
 *      | /       '      ''            that is missed or comes at another place)
 *      +---------------------> time   mean_error: how the disc is mounted
 *
 * One least-squares fit of mean, line, sine and cosine tells them apart; the
 * largest error of a sample alone would call both the same. The reference may
 * be electrical: then the error is known modulo a turn by pole pairs.
 *
 * counts_per_turn comes from the counter's value latched at the index pulse:
 * each new value less the one before is a turn. Dividing many counts by many
 * turns was rejected, since a lost and a doubled count would cancel.
 */
#include <stdio.h>

#include "pairs.h"
#include "put.h"

struct encoder {
	int angle, reference, index, command;
	struct window window;
};

#define PI 3.14159265358979323846

#define AT(member) offsetof(struct encoder, member)
static const struct field fields[] = {
    {.key = "angle",
     .kind = FIELD_CHANNEL,
     .flags = FIELD_REQUIRED,
     .offset = AT(angle),
     .text = "mechanical angle since the index pulse, as derived by encoder_angle"},
    {.key = "reference",
     .kind = FIELD_CHANNEL,
     .offset = AT(reference),
     .text = "rotor angle by an instrument, mechanical or electrical; for the errors of the angle"},
    {.key = "index",
     .kind = FIELD_CHANNEL,
     .offset = AT(index),
     .text = "the counter's value latched at the last index pulse; for counts_per_turn"},
    {.key = "command",
     .kind = FIELD_CHANNEL,
     .flags = FIELD_COMMAND,
     .offset = AT(command),
     .text = "commanded speed, whose sign the rotation must have; for direction_right"},
    {.key = "window",
     .kind = FIELD_WINDOW,
     .offset = AT(window),
     .text = "the samples that are judged, at constant command"},
};
static const struct field_table table = {"encoder", "counts, direction and angle of the encoder",
                                         fields, FIELD_COUNT(fields)};

enum { COUNTS, DIRECTION, ANGLE_ERROR, MEAN_ERROR, ONCE_PER_TURN, DRIFT };
static const struct metric_kind metrics[] = {
    {"counts_per_turn", METRIC_COUNT,
     "counts from index pulse to index pulse: the mean, and the least and most of a turn", NULL},
    {"direction_right", METRIC_YES_NO, "the angle turns with the sign of the command", NULL},
    {"angle_error", METRIC_ANGLE_MECH, "largest |angle - reference| of a sample", NULL},
    {"mean_error", METRIC_ANGLE_MECH, "mean of angle - reference", NULL},
    {"once_per_turn", METRIC_ANGLE_MECH, "amplitude of the error that is a sine of the angle",
     NULL},
    {"drift", METRIC_ANGLE_MECH,
     "change of angle - reference over the window by its fitted line, sign included", NULL},
};

enum { TERMS = 4, FIT_ROWS_LEAST = 12 };

static void unknown(struct metric *ret_metrics, size_t index, enum evidence evidence,
                    const char *why)
{
	metric_unknown(&ret_metrics[index], &metrics[index], shape_unit(metrics[index].shape, NULL),
	               evidence, "%s", why);
}

/* The largest part of a turn of `per_turn` periods that passes in a time, by the nameplate. */
static bool too_fast(const struct check_input *in, int64_t interval_ns, double per_turn,
                     const char *what, char *why, size_t size)
{
	double fastest = 1.2 * in->machine->rated_speed.value;
	double turns = fastest * (double)interval_ns / 1e9 / (2 * PI) * per_turn;
	if (turns < 0.45)
		return false;
	(void)snprintf(
	    why, size,
	    "between two samples, %.3g ms, the rotor may turn by half a period of %s or more "
	    "(1.2 times rated speed%s): sample faster",
	    (double)interval_ns / 1e6, what, fastest > 0 ? "" : ", which machine lacks");
	return true;
}

static int count_turns(const struct check_input *in, const struct encoder *own, struct span span,
                       struct metric *ret_metrics, struct err *reterr)
{
	if (own->index < 0) {
		unknown(ret_metrics, COUNTS, EVIDENCE_SELF_REPORTED, "no index channel is given");
		return 0;
	}
	const struct channel_info *channel = &in->channels[own->index];
	struct rows rows;
	char why[224] = "";
	if (rows_take(in, own->index, span, &rows, reterr) < 0)
		return -1;
	double nominal = 4.0 * in->machine->encoder_lines;
	if (!rows.usable)
		(void)snprintf(why, sizeof why, "%s", rows.why);
	else if (!rows_have_gap(in, &rows, why, sizeof why) && channel->wraps > 0)
		(void)too_fast(in, rows.gap_ns, nominal / channel->wraps, "the latched counter", why,
		               sizeof why);
	double least = (double)INFINITY, most = -(double)INFINITY, sum = 0;
	size_t turns = 0, hidden = 0;
	for (size_t i = 1; !why[0] && i < rows.count; i++) {
		double step = series_value(&rows.series, rows.first + i) -
		              series_value(&rows.series, rows.first + i - 1);
		step = fabs(channel->wraps > 0 ? wrap_half(step, channel->wraps) : step);
		if (step == 0)
			continue;
		double passed = fmax(1, round(step / nominal));
		hidden += passed > 1;
		least = fmin(least, step / passed);
		most = fmax(most, step / passed);
		sum += step;
		turns += (size_t)passed;
	}
	if (!why[0] && turns < 2)
		(void)snprintf(why, sizeof why,
		               "%zu turns from index to index in the window, 2 are needed: hold longer",
		               turns);
	if (why[0]) {
		unknown(ret_metrics, COUNTS, channel->evidence, why);
		return 0;
	}
	put_value(&ret_metrics[COUNTS], &metrics[COUNTS], unit_one(), channel->evidence,
	          sum / (double)turns, least, most, 1);
	(void)snprintf(ret_metrics[COUNTS].note, sizeof ret_metrics[COUNTS].note,
	               "%zu turns, %.6g to %.6g counts%s", turns, least, most,
	               hidden ? "; where several passed between two samples, their mean" : "");
	return 0;
}

static int find_direction(const struct check_input *in, const struct encoder *own, struct span span,
                          struct metric *ret_metrics, struct err *reterr)
{
	const struct channel_info *channel = &in->channels[own->angle];
	struct rows rows;
	char why[224] = "no command is given";
	double commanded = 0, turned = 0, turn = 2 * PI / channel->unit->scale;
	if (rows_take(in, own->angle, span, &rows, reterr) < 0)
		return -1;
	bool known =
	    own->command >= 0 && command_constant(in, own->command, span, &commanded, why, sizeof why);
	if (known && !rows.usable) {
		known = false;
		(void)snprintf(why, sizeof why, "%s", rows.why);
	}
	known = known && !rows_have_gap(in, &rows, why, sizeof why) &&
	        !too_fast(in, rows.gap_ns, 1, "a turn", why, sizeof why);
	for (size_t i = 1; known && i < rows.count; i++)
		turned += wrap_half(series_value(&rows.series, rows.first + i) -
		                        series_value(&rows.series, rows.first + i - 1),
		                    turn);
	double limit = rows.usable ? rows_error_limit(&rows, 0, rows.count) : 0;
	double doubt = 2 * (channel->resolution + limit);
	if (known && (commanded == 0 || fabs(turned) <= fmax(doubt, turn / 100))) {
		known = false;
		(void)snprintf(why, sizeof why, "%s turned by %.3g %s at a command of %.4g: no direction",
		               channel->name, turned, channel->unit->name, commanded);
	}
	if (!known) {
		unknown(ret_metrics, DIRECTION, channel->evidence, why);
		return 0;
	}
	(void)snprintf(why, sizeof why, "%s turned by %.4g turns at a command of %.4g %s",
	               channel->name, turned / turn, commanded, in->channels[own->command].unit->name);
	put_yes_no(&ret_metrics[DIRECTION], &metrics[DIRECTION], channel->evidence,
	           (turned > 0) == (commanded > 0), why);
	return 0;
}

/* Gauss-Jordan of a symmetric positive matrix; false where it is (nearly) singular. */
static bool invert(double m[TERMS][TERMS], double inverse[TERMS][TERMS])
{
	for (int i = 0; i < TERMS; i++)
		for (int k = 0; k < TERMS; k++)
			inverse[i][k] = i == k;
	for (int i = 0; i < TERMS; i++) {
		double pivot = m[i][i];
		if (!(pivot > 0.02)) /* of 1: the terms are of unit size */
			return false;
		for (int k = 0; k < TERMS; k++) {
			m[i][k] /= pivot;
			inverse[i][k] /= pivot;
		}
		for (int j = 0; j < TERMS; j++) {
			double by = m[j][i];
			for (int k = 0; k < TERMS && j != i; k++) {
				m[j][k] -= by * m[i][k];
				inverse[j][k] -= by * inverse[i][k];
			}
		}
	}
	return true;
}

struct fit {
	double term[TERMS], sd[TERMS]; /* mean, half of the rise over the window, cosine, sine */
	double nu;
};

static void terms_at(double x, double phase, double out[TERMS])
{
	out[0] = 1;
	out[1] = x;
	out[2] = cos(phase);
	out[3] = sin(phase);
}

/* error = mean + line + cosine + sine of the angle; around the circular mean `around`. */
static bool fit_errors(const struct pairs *pairs, const double *phase, double around, double turn,
                       struct fit *ret)
{
	size_t n = pairs->rows.count;
	double m[TERMS][TERMS] = {{0}}, inverse[TERMS][TERMS], right[TERMS] = {0}, row[TERMS];
	double first = (double)series_received(&pairs->rows.series, 0);
	double last = (double)series_received(&pairs->rows.series, n - 1);
	*ret = (struct fit){0};
	for (int pass = 0; pass < 2; pass++) {
		double squares = 0, products = 0, before = 0;
		for (size_t i = 0; i < n; i++) {
			double t = (double)series_received(&pairs->rows.series, i);
			double y = wrap_half(series_value(&pairs->rows.series, i) - around, turn);
			terms_at(2 * (t - first) / (last - first) - 1, phase[i], row);
			for (int a = 0; a < TERMS; a++) {
				y -= pass ? ret->term[a] * row[a] : 0;
				right[a] += pass ? 0 : y * row[a] / (double)n;
				for (int b = 0; b < TERMS && !pass; b++)
					m[a][b] += row[a] * row[b] / (double)n;
			}
			squares += y * y;
			products += i ? y * before : 0;
			before = y;
		}
		if (pass == 0) {
			if (!invert(m, inverse))
				return false;
			for (int a = 0; a < TERMS; a++)
				for (int b = 0; b < TERMS; b++)
					ret->term[a] += inverse[a][b] * right[b];
			continue;
		}
		double lag1 = squares > 0 ? fmin(fmax(0, products / squares), 0.99) : 0;
		double independent = fmax((double)n * (1 - lag1) / (1 + lag1), TERMS + 1);
		ret->nu = independent - TERMS;
		double variance = squares / ((double)n - TERMS);
		for (int a = 0; a < TERMS; a++)
			ret->sd[a] = sqrt(variance * inverse[a][a] / independent);
	}
	return true;
}

static double limit_of(const struct series *series)
{
	double limit = 0;
	for (size_t i = 0; i < series->rows; i++)
		limit = fmax(limit, series_error_limit(series, i));
	return limit;
}

static void put_fit(const struct check_input *in, const struct encoder *own,
                    const struct pairs *pairs, const struct fit *fit, double around, double factor,
                    enum evidence evidence, struct metric *ret_metrics)
{
	const struct unit *deg = shape_unit(METRIC_ANGLE_MECH, NULL);
	double scale = pairs->info.unit->scale / deg->scale;
	/* What the instruments may be wrong by with the angle; a skew that stays is a mean. */
	double limit = limit_of(&in->series[own->angle]) +
	               factor * limit_of(&in->series[own->reference]) *
	                   in->channels[own->reference].unit->scale / pairs->info.unit->scale;
	struct budget mean = {0}, sine = {0}, line = {0};
	double extra = 0;
	for (size_t i = 0; i < pairs->rows.count; i++)
		extra += pairs->rows.series.extra[i] / (double)pairs->rows.count;
	budget_random(&mean, fit->sd[0], fit->nu);
	budget_other(&mean, extra / sqrt(3));
	double amplitude = hypot(fit->term[2], fit->term[3]);
	budget_random(&sine, fmax(fit->sd[2], fit->sd[3]), fit->nu);
	budget_other(&sine, limit / sqrt(3));
	budget_random(&line, 2 * fit->sd[1], fit->nu);
	double middle = around + fit->term[0], u = budget_expanded(&mean);
	put_value(&ret_metrics[MEAN_ERROR], &metrics[MEAN_ERROR], deg, evidence, middle * scale,
	          (middle - u) * scale, (middle + u) * scale, 0.95);
	u = budget_expanded(&sine);
	put_value(&ret_metrics[ONCE_PER_TURN], &metrics[ONCE_PER_TURN], deg, evidence,
	          amplitude * scale, fmax(0, amplitude - u) * scale, (amplitude + u) * scale, 0.95);
	u = budget_expanded(&line);
	double rise = 2 * fit->term[1];
	put_value(&ret_metrics[DRIFT], &metrics[DRIFT], deg, evidence, rise * scale, (rise - u) * scale,
	          (rise + u) * scale, 0.95);
}

/* The angle of each compared row, in rad: where the sine of the error stands. */
static double *phases(const struct check_input *in, int angle, const struct pairs *pairs)
{
	double *phase = arena_array(in->scratch, pairs->rows.count, sizeof *phase);
	const struct series *series = &in->series[angle];
	size_t at = 0;
	for (size_t i = 0; phase && i < pairs->rows.count; i++) {
		while (series_sent(series, at) < series_sent(&pairs->rows.series, i))
			at++;
		phase[i] = series_value(series, at) * series->channel->unit->scale;
	}
	return phase;
}

static int compare(const struct check_input *in, const struct encoder *own, struct span span,
                   struct metric *ret_metrics, struct err *reterr)
{
	char why[224] = "no reference is given";
	const struct channel_info *angle = &in->channels[own->angle];
	enum evidence evidence = angle->evidence;
	struct pairs pairs = {0};
	double factor = 1, turn = 2 * PI / angle->unit->scale, around = 0;
	struct fit fit;
	bool fitted = false;
	if (own->reference >= 0) {
		const struct channel_info *reference = &in->channels[own->reference];
		evidence = evidence_of_two(angle, reference);
		if (reference->unit->dimension.sort == SORT_ELECTRICAL)
			factor = 1.0 / in->machine->pole_pairs;
		if (pairs_take(in, own->angle, own->reference, factor, turn * factor, span, &pairs,
		               reterr) < 0)
			return -1;
		(void)snprintf(why, sizeof why, "%s", pairs.why);
		if (pairs.usable && !pairs.together)
			pairs.usable =
			    !too_fast(in, pairs.rows.gap_ns, 1 / factor, reference->name, why, sizeof why);
	}
	if (pairs.usable) {
		struct circular circular;
		struct series series = pairs.rows.series;
		series.channel = &pairs.info;
		circular_of(&(struct stretch){.series = &series, .count = pairs.rows.count}, turn * factor,
		            &circular);
		around = circular.R >= 0.5 ? circular.mean : 0;
		size_t row;
		double doubt, scale = pairs.info.unit->scale * 180 / PI;
		double largest = pairs_largest(&pairs, 0, turn * factor, &doubt, &row);
		put_value(&ret_metrics[ANGLE_ERROR], &metrics[ANGLE_ERROR],
		          shape_unit(METRIC_ANGLE_MECH, NULL), evidence, largest * scale,
		          fmax(0, largest - doubt) * scale, (largest + doubt) * scale, 1);
		put_point(&ret_metrics[ANGLE_ERROR], series_earliest(&series, row),
		          series_latest(&series, row), (double)NAN);
		double *phase = phases(in, own->angle, &pairs);
		if (!phase)
			return err_set(reterr, ERR_NOMEM, "memory ran out while judging %s", angle->name);
		if (circular.R < 0.5)
			(void)snprintf(why, sizeof why, "the errors of %s are spread over the whole turn",
			               angle->name);
		else if (pairs.rows.count < FIT_ROWS_LEAST)
			(void)snprintf(why, sizeof why, "only %zu samples, %d are needed: hold longer",
			               pairs.rows.count, FIT_ROWS_LEAST);
		else if (!(fitted = fit_errors(&pairs, phase, around, turn * factor, &fit)))
			(void)snprintf(why, sizeof why,
			               "the rotor hardly turned in the window: a sine and a drift of the error "
			               "cannot be told apart");
	} else {
		unknown(ret_metrics, ANGLE_ERROR, evidence, why);
	}
	if (fitted)
		put_fit(in, own, &pairs, &fit, around, factor, evidence, ret_metrics);
	else
		for (size_t i = MEAN_ERROR; i <= DRIFT; i++)
			unknown(ret_metrics, i, evidence, why);
	return 0;
}

static int evaluate(const struct check_input *in, const void *params, struct metric *ret_metrics,
                    size_t *ret_count, struct err *reterr)
{
	const struct encoder *own = params;
	*ret_count = FIELD_COUNT(metrics);
	struct span span;
	char why[224];
	if (!window_span(in, &own->window, &span, why, sizeof why)) {
		for (size_t i = 0; i < FIELD_COUNT(metrics); i++)
			unknown(ret_metrics, i, in->channels[own->angle].evidence, why);
		return 0;
	}
	if (count_turns(in, own, span, ret_metrics, reterr) < 0 ||
	    find_direction(in, own, span, ret_metrics, reterr) < 0 ||
	    compare(in, own, span, ret_metrics, reterr) < 0)
		return -1;
	return 0;
}

static int verify(const void *params, const struct channel_info *channels,
                  const struct machine *machine, struct err *reterr)
{
	const struct encoder *own = params;
	const struct channel_info *angle = &channels[own->angle];
	if (!dimension_agrees(angle->unit->dimension, DIM_ANGLE_MECH))
		return err_set(reterr, ERR_FILE, "%s is in %s; the angle since index is mechanical",
		               angle->name, angle->unit->name);
	if (own->reference < 0 && own->index < 0 && own->command < 0)
		return err_set(reterr, ERR_FILE,
		               "nothing to judge the encoder by: give reference, index or command");
	if (own->index >= 0 && machine->encoder_lines <= 0)
		return err_set(reterr, ERR_FILE, "index needs encoder_lines, which machine does not give");
	if (own->reference < 0)
		return 0;
	const struct channel_info *reference = &channels[own->reference];
	if (!dimension_agrees(reference->unit->dimension, DIM_ANGLE))
		return err_set(reterr, ERR_FILE, "reference: %s is in %s, not an angle", reference->name,
		               reference->unit->name);
	if (reference->unit->dimension.sort == SORT_ELECTRICAL && machine->pole_pairs <= 0)
		return err_set(reterr, ERR_FILE,
		               "an electrical reference needs pole_pairs, which machine does not give");
	return 0;
}

const struct check_kind check_encoder = {
    .name = "encoder",
    .text = "counts from index to index, direction and angle error of the encoder",
    .fields = &table,
    .params_size = sizeof(struct encoder),
    .metrics = metrics,
    .metric_count = FIELD_COUNT(metrics),
    .evaluate = evaluate,
    .verify = verify,
};
