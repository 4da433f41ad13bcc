/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_PUT_H
#define DRIVETRIAL_PUT_H
/*
 * Filling in metrics that are known. The unknown ones go through
 * metric_unknown(). Each row of a check's metrics is filled exactly once.
 */
#include "check.h"

/* A value with its interval. */
void put_value(struct metric *metric, const struct metric_kind *kind, const struct unit *unit,
               enum evidence evidence, double value, double low, double high, double coverage);
/* A yes or a no, with a note (may be ""). */
void put_yes_no(struct metric *metric, const struct metric_kind *kind, enum evidence evidence,
                bool yes, const char *note);
/* Where it lies, for plots; ignored where there is no room. */
void put_point(struct metric *metric, int64_t earliest_ns, int64_t latest_ns, double level);

/* The unit of a shape: s, %, deg_el ...; `channel` is the unit for levels. */
const struct unit *shape_unit(enum metric_shape shape, const struct unit *channel);

#endif
