/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Pairing of two channels. Comparing nearest rows was rejected: at 3000 rpm a
 * rotor turns by 18 deg in a millisecond, and nearest rows would call that an
 * error of the encoder. What remains in doubt after interpolation is said as a
 * limit of error, since it does not average out: the same skew comes again in
 * every sample.
 */
#include "pairs.h"

#include <stdio.h>

enum { PAIRS_LEAST = 3 };

struct pair_row {
	int64_t sent, received;
	double value;
};

struct pairing {
	const struct rows *a, *b;
	double factor; /* of b, units included */
	double b_turn; /* of b in its own unit; 0: does not wrap */
	size_t at;     /* where b was left */
	int64_t gap_most;
};

static double middle(const struct series *series, size_t row)
{
	return ((double)series_earliest(series, row) + (double)series_latest(series, row)) / 2;
}

static double half_width(const struct series *series, size_t row)
{
	return ((double)series_latest(series, row) - (double)series_earliest(series, row)) / 2;
}

/* The same transaction: the row of b with the same times. */
static bool same_row(struct pairing *pairing, size_t row_a, double *ret_value, double *ret_doubt)
{
	const struct series *a = &pairing->a->series, *b = &pairing->b->series;
	size_t end = pairing->b->first + pairing->b->count;
	while (pairing->at < end && series_sent(b, pairing->at) < series_sent(a, row_a))
		pairing->at++;
	if (pairing->at == end || series_sent(b, pairing->at) != series_sent(a, row_a))
		return false;
	*ret_value = series_value(b, pairing->at);
	*ret_doubt = series_error_limit(b, pairing->at);
	return true;
}

static bool between_rows(struct pairing *pairing, size_t row_a, double *ret_value,
                         double *ret_doubt)
{
	const struct series *a = &pairing->a->series, *b = &pairing->b->series;
	size_t end = pairing->b->first + pairing->b->count;
	double t = middle(a, row_a);
	while (pairing->at + 2 < end && middle(b, pairing->at + 1) < t)
		pairing->at++;
	size_t row = pairing->at;
	if (row + 1 >= end)
		return false;
	double before = middle(b, row), after = middle(b, row + 1);
	if (!(t >= before && t <= after) || !(after > before) ||
	    after - before > (double)pairing->gap_most)
		return false;
	double first = series_value(b, row), step = series_value(b, row + 1) - first;
	if (pairing->b_turn > 0)
		step = wrap_half(step, pairing->b_turn);
	double apart = half_width(a, row_a) + fmax(half_width(b, row), half_width(b, row + 1));
	*ret_value = first + step * (t - before) / (after - before);
	*ret_doubt = fmax(series_error_limit(b, row), series_error_limit(b, row + 1)) +
	             fabs(step) * apart / (after - before);
	return true;
}

/* Between compared rows, and to the end of the span. */
static void measure_gaps(struct rows *rows)
{
	rows->gap_ns = 0;
	for (size_t i = 0; i < rows->count; i++) {
		int64_t at = series_received(&rows->series, i);
		int64_t next =
		    i + 1 < rows->count ? series_received(&rows->series, i + 1) : rows->span.to_ns;
		if (next - at > rows->gap_ns) {
			rows->gap_ns = next - at;
			rows->gap_at_ns = at;
		}
	}
}

static int compare(const struct check_input *in, struct pairing *pairing, double turn,
                   struct pairs *pairs, struct err *reterr)
{
	const struct rows *a = pairing->a;
	struct pair_row *table = arena_array(in->scratch, a->count, sizeof *table);
	double *extra = arena_array(in->scratch, a->count, sizeof *extra);
	if (!table || !extra)
		return err_set(reterr, ERR_NOMEM, "memory ran out while judging %s",
		               a->series.channel->name);
	size_t count = 0;
	for (size_t i = 0; i < a->count; i++) {
		size_t row = a->first + i;
		double value, doubt;
		if (!(pairs->together ? same_row(pairing, row, &value, &doubt)
		                      : between_rows(pairing, row, &value, &doubt)))
			continue;
		double difference = series_value(&a->series, row) - pairing->factor * value;
		table[count] = (struct pair_row){
		    series_sent(&a->series, row),
		    series_received(&a->series, row),
		    turn > 0 ? wrap_half(difference, turn) : difference,
		};
		extra[count++] = series_error_limit(&a->series, row) + fabs(pairing->factor) * doubt;
	}
	pairs->rows = *a;
	pairs->rows.first = 0;
	pairs->rows.count = count;
	pairs->rows.series = (struct series){
	    .channel = &pairs->info,
	    .rows = count,
	    .row0 = (const unsigned char *)table,
	    .stride = sizeof *table,
	    .earliest_at = offsetof(struct pair_row, sent),
	    .latest_at = offsetof(struct pair_row, received),
	    .value_at = offsetof(struct pair_row, value),
	    .block = -1,
	    .extra = extra,
	};
	measure_gaps(&pairs->rows);
	return 0;
}

static void conclude(const struct check_input *in, struct pairs *pairs, const char *other)
{
	const struct rows *rows = &pairs->rows;
	if (rows->count < PAIRS_LEAST) {
		(void)snprintf(pairs->why, sizeof pairs->why,
		               "only %zu samples of %s can be compared with %s, %d are needed: hold longer "
		               "or sample both faster",
		               rows->count, pairs->info.name, other, PAIRS_LEAST);
		return;
	}
	/* At the very begin and end the other channel has no row beside it; a gap is more. */
	int64_t before = series_received(&rows->series, 0) - rows->span.from_ns;
	pairs->usable = before <= rows_gap_limit(in, rows)
	                    ? !rows_gap_within(in, rows, 0, rows->count, rows->span.to_ns, pairs->why,
	                                       sizeof pairs->why)
	                    : false;
	if (!pairs->usable && !pairs->why[0])
		(void)snprintf(pairs->why, sizeof pairs->why,
		               "%s and %s were not both sampled in the first %.3f ms of the window",
		               pairs->info.name, other, (double)before / 1e6);
}

int pairs_take(const struct check_input *in, int a, int b, double factor, double turn,
               struct span span, struct pairs *ret_pairs, struct err *reterr)
{
	const struct channel_info *first = &in->channels[a], *second = &in->channels[b];
	struct pairs *pairs = ret_pairs;
	*pairs = (struct pairs){.info = *first};
	struct rows rows_a, rows_b;
	if (rows_take(in, a, span, &rows_a, reterr) < 0)
		return -1;
	/* The other channel from a little before to a little after. */
	struct span wide = span;
	int64_t margin = rows_a.usable ? rows_gap_limit(in, &rows_a) : 0;
	wide.from_ns -= margin;
	wide.to_ns += margin;
	if (rows_take(in, b, wide, &rows_b, reterr) < 0)
		return -1;
	if (!rows_a.usable || !rows_b.usable) {
		(void)snprintf(pairs->why, sizeof pairs->why, "%s",
		               rows_a.usable ? rows_b.why : rows_a.why);
		return 0;
	}
	double scale = factor * second->unit->scale / first->unit->scale;
	double b_turn = second->wraps;
	if (!(b_turn > 0) && turn > 0)
		b_turn = turn / fabs(scale);
	struct pairing pairing = {
	    .a = &rows_a,
	    .b = &rows_b,
	    .factor = scale,
	    .b_turn = b_turn,
	    .at = rows_b.first,
	    .gap_most = rows_gap_limit(in, &rows_b),
	};
	pairs->together = in->series[a].block == in->series[b].block && in->series[a].block >= 0;
	pairs->resolution = first->resolution + fabs(scale) * second->resolution;
	pairs->rounding = pairs->resolution / 2;
	/* The limits of the first channel are in `extra` already. */
	pairs->info.accuracy = (struct accuracy){0};
	pairs->info.resolution = pairs->resolution;
	if (compare(in, &pairing, turn, pairs, reterr) < 0)
		return -1;
	conclude(in, pairs, second->name);
	return 0;
}

void pairs_mean(const struct pairs *pairs, double *ret_mean, double *ret_expanded)
{
	struct series series = pairs->rows.series;
	series.channel = &pairs->info; /* the structure may have been copied */
	struct stretch stretch = {.series = &series, .count = pairs->rows.count};
	struct summary summary;
	summarise(&stretch, &summary);
	double limit = 0;
	for (size_t i = 0; i < pairs->rows.count; i++)
		limit += pairs->rows.series.extra[i] / (double)pairs->rows.count;
	struct budget budget = {0};
	budget_random(&budget, summary.sd / sqrt(summary.independent),
	              fmax(summary.independent - 1, 1));
	budget_other(&budget, limit / sqrt(3));
	budget_other(&budget, rounding_bias(pairs->resolution, summary.sd) / sqrt(3));
	*ret_mean = summary.mean;
	*ret_expanded = budget_expanded(&budget);
}

double pairs_largest(const struct pairs *pairs, double around, double turn, double *ret_doubt,
                     size_t *ret_row)
{
	double largest = 0, low = 0, high = 0;
	*ret_row = 0;
	for (size_t i = 0; i < pairs->rows.count; i++) {
		double value = series_value(&pairs->rows.series, i) - around;
		value = fabs(turn > 0 ? wrap_half(value, turn) : value);
		double doubt = pairs->rows.series.extra[i] + pairs->rounding;
		if (value > largest) {
			largest = value;
			*ret_row = i;
		}
		low = fmax(low, value - doubt);
		high = fmax(high, value + doubt);
	}
	*ret_doubt = fmax(high - largest, largest - low);
	return largest;
}

enum evidence evidence_of_two(const struct channel_info *a, const struct channel_info *b)
{
	return a->evidence == EVIDENCE_SELF_REPORTED || b->evidence == EVIDENCE_SELF_REPORTED
	           ? EVIDENCE_SELF_REPORTED
	           : EVIDENCE_INDEPENDENT;
}
