/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Means for checks that need a quantity beside the one they judge: the current
 * that a computed target hangs on, the speed, the DC link. A slow change over
 * the window is in the spread, and so in the uncertainty.
 */
#include "level.h"

#include <stdio.h>

enum { LEVEL_ROWS_LEAST = 3 };

int level_measure(const struct check_input *in, int channel, struct span span,
                  struct level *ret_level, struct err *reterr)
{
	const struct channel_info *info = &in->channels[channel];
	struct level *level = ret_level;
	*level = (struct level){0};
	struct rows rows;
	if (rows_take(in, channel, span, &rows, reterr) < 0)
		return -1;
	if (!rows.usable)
		(void)snprintf(level->why, sizeof level->why, "%s", rows.why);
	else if (rows.count < LEVEL_ROWS_LEAST)
		(void)snprintf(level->why, sizeof level->why,
		               "only %zu samples of %s in the window, %d are needed", rows.count,
		               info->name, LEVEL_ROWS_LEAST);
	if (level->why[0] || rows_have_gap(in, &rows, level->why, sizeof level->why))
		return 0;
	struct stretch stretch = rows_stretch(&rows, 0, rows.count, span.from_ns);
	struct summary summary;
	summarise(&stretch, &summary);
	struct budget budget = {0};
	budget_random(&budget, summary.sd / sqrt(summary.independent),
	              fmax(summary.independent - 1, 1));
	budget_other(&budget, rows_error_limit(&rows, 0, rows.count) / sqrt(3));
	budget_other(&budget, rounding_bias(info->resolution, summary.sd) / sqrt(3));
	level->known = true;
	level->mean = summary.mean * info->unit->scale;
	level->expanded = budget_expanded(&budget) * info->unit->scale;
	level->sd = summary.sd * info->unit->scale;
	return 0;
}
