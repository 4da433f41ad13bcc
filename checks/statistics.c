/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Means, spreads and lines over rows in place, always in two passes: the mean
 * first, then deviations from it. One pass with sums of squares was rejected
 * because it loses the spread of values that lie far from zero; running
 * updates would do, but two passes of plain sums are easier to check.
 *
 * Autocorrelation is modelled as first order: positive lag-1 correlation makes
 * fewer independent rows, negative is ignored, which never claims too much.
 */
#include "statistics.h"

#define PI 3.14159265358979323846

double wrap_half(double x, double turn)
{
	double wrapped = remainder(x, turn);
	return wrapped <= -turn / 2 ? wrapped + turn : wrapped;
}

static inline double time_at(const struct stretch *stretch, size_t i)
{
	int64_t earliest = series_earliest(stretch->series, stretch->first + i) - stretch->origin_ns;
	int64_t latest = series_latest(stretch->series, stretch->first + i) - stretch->origin_ns;
	return ((double)earliest + (double)latest) / 2e9;
}

static inline double value_at(const struct stretch *stretch, size_t i)
{
	double value = series_value(stretch->series, stretch->first + i);
	return stretch->turn > 0 ? wrap_half(value - stretch->around, stretch->turn) : value;
}

double stretch_time(const struct stretch *stretch, size_t i)
{
	return time_at(stretch, i);
}

double stretch_value(const struct stretch *stretch, size_t i)
{
	return value_at(stretch, i);
}

double stretch_time_u(const struct stretch *stretch, size_t i)
{
	size_t row = stretch->first + i;
	double width =
	    (double)(series_latest(stretch->series, row) - series_earliest(stretch->series, row)) / 1e9;
	return width / sqrt(12);
}

void sum_add(struct sum *sum, double x)
{
	double total = sum->total + x;
	if (fabs(sum->total) >= fabs(x))
		sum->lost += (sum->total - total) + x;
	else
		sum->lost += (x - total) + sum->total;
	sum->total = total;
}

double sum_value(const struct sum *sum)
{
	return sum->total + sum->lost;
}

/*
 * Sums over long stretches: plain sums of short groups of rows, which then go
 * into compensated ones. Short stretches are compensated row by row.
 */
enum { LONG_STRETCH = 4096, GROUP = 64 };

static size_t group_end(size_t begin, size_t n)
{
	size_t end = begin + (n < LONG_STRETCH ? 1 : GROUP);
	return end < n ? end : n;
}

static double independent_rows(size_t n, double lag1)
{
	double rows = (double)n;
	if (!(lag1 > 0))
		return rows;
	double independent = rows * (1 - lag1) / (1 + lag1);
	return independent < 1 ? 1 : independent;
}

void summarise(const struct stretch *stretch, struct summary *ret_summary)
{
	size_t n = stretch->count;
	struct sum sum = {0};
	double least = (double)INFINITY, largest = -(double)INFINITY;
	for (size_t begin = 0, end; begin < n; begin = end) {
		double part = 0;
		end = group_end(begin, n);
		for (size_t i = begin; i < end; i++) {
			double y = value_at(stretch, i);
			part += y;
			least = y < least ? y : least;
			largest = y > largest ? y : largest;
		}
		sum_add(&sum, part);
	}
	double mean = sum_value(&sum) / (double)n;
	struct sum rest = {0}, squares = {0}, products = {0};
	double before = 0;
	for (size_t begin = 0, end; begin < n; begin = end) {
		double rest_part = 0, squares_part = 0, products_part = 0;
		end = group_end(begin, n);
		for (size_t i = begin; i < end; i++) {
			double d = value_at(stretch, i) - mean;
			rest_part += d;
			squares_part += d * d;
			products_part += before * d; /* of the first row with 0 */
			before = d;
		}
		sum_add(&rest, rest_part);
		sum_add(&squares, squares_part);
		sum_add(&products, products_part);
	}
	/* The mean of the deviations is what rounding of the mean left out. */
	double correction = sum_value(&rest) / (double)n;
	double ss = sum_value(&squares) - (double)n * correction * correction;
	if (!(ss > 0))
		ss = isnan(ss) ? ss : 0;
	*ret_summary = (struct summary){
	    .n = n,
	    .mean = mean + correction,
	    .sd = n > 1 ? sqrt(ss / (double)(n - 1)) : 0,
	    .lag1 = ss > 0 ? sum_value(&products) / ss : 0,
	    .least = least,
	    .largest = largest,
	};
	ret_summary->independent = independent_rows(n, ret_summary->lag1);
}

bool line_fit(const struct stretch *stretch, struct line *ret_line)
{
	size_t n = stretch->count;
	if (n < 3)
		return false;
	struct sum sum_t = {0}, sum_y = {0};
	for (size_t begin = 0, end; begin < n; begin = end) {
		double t_part = 0, y_part = 0;
		end = group_end(begin, n);
		for (size_t i = begin; i < end; i++) {
			t_part += time_at(stretch, i);
			y_part += value_at(stretch, i);
		}
		sum_add(&sum_t, t_part);
		sum_add(&sum_y, y_part);
	}
	double mean_t = sum_value(&sum_t) / (double)n, mean_y = sum_value(&sum_y) / (double)n;
	struct sum tt = {0}, ty = {0};
	for (size_t begin = 0, end; begin < n; begin = end) {
		double tt_part = 0, ty_part = 0;
		end = group_end(begin, n);
		for (size_t i = begin; i < end; i++) {
			double t = time_at(stretch, i) - mean_t;
			tt_part += t * t;
			ty_part += t * (value_at(stretch, i) - mean_y);
		}
		sum_add(&tt, tt_part);
		sum_add(&ty, ty_part);
	}
	double stt = sum_value(&tt);
	if (!(stt > 0))
		return false;
	double slope = sum_value(&ty) / stt;
	struct sum squares = {0}, products = {0};
	double before = 0;
	for (size_t begin = 0, end; begin < n; begin = end) {
		double squares_part = 0, products_part = 0;
		end = group_end(begin, n);
		for (size_t i = begin; i < end; i++) {
			double t = time_at(stretch, i) - mean_t;
			double rest = value_at(stretch, i) - mean_y - slope * t;
			squares_part += rest * rest;
			products_part += before * rest;
			before = rest;
		}
		sum_add(&squares, squares_part);
		sum_add(&products, products_part);
	}
	double ss = sum_value(&squares);
	*ret_line = (struct line){
	    .n = n,
	    .mean_t = mean_t,
	    .mean_y = mean_y,
	    .stt = stt,
	    .slope = slope,
	    .slope_se = sqrt(ss / (double)(n - 2) / stt),
	    .intercept = mean_y - slope * mean_t,
	    .residual_sd = sqrt(ss / (double)(n - 2)),
	    .residual_lag1 = ss > 0 ? sum_value(&products) / ss : 0,
	};
	ret_line->independent = independent_rows(n, ret_line->residual_lag1);
	return true;
}

double rounding_bias(double resolution, double noise)
{
	if (!(resolution > 0))
		return 0;
	double sigma2 = noise * noise - resolution * resolution / 12;
	if (sigma2 < 0)
		sigma2 = 0;
	return resolution / 2 * exp(-2 * PI * PI * sigma2 / (resolution * resolution));
}

bool steadiness_of(const struct stretch *stretch, double resolution,
                   struct steadiness *ret_steadiness)
{
	struct line line;
	if (!line_fit(stretch, &line))
		return false;
	double duration = stretch_time(stretch, stretch->count - 1) - stretch_time(stretch, 0);
	double nu = line.independent - 2;
	if (nu < 1)
		nu = 1;
	double se = line.slope_se * sqrt((double)line.n / line.independent) * duration;
	double drift = fabs(line.slope) * duration;
	*ret_steadiness = (struct steadiness){
	    .line = line,
	    .duration = duration,
	    .drift = drift,
	    .drift_se = se,
	    .bound = drift + student_quantile(0.975, nu) * se +
	             2 * rounding_bias(resolution, line.residual_sd),
	    .noise = line.residual_sd,
	    .independent = line.independent,
	};
	return true;
}

void circular_of(const struct stretch *stretch, double turn, struct circular *ret_circular)
{
	struct sum sum_c = {0}, sum_s = {0};
	size_t n = stretch->count;
	double radian = 2 * PI / turn;
	for (size_t i = 0; i < n; i++) {
		double angle = series_value(stretch->series, stretch->first + i) * radian;
		sum_add(&sum_c, cos(angle));
		sum_add(&sum_s, sin(angle));
	}
	double c = sum_value(&sum_c) / (double)n, s = sum_value(&sum_s) / (double)n;
	double R = hypot(c, s);
	R = R > 1 ? 1 : R;
	*ret_circular = (struct circular){
	    .n = n,
	    .mean = R > 1e-9 ? wrap_half(atan2(s, c) / radian, turn) : (double)NAN,
	    .R = R,
	    .sd = R < 1 ? sqrt(-2 * log(R)) / radian : 0,
	};
}

void budget_random(struct budget *budget, double u, double nu)
{
	double u2 = u * u;
	if (!(u2 > 0))
		return;
	double share = budget->random_u2 > 0 ? budget->random_u2 * budget->random_u2 / budget->nu : 0;
	budget->random_u2 += u2;
	budget->nu = budget->random_u2 * budget->random_u2 / (share + u2 * u2 / (nu < 1 ? 1 : nu));
}

void budget_other(struct budget *budget, double u)
{
	budget->other_u2 += u * u;
}

double budget_u(const struct budget *budget)
{
	return sqrt(budget->random_u2 + budget->other_u2);
}

double budget_expanded(const struct budget *budget)
{
	double k = 2;
	if (budget->random_u2 > 0) {
		double ratio = (budget->random_u2 + budget->other_u2) / budget->random_u2;
		double t = student_quantile(0.975, budget->nu * ratio * ratio);
		k = t > 2 ? t : 2;
	}
	return k * budget_u(budget);
}
