/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_STATISTICS_H
#define DRIVETRIAL_STATISTICS_H
/*
 * The statistics that the checks rest on. Own code: a library whose results
 * change with its version would change verdicts.
 *
 * Input is a stretch: rows [first, first + count) of a series, read in place,
 * so that a long recording needs no copy. Times are seconds from origin_ns, in
 * the middle of a row's interval; values are in the channel's unit. Angles may
 * be taken as deviations from a direction (`around`, `turn`), wrapped to half
 * a turn on either side.
 *
 * Rows must be free of faults (series_fault); NaN comes back as NaN. Pure.
 */
#include "samples.h"

struct stretch {
	const struct series *series;
	size_t first, count;
	int64_t origin_ns;
	double around; /* values are deviations from it, wrapped, where turn > 0 */
	double turn;   /* a full turn in the channel's unit; 0: values as they are */
};

double stretch_time(const struct stretch *stretch, size_t i);
double stretch_value(const struct stretch *stretch, size_t i);
/* Standard uncertainty of a row's time in s: its interval, taken as rectangular (JCGM 100 4.3.7).
 */
double stretch_time_u(const struct stretch *stretch, size_t i);

/* x to (-turn/2, turn/2]. */
double wrap_half(double x, double turn);

/* Standard normal distribution, and its quantile for p in (0, 1). */
double normal_cdf(double x);
double normal_quantile(double p);
/* Student's distribution with nu > 0 degrees of freedom (INFINITY: normal). */
double student_cdf(double t, double nu);
double student_quantile(double p, double nu);

/* Sum that keeps what rounding loses (Neumaier's form of Kahan's summation). */
struct sum {
	double total, lost;
};
void sum_add(struct sum *sum, double x);
double sum_value(const struct sum *sum);

struct summary {
	size_t n;
	double mean, sd;       /* sd with n - 1; 0 for one row */
	double lag1;           /* sum (x_i - m)(x_i+1 - m) / sum (x_i - m)^2; 0 where sd is 0 */
	double independent;    /* effective number of independent rows, 1 to n */
	double least, largest; /* of the values */
};
/* count >= 1. independent = n (1 - lag1) / (1 + lag1) for positive lag1, else n. */
void summarise(const struct stretch *stretch, struct summary *ret_summary);

/* Straight line by least squares. */
struct line {
	size_t n;
	double mean_t, mean_y, stt;        /* stt: sum (t - mean_t)^2 */
	double slope, slope_se;            /* per second; se with n - 2, as if rows were independent */
	double intercept;                  /* at t = 0 */
	double residual_sd, residual_lag1; /* of what the line leaves */
	double independent;                /* by residual_lag1 */
};
/* false: fewer than 3 rows or all at one time. */
bool line_fit(const struct stretch *stretch, struct line *ret_line);

/*
 * Proof that a stretch is steady. drift is the change over the stretch by the
 * fitted line, bound the upper end of its two-sided 95 % interval, with the
 * standard error widened by autocorrelation, plus what the resolution can
 * hide. Steady means bound < a quarter of the tolerance that matters.
 */
struct steadiness {
	struct line line;
	double duration; /* s */
	double drift, drift_se, bound;
	double noise;       /* residual sd, quantisation included */
	double independent; /* rows */
};
bool steadiness_of(const struct stretch *stretch, double resolution,
                   struct steadiness *ret_steadiness);

/* Mean direction; R is the mean resultant length, sd = sqrt(-2 ln R) in the unit of `turn`. */
struct circular {
	size_t n;
	double mean; /* in (-turn/2, turn/2]; NaN where R is 0 within rounding: no direction */
	double R, sd;
};
void circular_of(const struct stretch *stretch, double turn, struct circular *ret_circular);

/*
 * Half of the bias that rounding to steps can leave in a mean when noise of
 * standard deviation `noise` (quantisation included) lies on the value:
 * half a step without noise, falling as exp(-2 (pi sigma/step)^2), the first
 * harmonic of the rounding error.
 */
double rounding_bias(double resolution, double noise);

/*
 * A combined standard uncertainty and its expansion to 95 %. Degrees of
 * freedom by Welch-Satterthwaite (JCGM 100 G.4.1) with the systematic part
 * taken as known; k is never below 2.
 */
struct budget {
	double random_u2, nu; /* nu: of the random part */
	double other_u2;
};
void budget_random(struct budget *budget, double u, double nu);
void budget_other(struct budget *budget, double u);
double budget_u(const struct budget *budget);
double budget_expanded(const struct budget *budget);

#endif
