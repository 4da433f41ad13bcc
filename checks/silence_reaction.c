/* SPDX-License-Identifier: Apache-2.0 */
/* Field tables; the evaluation is not there yet and says so. */
#include "check.h"

struct silence_reaction {
	int from, channel, indication, back;
	double below, code;
	int64_t for_ns;
};

#define AT(member) offsetof(struct silence_reaction, member)
static const struct field fields[] = {
    {.key = "from",
     .kind = FIELD_MARK,
     .flags = FIELD_REQUIRED,
     .offset = AT(from),
     .text = "mark of the silence step: the last request before it"},
    {.key = "channel",
     .kind = FIELD_CHANNEL,
     .flags = FIELD_REQUIRED,
     .offset = AT(channel),
     .text = "torque or speed as another device sees it"},
    {.key = "below",
     .kind = FIELD_LEVEL,
     .flags = FIELD_REQUIRED,
     .offset = AT(below),
     .text = "the reaction is there where its magnitude is below"},
    {.key = "for",
     .kind = FIELD_DURATION,
     .flags = FIELD_POSITIVE,
     .fallback = "20 ms",
     .offset = AT(for_ns),
     .text = "and stays so for as long"},
    {.key = "back",
     .kind = FIELD_MARK,
     .offset = AT(back),
     .text = "mark of the step after the silence"},
    {.key = "indication",
     .kind = FIELD_CHANNEL,
     .offset = AT(indication),
     .text = "channel of the silenced device that shows the fault after its return"},
    {.key = "code",
     .kind = FIELD_LEVEL,
     .of = "indication",
     .offset = AT(code),
     .text = "what it must show then: a value or a value's name"},
};
static const struct field_table table = {
    "silence_reaction", "what happens when communication stops, and when it returns", fields,
    FIELD_COUNT(fields)};

enum { REACTION_TIME, CODE_RIGHT, STAYS_OFF };
static const struct metric_kind metrics[] = {
    {"reaction_time", METRIC_TIME,
     "from the last request to the last instant above the level before it stays below: guaranteed "
     "bounds",
     NULL},
    {"code_right", METRIC_YES_NO, "the first values read after the return show the code", NULL},
    {"stays_off", METRIC_YES_NO,
     "from the reaction to the end, the return of communication included, the channel stays below",
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

const struct check_kind check_silence_reaction = {
    .name = "silence_reaction",
    .text = "see table",
    .fields = &table,
    .params_size = sizeof(struct silence_reaction),
    .metrics = metrics,
    .metric_count = FIELD_COUNT(metrics),
    .evaluate = evaluate,
};
