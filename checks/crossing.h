/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_CROSSING_H
#define DRIVETRIAL_CROSSING_H
/*
 * When a value crossed a level, from rows that were each true at some instant
 * of an interval.
 *
 * Two statements are made of each crossing. The guaranteed one: it lies
 * between the begin of the last row surely before it and the end of the first
 * row surely after it. And, where the values between these two rows look like
 * one passage, the estimated one: the instant at which the straight line
 * through them meets the level, with a standard uncertainty from noise, from
 * the rows' intervals, and from the curvature that a straight line neglects.
 * With no row between the two, the straight line is linear interpolation.
 *
 * Times are seconds from the stretch's origin. Pure.
 */
#include "statistics.h"

struct crossing_query {
	struct stretch rows;
	double level;
	int direction; /* +1: from below to above; -1: from above to below */
	double noise;  /* sd of a row's value, quantisation included; nu degrees of freedom */
	double nu;
	double sure;      /* a row further than this from the level is surely on its side */
	int64_t gap_most; /* ns; neighbours further apart are no basis for interpolation; 0: any are */
};

struct crossing {
	bool found;
	size_t before, after; /* the last row surely before, the first surely after */
	double low, high;     /* guaranteed */
	double value;
	bool clean; /* false: value is the middle of low and high, and they are all that is known */
	double random_u, nu; /* s, from noise; clean only */
	double time_u;       /* s, from the rows' intervals */
	double shape;        /* s, how much later a curve of the estimated bend meets the level */
	double shape_u;      /* s, of that */
	double slope;        /* magnitude of dy/dt there; 0 where not clean */
};

/* The first passage: the first row surely after, and the last one surely before that. */
void crossing_first(const struct crossing_query *query, struct crossing *ret_crossing);
/* The passage between two rows that the caller has found. before < after. */
void crossing_between(const struct crossing_query *query, size_t before, size_t after,
                      struct crossing *ret_crossing);

/*
 * The time between two events known by guaranteed intervals [a_low, a_high]
 * and [b_low, b_high]: bounds of b - a, and the standard uncertainty if each
 * is rectangular (JCGM 100 4.3.7).
 */
struct time_between {
	double low, high, value, u;
};
struct time_between time_between(double a_low, double a_high, double b_low, double b_high);

/* y = a + b x + c x^2 over a stretch, x = (t - centre) / reach. */
struct parabola {
	double centre, reach;
	double a, b, c;
	double inverse[3][3]; /* of the normal equations: covariance for noise 1 */
};
/* false: fewer than 3 rows, or times that do not determine it. */
bool parabola_fit(const struct stretch *stretch, struct parabola *ret_parabola);
/* Value at x, and its standard deviation for row noise 1. */
double parabola_value(const struct parabola *parabola, double x, double *ret_sd);

#endif
