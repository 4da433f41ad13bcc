/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The levels of a step response, for its picture. The check says where its
 * metrics lie and nothing of its levels, so they are put together here: the
 * ripple lies at the final value, the settling time ends at the edge of the
 * band, and the band's share of the step says how much 100 % are. Whatever of
 * this is missing is not drawn.
 */
#include <math.h>
#include <string.h>

#include "chart.h"

static const struct metric_result *find(const struct check_result *check, const char *name)
{
	for (size_t i = 0; i < check->metric_count; i++)
		if (strcmp(check->metrics[i].metric.kind->name, name) == 0)
			return &check->metrics[i];
	return NULL;
}

static double level_of(const struct metric_result *metric)
{
	return metric && isfinite(metric->metric.value) && metric->metric.point_count > 0
	           ? metric->metric.points[0].level
	           : (double)NAN;
}

static double band_share(const struct check_result *check, const struct metric_result *settling)
{
	const struct field_table *options = settling->metric.kind->options;
	double share = (double)NAN;
	for (size_t i = 0; options && check->use->params && i < options->count; i++)
		if (strcmp(options->fields[i].key, "band") == 0)
			memcpy(&share, (const char *)check->use->params + options->fields[i].offset,
			       sizeof share);
	return share;
}

bool chart_step_find(const struct check_result *check, struct chart_step *ret_step)
{
	if (strcmp(check->use->kind->name, "step_response") != 0)
		return false;
	const struct metric_result *settling = find(check, "settling_time"),
	                           *overshoot = find(check, "overshoot");
	double final = level_of(find(check, "ripple")), edge = level_of(settling);
	double begin = level_of(find(check, "dead_time"));
	if (!isfinite(final) || !isfinite(edge) || !isfinite(begin) || begin == final)
		return false;
	double share = band_share(check, settling);
	*ret_step = (struct chart_step){.final = final,
	                                .band = fabs(edge - final),
	                                .sign = final > begin ? 1 : -1,
	                                .overshoot_most = (double)NAN};
	if (!(share > 0) || !(ret_step->band > 0))
		return false;
	ret_step->hundred = ret_step->band / share;
	if (overshoot && overshoot->limit_count > 0 && isfinite(overshoot->limits[0].limit->max))
		ret_step->overshoot_most =
		    final + ret_step->sign * ret_step->hundred * overshoot->limits[0].limit->max / 100;
	return true;
}
