/* SPDX-License-Identifier: Apache-2.0 */
/*
 * One stretch of rows is all the memory that a dwell needs. Counting samples
 * instead of time was rejected: it would depend on the pace of the polls.
 */
#include "watch.h"

void watch_start(struct watch *watch, enum watch_kind kind, const struct condition *condition,
                 int64_t not_before_ns)
{
	*watch = (struct watch){.kind = kind,
	                        .condition = *condition,
	                        .active = true,
	                        .not_before_ns = not_before_ns,
	                        .value = (double)NAN};
}

static void fire(struct watch *watch)
{
	watch->fired = true;
	watch->became_earliest_ns =
	    watch->have_false ? watch->false_earliest_ns : watch->first_earliest_ns;
	watch->became_latest_ns = watch->first_latest_ns;
}

void watch_row(struct watch *watch, int64_t earliest_ns, int64_t latest_ns, double value)
{
	if (!watch->active || watch->fired || latest_ns < watch->not_before_ns)
		return;
	if (watch->kind == WATCH_AWAIT && earliest_ns < watch->not_before_ns)
		return;
	if (isnan(value)) {
		if (watch->kind == WATCH_AWAIT)
			watch->in_stretch = false;
		return;
	}
	watch->value = value;
	watch->rows++;
	bool holds = condition_holds(&watch->condition, value);
	bool counts = watch->kind == WATCH_AWAIT ? holds : !holds;
	if (!counts) {
		watch->in_stretch = false;
		watch->have_false = true;
		watch->false_earliest_ns = earliest_ns;
		return;
	}
	if (!watch->in_stretch) {
		watch->in_stretch = true;
		watch->first_earliest_ns = earliest_ns;
		watch->first_latest_ns = latest_ns;
	}
	/* An await must surely have lasted, an interlock may have. */
	int64_t lasted = watch->kind == WATCH_AWAIT ? earliest_ns - watch->first_latest_ns
	                                            : latest_ns - watch->first_earliest_ns;
	if (watch->condition.for_ns == 0 || lasted >= watch->condition.for_ns)
		fire(watch);
}
