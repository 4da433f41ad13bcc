/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_TOLERANCE_H
#define DRIVETRIAL_TOLERANCE_H
/*
 * Tolerance intervals of a normal population: with a stated confidence, at
 * least a stated share of all that the population will ever give lies in
 * mean +- k s (two-sided), or below mean + k s (one-sided), mean and s being
 * those of n observations.
 *
 * One-sided: exact, k = t'(confidence; n - 1, z(coverage) sqrt n) / sqrt n with
 * the quantile of the noncentral t distribution. Two-sided: Howe's formula,
 * J. American Statistical Association 64 (1969) 610-620, as in the NIST
 * e-Handbook 7.2.6.3 (both from memory). Pure.
 */
#include <stddef.h>

/* n >= 2; shares between 0 and 1. */
double tolerance_factor_one_sided(size_t n, double coverage, double confidence);
double tolerance_factor_two_sided(size_t n, double coverage, double confidence);

/* P(X >= x) of n trials of probability p each. */
double binomial_at_least(size_t n, size_t x, double p);

#endif
