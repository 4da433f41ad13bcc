/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Crossing times and settling of a step response. Excursions are in
 * excursion.c.
 *
 * Settling counts from the command to the last entry into the band around the
 * final value, as control engineering does; IEEE Std 181 counts from the 50 %
 * crossing instead. Rows that noise puts near the edge of the band are neither
 * surely inside nor surely outside: the last row surely outside bounds the
 * time from below, the first of the rows that all are surely inside from
 * above. Taking the last value outside the band was rejected: with noise that
 * is the last unlucky sample, with few samples the last lucky one.
 */
#include "response.h"

#include <stdio.h>

static struct crossing_query query_at(const struct response *response, double level, double level_u,
                                      int direction)
{
	return (struct crossing_query){
	    .rows = response->rows,
	    .level = level,
	    .direction = direction,
	    .noise = response->noise,
	    .nu = response->nu,
	    .sure = 3 * response->noise + 2 * level_u,
	    .gap_most = response->gap_most,
	};
}

static double level_at(const struct response *response, double part, double *ret_u)
{
	*ret_u = hypot((1 - part) * response->initial_u, part * response->final_u);
	return response->initial + part * (response->final - response->initial);
}

static void from_guaranteed(struct measured *ret, double low, double value, double high)
{
	ret->known = true;
	ret->low = low > 0 ? low : 0;
	ret->high = high;
	ret->value = value > ret->low ? value : ret->low;
	ret->coverage = 0.95; /* "surely" was said of noisy values */
}

/*
 * value +- expanded uncertainty, cut to what is guaranteed. earlier and later:
 * how much curvature may have shifted it; the value itself is not corrected,
 * so that it stays what plain interpolation gives.
 */
static void from_budget(struct measured *ret, double low, double value, double high,
                        const struct budget *budget, double earlier, double later)
{
	double expanded = budget_expanded(budget);
	from_guaranteed(ret, fmax(low, value - expanded - earlier), value,
	                fmin(high, value + expanded + later));
}

static void add_crossing(struct budget *budget, const struct crossing *crossing)
{
	budget_random(budget, crossing->random_u, crossing->nu);
	budget_other(budget, crossing->time_u);
	budget_other(budget, crossing->shape_u);
}

static void from_mark(const struct response *response, const struct crossing *crossing,
                      double level_u, struct measured *ret)
{
	double half = response->mark_half;
	ret->at_low = crossing->low;
	ret->at_high = crossing->high;
	if (!crossing->clean) {
		from_guaranteed(ret, crossing->low - half, crossing->value, crossing->high + half);
		return;
	}
	struct budget budget = {0};
	add_crossing(&budget, crossing);
	budget_other(&budget, level_u / crossing->slope);
	budget_other(&budget, half / sqrt(3));
	from_budget(ret, crossing->low - half, crossing->value, crossing->high + half, &budget,
	            fmax(0, -crossing->shape), fmax(0, crossing->shape));
}

static bool crossing_at(const struct response *response, double part, double *ret_u,
                        double *ret_level, struct crossing *ret_crossing, struct measured *ret)
{
	*ret_level = level_at(response, part, ret_u);
	struct crossing_query query = query_at(response, *ret_level, *ret_u, response->direction);
	crossing_first(&query, ret_crossing);
	if (!ret_crossing->found)
		(void)snprintf(
		    ret->why, sizeof ret->why,
		    "no passage of %.3g %% of the step stands out of the noise (%.3g of a step of %.3g)",
		    100 * part, response->noise, fabs(response->final - response->initial));
	return ret_crossing->found;
}

void response_pace(struct response *response)
{
	struct measured unused;
	struct crossing low, high;
	double level_u, level;
	response->rise = response->busy_until = 0;
	if (!crossing_at(response, 0.1, &level_u, &level, &low, &unused) ||
	    !crossing_at(response, 0.9, &level_u, &level, &high, &unused))
		return;
	response->rise = fmax(high.high - low.low + high.low - low.high, 1e-9) / 2;
	response->busy_until = high.high + 3 * (high.high - low.low);
	int64_t surely = (int64_t)((high.low - low.high) * 1e9);
	if (surely / 2 < response->gap_most)
		response->gap_most = surely / 2 > 1 ? surely / 2 : 1;
}

void response_crossing(const struct response *response, double part, struct measured *ret)
{
	*ret = (struct measured){0};
	struct crossing crossing;
	double level_u;
	if (crossing_at(response, part, &level_u, &ret->level, &crossing, ret))
		from_mark(response, &crossing, level_u, ret);
}

void response_transition(const struct response *response, double from, double to,
                         struct measured *ret)
{
	*ret = (struct measured){0};
	struct crossing a, b;
	double level_u;
	if (!crossing_at(response, from, &level_u, &ret->level, &a, ret) ||
	    !crossing_at(response, to, &level_u, &ret->level, &b, ret))
		return;
	struct time_between between = time_between(a.low, a.high, b.low, b.high);
	ret->at_low = a.value;
	ret->at_high = b.value;
	struct budget budget = {0};
	add_crossing(&budget, &a);
	add_crossing(&budget, &b);
	/* Both levels hang on the same two state levels: sensitivities first, then squares. */
	double slope_a = a.clean ? a.slope : (double)INFINITY,
	       slope_b = b.clean ? b.slope : (double)INFINITY;
	budget_other(&budget, ((1 - to) / slope_b - (1 - from) / slope_a) * response->initial_u);
	budget_other(&budget, (to / slope_b - from / slope_a) * response->final_u);
	from_budget(ret, between.low, b.value - a.value, between.high, &budget,
	            fmax(0, a.shape) + fmax(0, -b.shape), fmax(0, -a.shape) + fmax(0, b.shape));
}

/* Deviation from the final value, averaged over 2 m + 1 rows (fewer at the ends). */
struct smooth {
	const struct response *response;
	size_t half;
	size_t begin, end; /* rows in the sum */
	double sum;
};

static double deviation(const struct response *response, size_t row)
{
	return stretch_value(&response->rows, row) - response->final;
}

/* Asked for rows in descending order. */
static double smooth_down(struct smooth *smooth, size_t row)
{
	size_t count = smooth->response->rows.count;
	size_t begin = row > smooth->half ? row - smooth->half : 0;
	size_t end = row + smooth->half + 1 < count ? row + smooth->half + 1 : count;
	if (smooth->half == 0)
		return deviation(smooth->response, row);
	while (smooth->begin > begin)
		smooth->sum += deviation(smooth->response, --smooth->begin);
	while (smooth->end > end)
		smooth->sum -= deviation(smooth->response, --smooth->end);
	return smooth->sum / (double)(end - begin);
}

struct settling {
	double band, edge_u; /* channel's unit */
	double sure;
	size_t half;
	bool outside_found, doubt_found;
	size_t outside, doubt; /* last row surely outside; last row not surely inside */
	int side;              /* of the last row surely outside */
};

/* Whether no value of the rows [begin, end) is further than `reach` from the final one. */
static bool surely_within(const struct response *response, size_t begin, size_t end, double reach)
{
	const struct extents *extents = &response->extents;
	for (size_t block = begin / extents->rows; block * extents->rows < end; block++)
		if (extents->most[block] - response->final > reach ||
		    response->final - extents->least[block] > reach)
			return false;
	return true;
}

/*
 * How many rows down from `row` (itself included) surely stay within `reach`,
 * averaged over `half` rows on either side: whole blocks, 0 where none.
 */
static size_t rows_within(const struct response *response, size_t row, size_t half, double reach)
{
	const struct extents *extents = &response->extents;
	if (extents->blocks == 0 || (row + 1) % extents->rows != 0 || !(reach > 0))
		return 0;
	size_t begin = row + 1 - extents->rows, count = response->rows.count;
	size_t from = begin > half ? begin - half : 0;
	size_t to = row + half + 1 < count ? row + half + 1 : count;
	return surely_within(response, from, to, reach) ? extents->rows : 0;
}

static void search_settling(const struct response *response, struct settling *settling)
{
	size_t count = response->rows.count;
	double sigma = response->noise;
	/* As many rows averaged as make the noise a twelfth of the band. */
	double wanted = 144 * sigma * sigma / (settling->band * settling->band);
	wanted /= response->independent > 0 ? response->independent : 1;
	double most = (double)count / 40;
	settling->half = wanted > 1 ? (size_t)fmin(ceil((wanted - 1) / 2), most) : 0;
	double averaged = (double)(2 * settling->half + 1) * response->independent;
	double sigma_row = averaged > 1 && settling->half > 0 ? sigma / sqrt(averaged) : sigma;
	settling->sure = 3 * sigma_row + 2 * settling->edge_u;
	struct smooth smooth = {response, settling->half, count, count, 0};
	for (size_t row = count; row-- > 0;) {
		size_t skip = rows_within(response, row, settling->half, settling->band - settling->sure);
		if (skip > 0) {
			row -= skip - 1;
			smooth.begin = row + settling->half < count ? row + settling->half : count;
			smooth.end = smooth.begin;
			smooth.sum = 0;
			continue;
		}
		double d = smooth_down(&smooth, row);
		if (!settling->doubt_found && fabs(d) > settling->band - settling->sure) {
			settling->doubt_found = true;
			settling->doubt = row;
		}
		if (fabs(d) > settling->band + settling->sure) {
			settling->outside_found = true;
			settling->outside = row;
			settling->side = d > 0 ? 1 : -1;
			return;
		}
	}
}

/* Where the plain values last leave the band: the value where no interval is better. */
static double last_exit(const struct response *response, double band, double low, double high)
{
	size_t row = response->rows.count;
	while (row-- > 0) {
		size_t skip = rows_within(response, row, 0, band);
		if (skip > 0)
			row -= skip - 1;
		else if (fabs(deviation(response, row)) > band)
			break;
	}
	if (row == SIZE_MAX || row + 1 >= response->rows.count)
		return low + (high - low) / 2;
	double t = (stretch_time(&response->rows, row) + stretch_time(&response->rows, row + 1)) / 2;
	return fmin(fmax(t, low), high);
}

static void never_settled(const struct response *response, const struct settling *settling,
                          struct measured *ret)
{
	const struct stretch *rows = &response->rows;
	double first = 0, last = stretch_time(rows, rows->count - 1);
	double low = 0;
	double width = 2 * (settling->band + settling->edge_u * 2 + response->error_limit);
	size_t spread = response_unsettled(rows, width);
	if (settling->outside_found)
		low = (double)(series_earliest(rows->series, rows->first + settling->outside) -
		               rows->origin_ns) /
		      1e9;
	if (spread != SIZE_MAX)
		low = fmax(low, stretch_time(rows, spread) - 2 * stretch_time_u(rows, spread));
	ret->known = true;
	ret->low = fmax(low - response->mark_half, 0);
	ret->high = (double)INFINITY;
	bool proven = low > first + 0.8 * (last - first);
	ret->value = proven ? (double)INFINITY : (double)NAN;
	ret->coverage = 0.95;
	ret->at_low = low;
	ret->at_high = last;
	(void)snprintf(ret->why, sizeof ret->why,
	               proven ? "it had not settled when the samples ended, %.4g s after the command"
	                      : "noise leaves open whether it had settled when the samples ended, %.4g "
	                        "s after the command",
	               last);
}

/* s: the end of the last gap in which the answer may have left the band unseen; 0: there is none.
 */
static double hidden_until(const struct response *response)
{
	const struct stretch *rows = &response->rows;
	double end = 0;
	for (size_t row = 0; row + 1 < rows->count; row++) {
		size_t at = rows->first + row;
		if (stretch_time(rows, row) > response->busy_until)
			break;
		if (series_received(rows->series, at + 1) - series_received(rows->series, at) >
		    response->gap_most)
			end = (double)(series_latest(rows->series, at + 1) - rows->origin_ns) / 1e9;
	}
	return end;
}

static void settle(const struct response *response, double band, struct measured *ret);

void response_settling(const struct response *response, double band, struct measured *ret)
{
	settle(response, band, ret);
	double hidden = hidden_until(response) + response->mark_half;
	if (!ret->known || !(hidden > ret->high))
		return;
	ret->high = hidden;
	ret->at_high = hidden;
	(void)snprintf(
	    ret->why, sizeof ret->why,
	    "widened to %.4g s: samples are missing until then, and the answer may have left "
	    "the band",
	    hidden);
}

static void settle(const struct response *response, double band, struct measured *ret)
{
	*ret = (struct measured){.level = response->final};
	struct settling settling = {.band = band * response->hundred};
	double part = response->of_step ? band : 0;
	settling.edge_u = hypot((1 + part) * response->final_u, part * response->initial_u);
	search_settling(response, &settling);
	size_t count = response->rows.count;
	if (!settling.doubt_found) { /* it never left the band */
		from_guaranteed(ret, 0, 0, response->mark_half * 2);
		return;
	}
	if (settling.doubt + 1 >= count) {
		never_settled(response, &settling, ret);
		return;
	}
	size_t before = settling.outside_found ? settling.outside : 0;
	struct crossing_query query = query_at(
	    response, response->final + settling.side * settling.band, settling.edge_u, -settling.side);
	query.sure = fmax(query.sure, settling.sure);
	struct crossing crossing;
	crossing_between(&query, before, settling.doubt + 1, &crossing);
	if (settling.half > 0) { /* the averaged rows reach further than the row's own interval */
		double reach =
		    (double)settling.half *
		    (stretch_time(&response->rows, count - 1) - stretch_time(&response->rows, 0)) /
		    (double)(count - 1);
		crossing.low -= reach;
		crossing.high += reach;
	}
	if (!settling.outside_found)
		crossing.clean = false;
	if (!crossing.clean)
		crossing.value = last_exit(response, settling.band, crossing.low, crossing.high);
	ret->level = query.level;
	from_mark(response, &crossing, settling.edge_u, ret);
}

double noise_by_differences(const struct stretch *rows)
{
	if (rows->count < 4)
		return 0;
	struct sum squares = {0};
	for (size_t i = 1; i + 1 < rows->count; i++) {
		double second =
		    stretch_value(rows, i - 1) - 2 * stretch_value(rows, i) + stretch_value(rows, i + 1);
		sum_add(&squares, second * second);
	}
	return sqrt(sum_value(&squares) / 6 / (double)(rows->count - 2));
}

size_t response_unsettled(const struct stretch *rows, double width)
{
	double noise = noise_by_differences(rows);
	double least = (double)INFINITY, largest = -(double)INFINITY;
	for (size_t row = rows->count; row-- > 0;) {
		double y = stretch_value(rows, row);
		least = fmin(least, y);
		largest = fmax(largest, y);
		/* Extremes of many rows: five standard deviations on either side. */
		if (largest - least > width + 10 * noise)
			return row;
	}
	return SIZE_MAX;
}
