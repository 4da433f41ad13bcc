/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The normal and Student's distribution. The C library's erfc and lgamma are
 * the ground; quantiles are found by bisection of the distribution function:
 * slower than a table of rational approximations,
 * but with nothing to mistype, and they are asked a few times per metric.
 */
#include "statistics.h"

double normal_cdf(double x)
{
	return erfc(-x / sqrt(2)) / 2;
}

/*
 * Continued fraction of the incomplete beta function (Abramowitz and Stegun
 * 26.5.8), evaluated from the front by Lentz's method. Converges quickly for
 * x < (a + 1)/(a + b + 2).
 */
static double beta_fraction(double a, double b, double x)
{
	const double tiny = 1e-300;
	double c = 1, d = 1 - (a + b) * x / (a + 1);
	d = 1 / (fabs(d) < tiny ? tiny : d);
	double fraction = d;
	for (int m = 1; m <= 10000; m++) {
		double even = m * (b - m) * x / ((a + 2 * m - 1) * (a + 2 * m));
		d = 1 + even * d;
		c = 1 + even / c;
		d = 1 / (fabs(d) < tiny ? tiny : d);
		c = fabs(c) < tiny ? tiny : c;
		fraction *= d * c;
		double odd = -(a + m) * (a + b + m) * x / ((a + 2 * m) * (a + 2 * m + 1));
		d = 1 + odd * d;
		c = 1 + odd / c;
		d = 1 / (fabs(d) < tiny ? tiny : d);
		c = fabs(c) < tiny ? tiny : c;
		double factor = d * c;
		fraction *= factor;
		if (fabs(factor - 1) < 1e-16)
			break;
	}
	return fraction;
}

/* lgamma() stores the sign in a global; this form keeps the folder free of shared state. */
static double log_gamma(double x)
{
	int sign;
	return lgamma_r(x, &sign);
}

/* y = 1 - x is given apart: near x = 1 the difference would lose it. */
static double beta_regularised(double a, double b, double x, double y)
{
	if (x <= 0)
		return 0;
	if (y <= 0)
		return 1;
	double front = exp(log_gamma(a + b) - log_gamma(a) - log_gamma(b) + a * log(x) + b * log(y));
	if (x < (a + 1) / (a + b + 2))
		return front * beta_fraction(a, b, x) / a;
	return 1 - front * beta_fraction(b, a, y) / b;
}

double student_cdf(double t, double nu)
{
	if (isnan(t) || !(nu > 0))
		return (double)NAN;
	if (nu > 1e7)
		return normal_cdf(t);
	double t2 = t * t;
	double tail = beta_regularised(nu / 2, 0.5, nu / (nu + t2), t2 / (nu + t2)) / 2;
	return t > 0 ? 1 - tail : tail;
}

/* The quantile in the lower half by bisection: the function rises from 0 to p at `low` <= x <= 0.
 */
static double lower_quantile(double p, double nu)
{
	double low = -1;
	while (student_cdf(low, nu) > p && low > -1e300)
		low *= 2;
	double high = 0;
	for (int i = 0; i < 200 && high - low > 1e-15 * -low; i++) {
		double middle = low + (high - low) / 2;
		if (student_cdf(middle, nu) < p)
			low = middle;
		else
			high = middle;
	}
	return low + (high - low) / 2;
}

double student_quantile(double p, double nu)
{
	if (!(p > 0 && p < 1) || !(nu > 0))
		return (double)NAN;
	if (p == 0.5)
		return 0;
	return p < 0.5 ? lower_quantile(p, nu) : -lower_quantile(1 - p, nu);
}

double normal_quantile(double p)
{
	return student_quantile(p, (double)INFINITY);
}
