/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Crossings. A straight line through the few rows that noise leaves in doubt
 * was chosen over smoothing the whole series (which moves the crossing of a
 * curved signal) and over the first row beyond the level (which noise makes
 * early). The fit is that of calibration: the line is y on t, solved for t.
 */
#include "crossing.h"

#include <string.h>

enum { CURVATURE_REACH = 3 };

static double past(const struct crossing_query *query, size_t row)
{
	return query->direction * (stretch_value(&query->rows, row) - query->level);
}

static double row_earliest(const struct stretch *rows, size_t i)
{
	return (double)(series_earliest(rows->series, rows->first + i) - rows->origin_ns) / 1e9;
}

static double row_latest(const struct stretch *rows, size_t i)
{
	return (double)(series_latest(rows->series, rows->first + i) - rows->origin_ns) / 1e9;
}

void crossing_first(const struct crossing_query *query, struct crossing *ret_crossing)
{
	*ret_crossing = (struct crossing){0};
	size_t after = 0;
	while (after < query->rows.count && !(past(query, after) >= query->sure))
		after++;
	if (after == query->rows.count || after == 0)
		return;
	size_t before = after;
	do {
		if (before-- == 0)
			return;
	} while (!(past(query, before) <= -query->sure));
	crossing_between(query, before, after, ret_crossing);
}

/*
 * Second derivative around the passage by a parabola over a wider stretch, 0
 * where there are too few rows. Beside an interpolation noise is small, and
 * what it alone would give is taken off.
 */
static double curvature(const struct crossing_query *query, size_t before, size_t after)
{
	size_t reach = after - before > CURVATURE_REACH ? after - before : CURVATURE_REACH;
	if (after - before == 1)
		reach = 1;
	size_t begin = before > reach ? before - reach : 0;
	size_t end = after + reach + 1 < query->rows.count ? after + reach + 1 : query->rows.count;
	struct stretch wide = query->rows;
	wide.first += begin;
	wide.count = end - begin;
	struct parabola parabola;
	if (wide.count < 4 || !parabola_fit(&wide, &parabola))
		return 0;
	double square = parabola.reach * parabola.reach;
	double second = 2 * parabola.c / square;
	double noise = 2 * query->noise * sqrt(parabola.inverse[2][2]) / square;
	double rest = second * second - (after - before > 1 ? 0 : noise * noise);
	return rest > 0 ? copysign(sqrt(rest), second) : 0;
}

/* The straight line through rows before..after, solved for the level. False: no passage. */
static bool solve(const struct crossing_query *query, const struct stretch *part,
                  struct crossing *crossing)
{
	double mean_t = 0, mean_y = 0, stt = 0, sty = 0, n = (double)part->count;
	for (size_t i = 0; i < part->count; i++) {
		mean_t += stretch_time(part, i) / n;
		mean_y += (stretch_value(part, i) - query->level) / n;
	}
	for (size_t i = 0; i < part->count; i++) {
		double t = stretch_time(part, i) - mean_t;
		stt += t * t;
		sty += t * (stretch_value(part, i) - query->level - mean_y);
	}
	double slope = sty / stt;
	if (!(stt > 0) || !(slope * query->direction > 0))
		return false;
	double offset = -mean_y / slope;
	crossing->value = mean_t + offset;
	crossing->slope = fabs(slope);
	crossing->random_u = query->noise / fabs(slope) * sqrt(1 / n + offset * offset / stt);
	crossing->nu = query->nu;
	return crossing->value >= crossing->low && crossing->value <= crossing->high;
}

void crossing_between(const struct crossing_query *query, size_t before, size_t after,
                      struct crossing *ret_crossing)
{
	struct stretch part = query->rows;
	part.first += before;
	part.count = after - before + 1;
	*ret_crossing = (struct crossing){
	    .found = true,
	    .before = before,
	    .after = after,
	    .low = row_earliest(&query->rows, before),
	    .high = row_latest(&query->rows, after),
	};
	struct crossing *crossing = ret_crossing;
	bool clean = solve(query, &part, crossing);
	int64_t widest = 0;
	for (size_t i = 1; i < part.count; i++) {
		int64_t gap = series_received(part.series, part.first + i) -
		              series_received(part.series, part.first + i - 1);
		widest = gap > widest ? gap : widest;
	}
	if (query->gap_most > 0 && widest > query->gap_most)
		clean = false;
	if (clean && part.count > 2) {
		/* A passage takes as long as the doubt in value takes at its slope, not much longer. */
		double expected = 2 * query->sure / crossing->slope + 2e-9 * (double)widest;
		double took = stretch_time(&part, part.count - 1) - stretch_time(&part, 0);
		clean = took <= 2 * expected;
	}
	if (!clean) {
		crossing->value = crossing->low + (crossing->high - crossing->low) / 2;
		crossing->time_u = (crossing->high - crossing->low) / sqrt(12);
		crossing->slope = crossing->random_u = crossing->shape = crossing->shape_u = 0;
		return;
	}
	crossing->clean = true;
	double first = stretch_time(&part, 0), last = stretch_time(&part, part.count - 1);
	double bend = query->direction * curvature(query, before, after);
	/* Interpolation: y'' (t - t0)(t1 - t)/2. A line through many: y'' length^2 / 24 at its middle.
	 */
	double shape = part.count == 2
	                   ? bend / 2 * fabs((crossing->value - first) * (last - crossing->value))
	                   : bend * (last - first) * (last - first) / 24;
	crossing->shape = shape / crossing->slope;
	crossing->shape_u = fabs(crossing->shape) / sqrt(3);
	double u_before = stretch_time_u(&part, 0), u_after = stretch_time_u(&part, part.count - 1);
	crossing->time_u = u_before > u_after ? u_before : u_after;
}

struct time_between time_between(double a_low, double a_high, double b_low, double b_high)
{
	double a_width = a_high - a_low, b_width = b_high - b_low;
	return (struct time_between){
	    .low = b_low - a_high,
	    .high = b_high - a_low,
	    .value = (b_low + b_high) / 2 - (a_low + a_high) / 2,
	    .u = sqrt((a_width * a_width + b_width * b_width) / 12),
	};
}

/* Inverse of a symmetric positive matrix by cofactors; false where it has none. */
static bool invert(const double m[3][3], double ret[3][3])
{
	for (int i = 0; i < 3; i++)
		for (int j = 0; j < 3; j++) {
			int a = (j + 1) % 3, b = (j + 2) % 3, c = (i + 1) % 3, d = (i + 2) % 3;
			ret[i][j] = m[a][c] * m[b][d] - m[a][d] * m[b][c];
		}
	double determinant = m[0][0] * ret[0][0] + m[0][1] * ret[1][0] + m[0][2] * ret[2][0];
	if (!(fabs(determinant) > 1e-12 * m[0][0] * m[1][1] * m[2][2]))
		return false;
	for (int i = 0; i < 3; i++)
		for (int j = 0; j < 3; j++)
			ret[i][j] /= determinant;
	return true;
}

bool parabola_fit(const struct stretch *stretch, struct parabola *ret_parabola)
{
	size_t n = stretch->count;
	if (n < 3)
		return false;
	double first = stretch_time(stretch, 0), last = stretch_time(stretch, n - 1);
	double centre = (first + last) / 2, reach = (last - first) / 2;
	if (!(reach > 0))
		return false;
	double anchor = stretch_value(stretch, n / 2); /* keeps the sums small */
	double m[3][3] = {{0}}, right[3] = {0};
	for (size_t i = 0; i < n; i++) {
		double x = (stretch_time(stretch, i) - centre) / reach;
		double y = stretch_value(stretch, i) - anchor;
		const double power[3] = {1, x, x * x};
		for (int r = 0; r < 3; r++) {
			right[r] += power[r] * y;
			for (int k = 0; k < 3; k++)
				m[r][k] += power[r] * power[k];
		}
	}
	*ret_parabola = (struct parabola){.centre = centre, .reach = reach};
	if (!invert((const double(*)[3])m, ret_parabola->inverse))
		return false;
	double solution[3] = {0};
	for (int r = 0; r < 3; r++)
		for (int k = 0; k < 3; k++)
			solution[r] += ret_parabola->inverse[r][k] * right[k];
	ret_parabola->a = anchor + solution[0];
	ret_parabola->b = solution[1];
	ret_parabola->c = solution[2];
	return true;
}

double parabola_value(const struct parabola *parabola, double x, double *ret_sd)
{
	const double power[3] = {1, x, x * x};
	double variance = 0;
	for (int r = 0; r < 3; r++)
		for (int k = 0; k < 3; k++)
			variance += power[r] * power[k] * parabola->inverse[r][k];
	*ret_sd = sqrt(variance > 0 ? variance : 0);
	return parabola->a + parabola->b * x + parabola->c * x * x;
}
