/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The mean of angles is that of their directions: 359 deg and 1 deg are 0 deg
 * on average, not 180 deg. Around that mean the deviations are small and
 * ordinary statistics (noise, autocorrelation, drift) hold for them.
 */
#include "angle.h"

#include <stdio.h>

#define PI 3.14159265358979323846

enum { ANGLE_ROWS_LEAST = 5 };

static double degrees(const struct channel_info *channel)
{
	return channel->unit->scale * 180 / PI;
}

double angle_deviation(const struct angle *angle, size_t i, double target_deg)
{
	double value = series_value(&angle->rows.series, angle->rows.first + i);
	return wrap_half(value * degrees(angle->rows.series.channel) - target_deg, 360);
}

/* Mean, spread and their uncertainties from proven-steady rows. */
static void conclude(struct angle *angle)
{
	const struct channel_info *channel = angle->rows.series.channel;
	const struct steadiness *steady = &angle->steadiness;
	double scale = degrees(channel), limit = rows_error_limit(&angle->rows, 0, angle->rows.count);
	struct budget mean = {0}, sd = {0};
	double nu = fmax(steady->independent - 1, 1);
	budget_random(&mean, steady->noise / sqrt(steady->independent), nu);
	double square = steady->drift * steady->drift - steady->drift_se * steady->drift_se;
	budget_other(&mean, square > 0 ? sqrt(square / 3) : 0);
	budget_other(&mean, rounding_bias(channel->resolution, steady->noise) / sqrt(3));
	budget_other(&mean, limit / sqrt(3));
	budget_random(&sd, angle->circular.sd / sqrt(2 * nu), nu);
	budget_other(&sd, channel->resolution / sqrt(12));
	angle->mean = wrap_half(angle->circular.mean * scale, 360);
	angle->expanded = budget_expanded(&mean) * scale;
	angle->sd = angle->circular.sd * scale;
	angle->sd_expanded = budget_expanded(&sd) * scale;
	angle->row_limit = (limit + channel->resolution / 2) * scale;
	angle->known = true;
}

int angle_measure(const struct check_input *in, int channel, struct span span, double tolerance_rad,
                  struct angle *ret_angle, struct err *reterr)
{
	struct angle *angle = ret_angle;
	*angle = (struct angle){0};
	const struct channel_info *info = &in->channels[channel];
	if (rows_take(in, channel, span, &angle->rows, reterr) < 0)
		return -1;
	if (!angle->rows.usable) {
		(void)snprintf(angle->why, sizeof angle->why, "%s", angle->rows.why);
		return 0;
	}
	if (angle->rows.count < ANGLE_ROWS_LEAST) {
		(void)snprintf(angle->why, sizeof angle->why,
		               "only %zu samples of %s in the window, %d are needed: hold longer",
		               angle->rows.count, info->name, ANGLE_ROWS_LEAST);
		return 0;
	}
	if (rows_have_gap(in, &angle->rows, angle->why, sizeof angle->why))
		return 0;
	double turn = 2 * PI / info->unit->scale;
	struct stretch rows = rows_stretch(&angle->rows, 0, angle->rows.count, span.from_ns);
	circular_of(&rows, turn, &angle->circular);
	if (!(angle->circular.R >= 0.5)) {
		(void)snprintf(angle->why, sizeof angle->why,
		               "%s points everywhere: the mean resultant length is %.3f, below 0.5",
		               info->name, angle->circular.R);
		return 0;
	}
	rows.around = angle->circular.mean;
	rows.turn = turn;
	if (!steadiness_of(&rows, info->resolution, &angle->steadiness)) {
		(void)snprintf(angle->why, sizeof angle->why, "the samples of %s all bear the same time",
		               info->name);
		return 0;
	}
	if (!(angle->steadiness.bound * info->unit->scale < tolerance_rad / 4)) {
		(void)snprintf(angle->why, sizeof angle->why,
		               "%s is not proven steady: over %.4g ms it may drift by %.3g deg, a quarter "
		               "of the tolerance (%.3g deg) would do; hold longer or begin later",
		               info->name, angle->steadiness.duration * 1e3,
		               angle->steadiness.bound * degrees(info), tolerance_rad / 4 * 180 / PI);
		return 0;
	}
	conclude(angle);
	return 0;
}

int current_sufficient(const struct check_input *in, int channel, struct span span, double share,
                       bool *ret_sufficient, char *why, size_t size, struct err *reterr)
{
	struct rows rows;
	*ret_sufficient = false;
	if (rows_take(in, channel, span, &rows, reterr) < 0)
		return -1;
	if (!rows.usable) {
		(void)snprintf(why, size, "%s", rows.why);
		return 0;
	}
	if (rows_have_gap(in, &rows, why, size))
		return 0;
	const struct channel_info *info = &in->channels[channel];
	double minimum = share * in->machine->rated_current.value / info->unit->scale;
	size_t low = 0;
	double least = (double)INFINITY;
	for (size_t i = 0; i < rows.count; i++) {
		double value = series_value(&rows.series, rows.first + i);
		double doubt = series_error_limit(&rows.series, rows.first + i) + info->resolution / 2;
		low += !(value - doubt >= minimum);
		least = fmin(least, value);
	}
	*ret_sufficient = low == 0;
	if (low)
		(void)snprintf(why, size,
		               "too little current for an angle: %zu of %zu samples of %s are not surely "
		               "above %.3g %s (smallest %.3g); load the machine",
		               low, rows.count, info->name, minimum, info->unit->name, least);
	return 0;
}

int angle_channel_verify(const struct channel_info *channel, struct err *reterr)
{
	if (dimension_agrees(channel->unit->dimension, DIM_ANGLE_ELEC))
		return 0;
	return err_set(reterr, ERR_FILE, "%s is in %s; a torque angle is electrical: deg or deg_el",
	               channel->name, channel->unit->name);
}

int current_channel_verify(const struct channel_info *channel, double share,
                           const struct machine *machine, struct err *reterr)
{
	if (!dimension_agrees(channel->unit->dimension, DIM_CURRENT_AMPLITUDE))
		return err_set(reterr, ERR_FILE,
		               "%s is in %s; the magnitude of a current vector is in A_peak or A_rms",
		               channel->name, channel->unit->name);
	if (share > 0 && !(machine->rated_current.value > 0))
		return err_set(reterr, ERR_FILE,
		               "minimum_current is a part of rated current, which machine does not give");
	return 0;
}
