/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Whether two channels say the same: the controller's torque estimate and the
 * transducer, its speed and the bench's.
 *
 *      a  ----o-----o-----o---        mean_difference: mean of (a - b)
 *      b  --x----x-----x-----x        largest_difference: the largest |a - b|
 *
 * Sample by sample, from one transaction where there is one (pairs.c); the mean
 * is that of the differences, so that a window need not be steady. Comparing
 * two means taken apart was rejected: with other sampling times a ramp would
 * look like a disagreement.
 */
#include <stdio.h>

#include "pairs.h"
#include "put.h"

struct agreement {
	int a, b;
	struct window window;
};

#define PI 3.14159265358979323846

#define AT(member) offsetof(struct agreement, member)
static const struct field fields[] = {
    {.key = "a",
     .kind = FIELD_CHANNEL,
     .flags = FIELD_REQUIRED,
     .offset = AT(a),
     .text = "the channel that is judged; differences are in its unit"},
    {.key = "b",
     .kind = FIELD_CHANNEL,
     .flags = FIELD_REQUIRED,
     .offset = AT(b),
     .text = "the channel that it must agree with"},
    {.key = "window",
     .kind = FIELD_WINDOW,
     .offset = AT(window),
     .text = "the samples that are judged"},
};
static const struct field_table table = {"agreement", "two channels agree within limits", fields,
                                         FIELD_COUNT(fields)};

enum { MEAN_DIFFERENCE, LARGEST_DIFFERENCE, RELATIVE };
static const struct metric_kind metrics[] = {
    {"mean_difference", METRIC_LEVEL, "mean of a - b over the window, of angles wrapped", NULL},
    {"largest_difference", METRIC_LEVEL, "largest |a - b| of a sample", NULL},
    {"relative_difference", METRIC_PERCENT, "mean of a - b, as a part of |mean of b|", NULL},
};

static double turn_of(const struct channel_info *channel)
{
	return dimension_agrees(channel->unit->dimension, DIM_ANGLE) ? 2 * PI / channel->unit->scale
	                                                             : 0;
}

static void put_relative(const struct check_input *in, const struct agreement *own,
                         struct span span, double mean, double expanded, enum evidence evidence,
                         struct metric *ret)
{
	const struct channel_info *a = &in->channels[own->a], *b = &in->channels[own->b];
	struct rows rows;
	double least = 0, reference = 0, doubt = 0;
	struct err err = {0};
	if (turn_of(a) == 0 && rows_take(in, own->b, span, &rows, &err) == 0 && rows.usable) {
		struct stretch stretch = rows_stretch(&rows, 0, rows.count, span.from_ns);
		struct summary summary;
		summarise(&stretch, &summary);
		double scale = b->unit->scale / a->unit->scale;
		reference = fabs(summary.mean) * scale;
		doubt = (rows_error_limit(&rows, 0, rows.count) + b->resolution / 2 +
		         2 * summary.sd / sqrt(summary.independent)) *
		        scale;
		least = reference - doubt;
	}
	if (!(least > 0)) {
		metric_unknown(ret, &metrics[RELATIVE], unit_percent(), evidence,
		               "%s is too near 0 (%.3g +- %.2g %s) for a relative difference", b->name,
		               reference, doubt, a->unit->name);
		return;
	}
	double low = mean - expanded, high = mean + expanded, most = reference + doubt;
	double value = mean / reference; /* rounding must not put it beside its interval */
	put_value(ret, &metrics[RELATIVE], unit_percent(), evidence, 100 * value,
	          100 * fmin(value, fmin(low / least, low / most)),
	          100 * fmax(value, fmax(high / least, high / most)), 0.95);
}

static int evaluate(const struct check_input *in, const void *params, struct metric *ret_metrics,
                    size_t *ret_count, struct err *reterr)
{
	const struct agreement *own = params;
	const struct channel_info *a = &in->channels[own->a];
	enum evidence evidence = evidence_of_two(a, &in->channels[own->b]);
	*ret_count = FIELD_COUNT(metrics);
	struct pairs pairs = {0};
	struct span span;
	if (window_span(in, &own->window, &span, pairs.why, sizeof pairs.why) &&
	    pairs_take(in, own->a, own->b, 1, turn_of(a), span, &pairs, reterr) < 0)
		return -1;
	if (!pairs.usable) {
		for (size_t i = 0; i < FIELD_COUNT(metrics); i++)
			metric_unknown(&ret_metrics[i], &metrics[i], shape_unit(metrics[i].shape, a->unit),
			               evidence, "%s", pairs.why);
		return 0;
	}
	double mean, expanded, doubt;
	size_t row;
	pairs_mean(&pairs, &mean, &expanded);
	double largest = pairs_largest(&pairs, 0, turn_of(a), &doubt, &row);
	put_value(&ret_metrics[MEAN_DIFFERENCE], &metrics[MEAN_DIFFERENCE], a->unit, evidence, mean,
	          mean - expanded, mean + expanded, 0.95);
	put_value(&ret_metrics[LARGEST_DIFFERENCE], &metrics[LARGEST_DIFFERENCE], a->unit, evidence,
	          largest, fmax(0, largest - doubt), largest + doubt, 1);
	put_relative(in, own, span, mean, expanded, evidence, &ret_metrics[RELATIVE]);
	for (size_t i = 0; i < FIELD_COUNT(metrics); i++) {
		bool point = i == LARGEST_DIFFERENCE;
		put_point(&ret_metrics[i], point ? series_earliest(&pairs.rows.series, row) : span.from_ns,
		          point ? series_latest(&pairs.rows.series, row) : span.to_ns, (double)NAN);
		if (!pairs.together && !ret_metrics[i].note[0])
			(void)snprintf(ret_metrics[i].note, sizeof ret_metrics[i].note,
			               "read in different transactions: their skew is part of the interval");
	}
	return 0;
}

static int verify(const void *params, const struct channel_info *channels,
                  const struct machine *machine, struct err *reterr)
{
	const struct agreement *own = params;
	const struct channel_info *a = &channels[own->a], *b = &channels[own->b];
	(void)machine;
	if (own->a == own->b)
		return err_set(reterr, ERR_FILE, "a and b are the same channel, %s", a->name);
	if (!dimension_agrees(a->unit->dimension, b->unit->dimension))
		return err_set(reterr, ERR_FILE, "%s is in %s and %s in %s: they cannot agree", a->name,
		               a->unit->name, b->name, b->unit->name);
	return 0;
}

const struct check_kind check_agreement = {
    .name = "agreement",
    .text = "two channels say the same",
    .fields = &table,
    .params_size = sizeof(struct agreement),
    .metrics = metrics,
    .metric_count = FIELD_COUNT(metrics),
    .evaluate = evaluate,
    .verify = verify,
};
