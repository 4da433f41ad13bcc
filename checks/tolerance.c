/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Both factors hang on the distribution of s / sigma, which is chi over the
 * root of its degrees of freedom; integrals over its density, by Simpson's
 * rule, give the noncentral t and the chi-square distribution alike. Series for
 * the noncentral t were rejected: they lose their digits for large n.
 */
#include "tolerance.h"

#include <math.h>

#include "statistics.h"

enum { PARTS = 2000 };

/* Logarithm of the density of u = s / sigma with nu degrees of freedom. */
static double log_density(double u, double nu)
{
	int sign;
	double half = nu / 2;
	return log(2) + half * log(half) - lgamma_r(half, &sign) + (nu - 1) * log(u) - half * u * u;
}

/* Integral from 0 to `to` of density(u) * Phi(t u - delta); without a weight where t is NaN. */
static double integrate(double nu, double to, double t, double delta)
{
	/* Beyond ten standard deviations of u there is nothing left. */
	double spread = 10 / sqrt(2 * nu), from = fmax(1e-12, 1 - spread);
	double end = fmin(to, 1 + spread + 10 / nu);
	if (nu < 60)
		from = 1e-12;
	if (!(end > from))
		return 0;
	double h = (end - from) / PARTS, sum = 0;
	for (int i = 0; i <= PARTS; i++) {
		double u = from + h * i, y = exp(log_density(u, nu));
		if (!isnan(t))
			y *= normal_cdf(t * u - delta);
		sum += y * (i == 0 || i == PARTS ? 1 : i % 2 ? 4 : 2);
	}
	return sum * h / 3;
}

double tolerance_factor_one_sided(size_t n, double coverage, double confidence)
{
	double root = sqrt((double)n), nu = (double)n - 1;
	double delta = normal_quantile(coverage) * root;
	double low = 0, high = 1;
	while (integrate(nu, (double)INFINITY, high * root, delta) < confidence && high < 1e6)
		high *= 2;
	for (int i = 0; i < 60; i++) {
		double middle = (low + high) / 2;
		if (integrate(nu, (double)INFINITY, middle * root, delta) < confidence)
			low = middle;
		else
			high = middle;
	}
	return (low + high) / 2;
}

double tolerance_factor_two_sided(size_t n, double coverage, double confidence)
{
	double nu = (double)n - 1, low = 0, high = 1;
	/* The lower quantile of chi-square / nu = u^2 at 1 - confidence, below 1. */
	for (int i = 0; i < 60; i++) {
		double middle = (low + high) / 2;
		if (integrate(nu, middle, (double)NAN, 0) < 1 - confidence)
			low = middle;
		else
			high = middle;
	}
	double u = (low + high) / 2;
	return normal_quantile((1 + coverage) / 2) * sqrt(1 + 1 / (double)n) / u;
}

double binomial_at_least(size_t n, size_t x, double p)
{
	double term = pow(1 - p, (double)n), below = 0;
	for (size_t i = 0; i < x; i++) {
		below += term;
		term *= (double)(n - i) / (double)(i + 1) * p / (1 - p);
	}
	return fmax(0, 1 - below);
}
