/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Metrics that are not known, and conditions. An unknown metric is an interval
 * that holds everything: no limit can then be passed or failed, whichever code
 * compares it. A flag "valid" beside the numbers was rejected, because
 * somebody would forget to ask it.
 */
#include <stdarg.h>
#include <stdio.h>
#include <string.h>

#include "check.h"

void metric_unknown(struct metric *metric, const struct metric_kind *kind, const struct unit *unit,
                    enum evidence evidence, const char *format, ...)
{
	bool yes_no = kind->shape == METRIC_YES_NO;
	*metric = (struct metric){
	    .kind = kind,
	    .value = (double)NAN,
	    .low = yes_no ? 0 : -(double)INFINITY,
	    .high = yes_no ? 1 : (double)INFINITY,
	    .coverage = 1,
	    .unit = unit ? unit : unit_one(),
	    .evidence = evidence,
	};
	va_list args;
	va_start(args, format);
	(void)vsnprintf(metric->note, sizeof metric->note, format, args);
	va_end(args);
}

bool condition_holds(const struct condition *condition, double value)
{
	if (isnan(value))
		return false;
	switch (condition->kind) {
	case CONDITION_IS:
		return value == condition->a;
	case CONDITION_ABOVE:
		return value > condition->a;
	case CONDITION_BELOW:
		return value < condition->a;
	case CONDITION_BETWEEN:
		return value >= condition->a && value <= condition->b;
	}
	return false;
}
