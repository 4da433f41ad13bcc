/* SPDX-License-Identifier: Apache-2.0 */
/* Field tables; the evaluation is not there yet and says so. */
#include "check.h"

struct stays_within {
	int channel;
	struct window window;
	double between[2], above, below;
	int64_t ignore_ns;
};

#define AT(member) offsetof(struct stays_within, member)
static const struct field fields[] = {
    {.key = "channel",
     .kind = FIELD_CHANNEL,
     .flags = FIELD_REQUIRED,
     .offset = AT(channel),
     .text = "what is watched"},
    {.key = "window",
     .kind = FIELD_WINDOW,
     .offset = AT(window),
     .text = "the samples that are judged"},
    {.key = "between", .kind = FIELD_LEVELS, .offset = AT(between), .text = "inside: both bounds"},
    {.key = "above", .kind = FIELD_LEVEL, .offset = AT(above), .text = "inside: the lower bound"},
    {.key = "below", .kind = FIELD_LEVEL, .offset = AT(below), .text = "inside: the upper bound"},
    {.key = "ignore_shorter_than",
     .kind = FIELD_DURATION,
     .flags = FIELD_REQUIRED | FIELD_POSITIVE,
     .offset = AT(ignore_ns),
     .text = "excursions shorter than this do not matter; a longer interval between samples is "
             "inconclusive"},
};
static const struct field_table table = {
    "stays_within", "a channel stays in limits during a window", fields, FIELD_COUNT(fields)};

enum { LARGEST, SMALLEST, INSIDE };
static const struct metric_kind metrics[] = {
    {"largest", METRIC_LEVEL, "largest value of a sample", NULL},
    {"smallest", METRIC_LEVEL, "smallest value of a sample", NULL},
    {"inside", METRIC_YES_NO, "no excursion beyond the bounds lasts as long as ignore_shorter_than",
     NULL},
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

const struct check_kind check_stays_within = {
    .name = "stays_within",
    .text = "see table",
    .fields = &table,
    .params_size = sizeof(struct stays_within),
    .metrics = metrics,
    .metric_count = FIELD_COUNT(metrics),
    .evaluate = evaluate,
};
