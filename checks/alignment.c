/* SPDX-License-Identifier: Apache-2.0 */
/* Field tables; the evaluation is not there yet and says so. */
#include "check.h"

struct alignment {
	int own, bench, current;
	struct window window;
	double minimum_current, tolerance;
};

#define AT(member) offsetof(struct alignment, member)
static const struct field fields[] = {
    {.key = "own",
     .kind = FIELD_CHANNEL,
     .flags = FIELD_REQUIRED,
     .offset = AT(own),
     .text = "torque angle as the controller believes it"},
    {.key = "bench",
     .kind = FIELD_CHANNEL,
     .flags = FIELD_REQUIRED,
     .offset = AT(bench),
     .text = "torque angle from instruments that are not under test"},
    {.key = "current",
     .kind = FIELD_CHANNEL,
     .flags = FIELD_REQUIRED,
     .offset = AT(current),
     .text = "magnitude of the current vector, from the bench"},
    {.key = "window",
     .kind = FIELD_WINDOW,
     .offset = AT(window),
     .text = "the samples that are judged; proven steady"},
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
    "alignment", "the frame that the controller believes against the bench's", fields,
    FIELD_COUNT(fields)};

static const struct metric_kind metrics[] = {
    {"frame_offset", METRIC_ANGLE_ELEC,
     "circular mean of own - that of bench, in (-180 deg, 180 deg]", NULL},
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

const struct check_kind check_alignment = {
    .name = "alignment",
    .text = "see table",
    .fields = &table,
    .params_size = sizeof(struct alignment),
    .metrics = metrics,
    .metric_count = FIELD_COUNT(metrics),
    .evaluate = evaluate,
};
