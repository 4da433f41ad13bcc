/* SPDX-License-Identifier: Apache-2.0 */
/* Field tables; the evaluation is not there yet and says so. */
#include "check.h"

struct step_response {
	int channel, from, command, percent_of;
	int64_t for_ns, initial_ns, final_ns;
	double rise_from, rise_to, dead_level, band;
};

enum { OF_STEP, OF_RATED };
static const char *const percent_choices[] = {"step", "rated", NULL};

#define AT(member) offsetof(struct step_response, member)
static const struct field fields[] = {
    {.key = "channel",
     .kind = FIELD_CHANNEL,
     .flags = FIELD_REQUIRED,
     .offset = AT(channel),
     .text = "what answers the step"},
    {.key = "from",
     .kind = FIELD_MARK,
     .flags = FIELD_REQUIRED,
     .offset = AT(from),
     .text = "mark of the step's command"},
    {.key = "for",
     .kind = FIELD_DURATION,
     .offset = AT(for_ns),
     .text = "how much after the mark is judged; the rest of the stimulus unless given"},
    {.key = "initial_for",
     .kind = FIELD_DURATION,
     .flags = FIELD_POSITIVE,
     .fallback = "50 ms",
     .offset = AT(initial_ns),
     .text = "the initial value is the mean of as much before the mark, as far as the stimulus "
             "goes back"},
    {.key = "final_for",
     .kind = FIELD_DURATION,
     .offset = AT(final_ns),
     .text = "the final value is the mean of the last part of this length; a fifth of what is "
             "judged unless given"},
    {.key = "percent_of",
     .kind = FIELD_CHOICE,
     .choices = percent_choices,
     .fallback = "step",
     .offset = AT(percent_of),
     .text = "what 100 % are of overshoot, undershoot and band: the measured step, or the rated "
             "value of the machine"},
    {.key = "command",
     .kind = FIELD_CHANNEL,
     .flags = FIELD_COMMAND,
     .offset = AT(command),
     .text = "commanded channel that says the target; the last one of the channel's dimension set "
             "at the mark unless given"},
};
static const struct field_table table = {
    "step_response", "how a channel answers a step of its command", fields, FIELD_COUNT(fields)};

static const struct field rise_fields[] = {
    {.key = "from",
     .kind = FIELD_QUANTITY,
     .dimension = &DIM_NUMBER,
     .least = 0,
     .most = 1,
     .fallback = "10 %",
     .offset = AT(rise_from),
     .text = "lower level, of the step"},
    {.key = "to",
     .kind = FIELD_QUANTITY,
     .dimension = &DIM_NUMBER,
     .least = 0,
     .most = 1,
     .fallback = "90 %",
     .offset = AT(rise_to),
     .text = "upper level, of the step"},
};
static const struct field_table rise_options = {"rise_time", "levels of the rise time", rise_fields,
                                                FIELD_COUNT(rise_fields)};
static const struct field dead_fields[] = {
    {.key = "level",
     .kind = FIELD_QUANTITY,
     .dimension = &DIM_NUMBER,
     .flags = FIELD_POSITIVE,
     .least = 0,
     .most = 0.5,
     .fallback = "5 %",
     .offset = AT(dead_level),
     .text = "the answer has begun at this part of the step"},
};
static const struct field_table dead_options = {"dead_time", "level of the dead time", dead_fields,
                                                FIELD_COUNT(dead_fields)};
static const struct field band_fields[] = {
    {.key = "band",
     .kind = FIELD_QUANTITY,
     .dimension = &DIM_NUMBER,
     .flags = FIELD_POSITIVE,
     .least = 0,
     .most = 1,
     .fallback = "2 %",
     .offset = AT(band),
     .text = "half-width of the band around the final value"},
};
static const struct field_table band_options = {"settling_time", "band of the settling time",
                                                band_fields, FIELD_COUNT(band_fields)};

enum {
	DEAD_TIME,
	RISE_TIME,
	PEAK_TIME,
	OVERSHOOT,
	UNDERSHOOT,
	SETTLING_TIME,
	STEADY_STATE_ERROR,
	RIPPLE,
	RIPPLE_RMS
};
static const struct metric_kind metrics[] = {
    {"dead_time", METRIC_TIME,
     "from the command to the crossing of level (5 % of the step unless said)", &dead_options},
    {"rise_time", METRIC_TIME,
     "from the crossing of 10 % to that of 90 % of the step, unless other levels are said",
     &rise_options},
    {"peak_time", METRIC_TIME, "from the command to the largest value beyond the final one", NULL},
    {"overshoot", METRIC_PERCENT,
     "(largest value - final value) / step, seen in the direction of the step; 0 where none", NULL},
    {"undershoot", METRIC_PERCENT,
     "swing back after the first crossing of the final value: (final value - smallest value) / "
     "step; 0 where none",
     NULL},
    {"settling_time", METRIC_TIME,
     "from the command to the last entry into the band around the final value; inside to the end",
     &band_options},
    {"steady_state_error", METRIC_LEVEL, "final value - commanded value", NULL},
    {"ripple", METRIC_LEVEL, "peak to peak of the settled part, as sampled", NULL},
    {"ripple_rms", METRIC_LEVEL, "standard deviation of the settled part, as sampled", NULL},
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

const struct check_kind check_step_response = {
    .name = "step_response",
    .text = "see table",
    .fields = &table,
    .params_size = sizeof(struct step_response),
    .metrics = metrics,
    .metric_count = FIELD_COUNT(metrics),
    .evaluate = evaluate,
};
