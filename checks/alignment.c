/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Alignment: the angle in the frame that the controller believes against the
 * same angle from instruments. A wrong encoder offset turns the believed frame,
 * and the controller's own angle then still reads 90 deg; only the difference
 * to the bench shows it. Both are means over the same window, so that their
 * samples need not be simultaneous, but both must be proven steady.
 */
#include <stdio.h>

#include "angle.h"
#include "put.h"

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

static void fill(const struct angle *own, const struct angle *bench, struct metric *ret_metric)
{
	double offset = wrap_half(own->mean - bench->mean, 360);
	double expanded = hypot(own->expanded, bench->expanded);
	put_value(ret_metric, &metrics[0], shape_unit(METRIC_ANGLE_ELEC, NULL), EVIDENCE_INDEPENDENT,
	          offset, offset - expanded, offset + expanded, 0.95);
	(void)snprintf(ret_metric->note, sizeof ret_metric->note,
	               "%s says %.2f deg, %s %.2f deg: the bench decides",
	               own->rows.series.channel->name, own->mean, bench->rows.series.channel->name,
	               bench->mean);
	put_point(ret_metric, bench->rows.span.from_ns, bench->rows.span.to_ns, (double)NAN);
}

static int evaluate(const struct check_input *in, const void *params, struct metric *ret_metrics,
                    size_t *ret_count, struct err *reterr)
{
	const struct alignment *fields_in = params;
	*ret_count = FIELD_COUNT(metrics);
	char why[224] = "";
	struct span span;
	struct angle own, bench;
	bool sufficient = false;
	if (window_span(in, &fields_in->window, &span, why, sizeof why) &&
	    current_sufficient(in, fields_in->current, span, fields_in->minimum_current, &sufficient,
	                       why, sizeof why, reterr) < 0)
		return -1;
	if (sufficient) {
		if (angle_measure(in, fields_in->own, span, fields_in->tolerance, &own, reterr) < 0 ||
		    angle_measure(in, fields_in->bench, span, fields_in->tolerance, &bench, reterr) < 0)
			return -1;
		if (own.known && bench.known) {
			fill(&own, &bench, &ret_metrics[0]);
			return 0;
		}
		(void)snprintf(why, sizeof why, "%s", own.known ? bench.why : own.why);
	}
	metric_unknown(&ret_metrics[0], &metrics[0], shape_unit(METRIC_ANGLE_ELEC, NULL),
	               EVIDENCE_INDEPENDENT, "%s", why);
	return 0;
}

static int verify(const void *params, const struct channel_info *channels,
                  const struct machine *machine, struct err *reterr)
{
	const struct alignment *own = params;
	const struct channel_info *bench = &channels[own->bench];
	const struct channel_info *current = &channels[own->current];
	if (bench->evidence == EVIDENCE_SELF_REPORTED)
		return err_set(reterr, ERR_FILE,
		               "bench: %s comes from the device under test; alignment needs an instrument",
		               bench->name);
	if (current->evidence == EVIDENCE_SELF_REPORTED)
		return err_set(
		    reterr, ERR_FILE,
		    "current: %s comes from the device under test; alignment needs an instrument",
		    current->name);
	if (own->own == own->bench)
		return err_set(reterr, ERR_FILE, "own and bench are the same channel, %s", bench->name);
	if (angle_channel_verify(&channels[own->own], reterr) < 0 ||
	    angle_channel_verify(bench, reterr) < 0)
		return -1;
	return current_channel_verify(current, own->minimum_current, machine, reterr);
}

const struct check_kind check_alignment = {
    .name = "alignment",
    .text = "the frame that the controller believes against the bench's",
    .fields = &table,
    .params_size = sizeof(struct alignment),
    .metrics = metrics,
    .metric_count = FIELD_COUNT(metrics),
    .evaluate = evaluate,
    .verify = verify,
};
