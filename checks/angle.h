/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_ANGLE_H
#define DRIVETRIAL_ANGLE_H
/*
 * A steady electrical angle over a window, by circular statistics, and whether
 * there was current enough for an angle to mean anything. In degrees
 * electrical, whatever the channel's unit.
 */
#include "statistics.h"
#include "window.h"

struct angle {
	bool known;
	char why[224];
	struct rows rows;
	struct circular circular;     /* in the channel's unit */
	struct steadiness steadiness; /* of the deviations from the mean, channel's unit */
	double mean, expanded;        /* deg; U for 95 % */
	double sd, sd_expanded;       /* deg */
	double row_limit;             /* deg: limit of error of a row, rounding included */
};

/* tolerance_rad: the drift must surely be below a quarter of it. -1: ERR_NOMEM. */
int angle_measure(const struct check_input *in, int channel, struct span span, double tolerance_rad,
                  struct angle *ret_angle, struct err *reterr);
/* The deviation of row i from a target, in deg in (-180, 180]. */
double angle_deviation(const struct angle *angle, size_t i, double target_deg);

/*
 * Whether every row of the current is surely above share * rated current;
 * else why[size] says so. -1: ERR_NOMEM.
 */
int current_sufficient(const struct check_input *in, int channel, struct span span, double share,
                       bool *ret_sufficient, char *why, size_t size, struct err *reterr);

/* What torque_angle and alignment refuse alike; a fault is set in reterr. */
int angle_channel_verify(const struct channel_info *channel, struct err *reterr);
int current_channel_verify(const struct channel_info *channel, double share,
                           const struct machine *machine, struct err *reterr);

#endif
