/* SPDX-License-Identifier: Apache-2.0 */
/* One place that fills metrics, so that none leaves a member unset. */
#include "put.h"

#include <stdio.h>

const struct unit *shape_unit(enum metric_shape shape, const struct unit *channel)
{
	switch (shape) {
	case METRIC_TIME:
		return unit_find("s", 1);
	case METRIC_PERCENT:
		return unit_percent();
	case METRIC_ANGLE_ELEC:
		return unit_find("deg_el", 6);
	case METRIC_ANGLE_MECH:
		return unit_find("deg_mech", 8);
	case METRIC_COUNT:
	case METRIC_YES_NO:
		return unit_one();
	case METRIC_LEVEL:
	case METRIC_LEVEL_TIME:
		break;
	}
	return channel ? channel : unit_one();
}

void put_value(struct metric *metric, const struct metric_kind *kind, const struct unit *unit,
               enum evidence evidence, double value, double low, double high, double coverage)
{
	*metric = (struct metric){
	    .kind = kind,
	    .value = value,
	    .low = low,
	    .high = high,
	    .coverage = coverage,
	    .unit = unit,
	    .evidence = evidence,
	};
}

void put_yes_no(struct metric *metric, const struct metric_kind *kind, enum evidence evidence,
                bool yes, const char *note)
{
	double value = yes ? 1 : 0;
	put_value(metric, kind, unit_one(), evidence, value, value, value, 1);
	(void)snprintf(metric->note, sizeof metric->note, "%s", note);
}

void put_point(struct metric *metric, int64_t earliest_ns, int64_t latest_ns, double level)
{
	if (metric->point_count == CHECK_POINTS_MOST)
		return;
	metric->points[metric->point_count++] = (struct metric_point){
	    .label = metric->kind->name,
	    .earliest_ns = earliest_ns,
	    .latest_ns = latest_ns,
	    .level = level,
	};
}
