/* SPDX-License-Identifier: Apache-2.0 */
/* Field tables; the evaluation is not there yet and says so. */
#include "check.h"

struct same_sign {
	int command;
	struct int_list channels;
	struct window window;
};

#define AT(member) offsetof(struct same_sign, member)
static const struct field fields[] = {
    {.key = "command",
     .kind = FIELD_CHANNEL,
     .flags = FIELD_REQUIRED | FIELD_COMMAND,
     .offset = AT(command),
     .text = "commanded channel whose value gives the sign"},
    {.key = "channels",
     .kind = FIELD_CHANNELS,
     .flags = FIELD_REQUIRED,
     .offset = AT(channels),
     .text = "channels that must have it"},
    {.key = "window",
     .kind = FIELD_WINDOW,
     .offset = AT(window),
     .text = "the samples that are judged"},
};
static const struct field_table table = {"same_sign", "channels have the sign of a command", fields,
                                         FIELD_COUNT(fields)};

static const struct metric_kind metrics[] = {
    {"agree", METRIC_YES_NO, "the mean of each channel surely has the sign of the commanded value",
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

const struct check_kind check_same_sign = {
    .name = "same_sign",
    .text = "see table",
    .fields = &table,
    .params_size = sizeof(struct same_sign),
    .metrics = metrics,
    .metric_count = FIELD_COUNT(metrics),
    .evaluate = evaluate,
};
