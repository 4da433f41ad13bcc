/* SPDX-License-Identifier: Apache-2.0 */
/* Field tables; the evaluation is not there yet and says so. */
#include "check.h"

struct refusal {
	const char *attempt;
	struct int_list unchanged;
	int64_t within_ns;
};

#define AT(member) offsetof(struct refusal, member)
static const struct field fields[] = {
    {.key = "attempt",
     .kind = FIELD_LINE_NAME,
     .flags = FIELD_REQUIRED,
     .offset = AT(attempt),
     .text = "name of the attempt step"},
    {.key = "unchanged",
     .kind = FIELD_CHANNELS,
     .offset = AT(unchanged),
     .text = "channels that must not change by it"},
    {.key = "within",
     .kind = FIELD_DURATION,
     .flags = FIELD_POSITIVE,
     .fallback = "100 ms",
     .offset = AT(within_ns),
     .text = "as much before and after the attempt is compared"},
};
static const struct field_table table = {
    "refusal", "a request that is not allowed is refused and changes nothing", fields,
    FIELD_COUNT(fields)};

enum { REFUSED, EXCEPTION_RIGHT, UNCHANGED };
static const struct metric_kind metrics[] = {
    {"refused", METRIC_YES_NO, "the answer was a Modbus exception", NULL},
    {"exception_right", METRIC_YES_NO, "it was the exception that the attempt expects", NULL},
    {"unchanged", METRIC_YES_NO,
     "the means before and after differ by no more than resolution and noise explain", NULL},
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

const struct check_kind check_refusal = {
    .name = "refusal",
    .text = "see table",
    .fields = &table,
    .params_size = sizeof(struct refusal),
    .metrics = metrics,
    .metric_count = FIELD_COUNT(metrics),
    .evaluate = evaluate,
};
