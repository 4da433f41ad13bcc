/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Dwell times by projection on the sector's own axes: no arc tangent and no
 * sine in the loop. Adding a common-mode offset to three sine references gives
 * the same duties and was rejected: the dwell times are what the published
 * values and the defects speak of.
 */
#include "model_modulation.h"

#define SQRT3 1.73205080756887729353

/* Upper switches of the active states 1 to 6: 100, 110, 010, 011, 001, 101. */
static const double ON[6][3] = {{1, 0, 0}, {1, 1, 0}, {0, 1, 0}, {0, 1, 1}, {0, 0, 1}, {1, 0, 1}};
/* Cosine and sine of each sector's first edge. */
static const double EDGE[6][2] = {{1, 0},  {0.5, SQRT3 / 2},   {-0.5, SQRT3 / 2},
                                  {-1, 0}, {-0.5, -SQRT3 / 2}, {0.5, -SQRT3 / 2}};

static int sector_of(double alpha, double beta)
{
	double slanted = SQRT3 * alpha;
	if (beta >= 0)
		return beta < slanted ? 0 : beta >= -slanted ? 1 : 2;
	return beta > slanted ? 3 : beta <= -slanted ? 4 : 5;
}

struct dwell modulation_dwell(double alpha_v, double beta_v, double dc_v, double period)
{
	struct dwell dwell = {.sector = sector_of(alpha_v, beta_v)};
	const double *edge = EDGE[dwell.sector];
	double along = alpha_v * edge[0] + beta_v * edge[1];
	double across = beta_v * edge[0] - alpha_v * edge[1];
	double scale = SQRT3 * period / dc_v;
	/* V sin(60 deg - x) = V (sqrt(3)/2 cos x - 1/2 sin x) */
	dwell.t1 = scale * (SQRT3 / 2 * along - 0.5 * across);
	dwell.t2 = scale * across;
	dwell.t1 = dwell.t1 > 0 ? dwell.t1 : 0;
	dwell.t2 = dwell.t2 > 0 ? dwell.t2 : 0;
	double active = dwell.t1 + dwell.t2;
	if (active > period) {
		dwell.t1 *= period / active;
		dwell.t2 = period - dwell.t1;
		active = period;
	}
	dwell.t0 = period - active;
	return dwell;
}

void modulation_duties(const struct dwell *dwell, double period, double null_share,
                       double ret_duty[3])
{
	const double *first = ON[dwell->sector], *second = ON[(dwell->sector + 1) % 6];
	for (int i = 0; i < 3; i++)
		ret_duty[i] =
		    (first[i] * dwell->t1 + second[i] * dwell->t2 + null_share * dwell->t0) / period;
}

void modulation_vector(const double duty[3], double *ret_alpha, double *ret_beta)
{
	*ret_alpha = (2 * duty[0] - duty[1] - duty[2]) / 3;
	*ret_beta = (duty[1] - duty[2]) / SQRT3;
}
