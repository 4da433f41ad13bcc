/* SPDX-License-Identifier: Apache-2.0 */
/* Field tables; the evaluation is not there yet and says so. */
#include "check.h"

struct fault_reaction {
	int from, indication, torque, gone, restart, reset, again, running;
	double code, torque_below;
	int64_t torque_for_ns;
};

#define AT(member) offsetof(struct fault_reaction, member)
static const struct field fields[] = {
    {.key = "from",
     .kind = FIELD_MARK,
     .flags = FIELD_REQUIRED,
     .offset = AT(from),
     .text = "mark of the cause"},
    {.key = "indication",
     .kind = FIELD_CHANNEL,
     .flags = FIELD_REQUIRED,
     .offset = AT(indication),
     .text = "channel that shows the fault"},
    {.key = "code",
     .kind = FIELD_LEVEL,
     .flags = FIELD_REQUIRED,
     .of = "indication",
     .offset = AT(code),
     .text = "what it must show: a value or a value's name"},
    {.key = "torque",
     .kind = FIELD_CHANNEL,
     .offset = AT(torque),
     .text = "torque, from a device that is not under test"},
    {.key = "torque_below",
     .kind = FIELD_LEVEL,
     .of = "torque",
     .offset = AT(torque_below),
     .text = "torque is off where its magnitude is below"},
    {.key = "torque_for",
     .kind = FIELD_DURATION,
     .flags = FIELD_POSITIVE,
     .fallback = "20 ms",
     .offset = AT(torque_for_ns),
     .text = "and stays so for as long"},
    {.key = "gone",
     .kind = FIELD_MARK,
     .offset = AT(gone),
     .text = "mark at which the cause is removed"},
    {.key = "restart",
     .kind = FIELD_MARK,
     .offset = AT(restart),
     .text = "mark of a command to run that must be refused, before the reset"},
    {.key = "reset", .kind = FIELD_MARK, .offset = AT(reset), .text = "mark of the reset"},
    {.key = "again",
     .kind = FIELD_MARK,
     .offset = AT(again),
     .text = "mark of a command to run after the reset; the reset itself unless given"},
    {.key = "running",
     .kind = FIELD_CHANNEL,
     .offset = AT(running),
     .text = "channel that is 1 while the drive runs"},
};
static const struct field_table table = {"fault_reaction",
                                         "how a fault is seen, reacted to, held and cleared",
                                         fields, FIELD_COUNT(fields)};

enum {
	DETECTION_TIME,
	CODE_RIGHT,
	TORQUE_OFF_TIME,
	STAYS_LATCHED,
	RESTART_REFUSED,
	RESET_CLEARS,
	RESTARTS_CLEAN
};
static const struct metric_kind metrics[] = {
    {"detection_time", METRIC_TIME,
     "from the cause to the first change of the indication: guaranteed bounds", NULL},
    {"code_right", METRIC_YES_NO,
     "the indication changed to the code and to nothing else before it", NULL},
    {"torque_off_time", METRIC_TIME,
     "from the cause to the last instant with torque before it stays off: guaranteed bounds", NULL},
    {"stays_latched", METRIC_YES_NO,
     "the indication stays what it became, until the reset or the end", NULL},
    {"restart_refused", METRIC_YES_NO,
     "after the mark restart nothing runs and no torque comes, until the reset or the end", NULL},
    {"reset_clears", METRIC_YES_NO,
     "after the reset the indication is again what it was before the cause", NULL},
    {"restarts_clean", METRIC_YES_NO, "after the mark again the drive runs, and no fault is shown",
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

const struct check_kind check_fault_reaction = {
    .name = "fault_reaction",
    .text = "see table",
    .fields = &table,
    .params_size = sizeof(struct fault_reaction),
    .metrics = metrics,
    .metric_count = FIELD_COUNT(metrics),
    .evaluate = evaluate,
};
