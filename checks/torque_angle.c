/* SPDX-License-Identifier: Apache-2.0 */
/* Field tables; the evaluation is not there yet and says so. */
#include "check.h"

struct torque_angle {
	int channel, current, torque;
	struct window window;
	const char *target;
	double minimum_current, tolerance;
};

#define AT(member) offsetof(struct torque_angle, member)
static const struct field fields[] = {
    {.key = "channel",
     .kind = FIELD_CHANNEL,
     .flags = FIELD_REQUIRED,
     .offset = AT(channel),
     .text = "torque angle: electrical, of the stator current vector from the rotor d axis"},
    {.key = "current",
     .kind = FIELD_CHANNEL,
     .flags = FIELD_REQUIRED,
     .offset = AT(current),
     .text = "magnitude of the same current vector"},
    {.key = "window",
     .kind = FIELD_WINDOW,
     .offset = AT(window),
     .text = "the samples that are judged; proven steady"},
    {.key = "target",
     .kind = FIELD_TEXT,
     .fallback = "by_torque_sign",
     .offset = AT(target),
     .text =
         "an angle (90 deg), or by_torque_sign: +90 deg for positive torque, -90 deg for negative"},
    {.key = "torque",
     .kind = FIELD_CHANNEL,
     .offset = AT(torque),
     .text = "by_torque_sign: the torque whose sign decides; the sign of the angle itself unless "
             "given"},
    {.key = "minimum_current",
     .kind = FIELD_QUANTITY,
     .dimension = &DIM_NUMBER,
     .least = 0,
     .most = 1,
     .fallback = "5 %",
     .offset = AT(minimum_current),
     .text = "of rated current: below it an angle says nothing"},
    {.key = "tolerance",
     .kind = FIELD_QUANTITY,
     .dimension = &DIM_ANGLE,
     .flags = FIELD_POSITIVE,
     .least = 0,
     .most = 3.141592653589793,
     .fallback = "5 deg",
     .offset = AT(tolerance),
     .text = "the deviation that matters: the drift over the window must surely be below a quarter "
             "of it"},
};
static const struct field_table table = {
    "torque_angle", "where the stator current stands to the rotor", fields, FIELD_COUNT(fields)};

enum { MEAN, MEAN_ERROR, SPREAD, WORST_ERROR, TORQUE_LOST };
static const struct metric_kind metrics[] = {
    {"mean", METRIC_ANGLE_ELEC, "circular mean of the angle", NULL},
    {"mean_error", METRIC_ANGLE_ELEC, "circular mean - target, in (-180 deg, 180 deg]", NULL},
    {"spread", METRIC_ANGLE_ELEC, "circular standard deviation sqrt(-2 ln R)", NULL},
    {"worst_error", METRIC_ANGLE_ELEC, "largest |angle - target| of a sample", NULL},
    {"torque_lost", METRIC_PERCENT,
     "1 - cos(mean_error): what a machine without saliency loses per ampere", NULL},
};

static int evaluate(const struct check_input *in, const void *params, struct metric *ret_metrics,
                    size_t *ret_count, struct err *reterr)
{
	(void)in;
	(void)params;
	(void)reterr;
	for (size_t i = 0; i < FIELD_COUNT(metrics); i++)
		metric_unknown(&ret_metrics[i], &metrics[i], NULL, EVIDENCE_INDEPENDENT,
		               "this check is not evaluated yet");
	*ret_count = FIELD_COUNT(metrics);
	return 0;
}

const struct check_kind check_torque_angle = {
    .name = "torque_angle",
    .text = "see table",
    .fields = &table,
    .params_size = sizeof(struct torque_angle),
    .metrics = metrics,
    .metric_count = FIELD_COUNT(metrics),
    .evaluate = evaluate,
};
