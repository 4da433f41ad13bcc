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

double stretch_time(const struct stretch *stretch, size_t i)
{
	int64_t earliest = series_earliest(stretch->series, stretch->first + i) - stretch->origin_ns;
	int64_t latest = series_latest(stretch->series, stretch->first + i) - stretch->origin_ns;
	return ((double)earliest + (double)latest) / 2e9;
}

double stretch_value(const struct stretch *stretch, size_t i)
{
	double value = series_value(stretch->series, stretch->first + i);
	return stretch->turn > 0 ? wrap_half(value - stretch->around, stretch->turn) : value;
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
 * Sums over long stretches: plain sums of short groups, which then go into a
 * compensated one. Short stretches are compensated row by row.
 */
struct pile {
	struct sum sum;
	double plain;
	int count, group;
};

enum { LONG_STRETCH = 4096, GROUP = 64 };

static struct pile pile_of(size_t n)
{
	return (struct pile){.group = n < LONG_STRETCH ? 1 : GROUP};
}

static inline void pile_add(struct pile *pile, double x)
{
	pile->plain += x;
	if (++pile->count < pile->group)
		return;
	sum_add(&pile->sum, pile->plain);
	pile->plain = 0;
	pile->count = 0;
}

static double pile_value(const struct pile *pile)
{
	struct sum sum = pile->sum;
	sum_add(&sum, pile->plain);
	return sum_value(&sum);
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
	struct pile sum = pile_of(n);
	double least = (double)INFINITY, largest = -(double)INFINITY;
	for (size_t i = 0; i < n; i++) {
		double y = stretch_value(stretch, i);
		pile_add(&sum, y);
		least = y < least ? y : least;
		largest = y > largest ? y : largest;
	}
	double mean = pile_value(&sum) / (double)n;
	struct pile rest = pile_of(n), squares = pile_of(n), products = pile_of(n);
	double before = 0;
	for (size_t i = 0; i < n; i++) {
		double d = stretch_value(stretch, i) - mean;
		pile_add(&rest, d);
		pile_add(&squares, d * d);
		if (i > 0)
			pile_add(&products, before * d);
		before = d;
	}
	/* The mean of the deviations is what rounding of the mean left out. */
	double correction = pile_value(&rest) / (double)n;
	double ss = pile_value(&squares) - (double)n * correction * correction;
	if (!(ss > 0))
		ss = isnan(ss) ? ss : 0;
	*ret_summary = (struct summary){
	    .n = n,
	    .mean = mean + correction,
	    .sd = n > 1 ? sqrt(ss / (double)(n - 1)) : 0,
	    .lag1 = ss > 0 ? pile_value(&products) / ss : 0,
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
	struct pile sum_t = pile_of(n), sum_y = pile_of(n);
	for (size_t i = 0; i < n; i++) {
		pile_add(&sum_t, stretch_time(stretch, i));
		pile_add(&sum_y, stretch_value(stretch, i));
	}
	double mean_t = pile_value(&sum_t) / (double)n, mean_y = pile_value(&sum_y) / (double)n;
	struct pile tt = pile_of(n), ty = pile_of(n);
	for (size_t i = 0; i < n; i++) {
		double t = stretch_time(stretch, i) - mean_t;
		pile_add(&tt, t * t);
		pile_add(&ty, t * (stretch_value(stretch, i) - mean_y));
	}
	double stt = pile_value(&tt);
	if (!(stt > 0))
		return false;
	double slope = pile_value(&ty) / stt;
	struct pile squares = pile_of(n), products = pile_of(n);
	double before = 0;
	for (size_t i = 0; i < n; i++) {
		double t = stretch_time(stretch, i) - mean_t;
		double rest = stretch_value(stretch, i) - mean_y - slope * t;
		pile_add(&squares, rest * rest);
		if (i > 0)
			pile_add(&products, before * rest);
		before = rest;
	}
	double ss = pile_value(&squares);
	*ret_line = (struct line){
	    .n = n,
	    .mean_t = mean_t,
	    .mean_y = mean_y,
	    .stt = stt,
	    .slope = slope,
	    .slope_se = sqrt(ss / (double)(n - 2) / stt),
	    .intercept = mean_y - slope * mean_t,
	    .residual_sd = sqrt(ss / (double)(n - 2)),
	    .residual_lag1 = ss > 0 ? pile_value(&products) / ss : 0,
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
