/* SPDX-License-Identifier: Apache-2.0 */
/*
 * What to do about a limit that cannot be decided, nearest first: samples more
 * often, fewer channels, a wider limit. Found by asking the forecast again
 * with other intervals and limits, so that the advice and the answer cannot
 * differ.
 */
#include <math.h>
#include <stdio.h>
#include <string.h>

#include "plan_show.h"

static bool decidable_at(const struct forecast_case *c, int64_t interval_ns)
{
	struct forecast_case other = *c;
	struct answered answered;
	other.interval_ns = interval_ns;
	forecast_answer(&other, &answered);
	return answered.answer == ANSWER_DECIDABLE;
}

/* The longest interval at which it could be decided; 0: none that is not absurdly short. */
static int64_t interval_needed(const struct forecast_case *c, int64_t present_ns)
{
	int64_t good = 10 * NS_PER_US, bad = present_ns;
	if (!decidable_at(c, good))
		return 0;
	for (int i = 0; i < 40 && bad - good > NS_PER_US; i++) {
		int64_t middle = good + (bad - good) / 2;
		if (decidable_at(c, middle))
			good = middle;
		else
			bad = middle;
	}
	return good;
}

/* How many times as wide the limit would have to be; 0: no width helps. */
static double width_needed(const struct forecast_case *c)
{
	struct limit wide = *c->limit;
	struct forecast_case other = *c;
	other.limit = &wide;
	for (double factor = 1.1; factor < 200; factor *= 1.1) {
		struct answered answered;
		wide.max = isinf(c->limit->max) ? c->limit->max : c->limit->max * factor;
		wide.min = isinf(c->limit->min) ? c->limit->min : c->limit->min * factor;
		forecast_answer(&other, &answered);
		if (answered.answer == ANSWER_DECIDABLE)
			return factor;
	}
	return 0;
}

/* A number with two digits, rounded up so that following the advice is enough. */
static double two_digits(double value, bool up)
{
	double size = pow(10, floor(log10(fabs(value))) - 1);
	return (up ? ceil(value / size - 1e-9) : floor(value / size + 1e-9)) * size;
}

static void advise_limit(const struct forecast_case *c, struct text *out)
{
	const struct metric_kind *kind = &c->use->kind->metrics[c->limit->metric];
	double factor = kind->shape == METRIC_YES_NO ? 0 : width_needed(c);
	double end = isinf(c->limit->max) ? c->limit->min : c->limit->max;
	if (factor == 0 || end == 0)
		return;
	double scale = kind->shape == METRIC_TIME ? 1e3 : 1;
	text_printf(out, ", or a limit of %.4g%s", two_digits(end * factor * scale, end > 0),
	            kind->shape == METRIC_TIME ? " ms" : "");
}

static const struct plan_channel *slowest(const struct forecast_case *c, const int *channels,
                                          size_t count)
{
	const struct plan_channel *found = NULL;
	for (size_t i = 0; i < count; i++) {
		const struct plan_channel *channel = &c->plan->channel[channels[i]];
		if (channel->read && (!found || channel->interval_ns > found->interval_ns))
			found = channel;
	}
	return found;
}

int plan_remedy(const struct forecast_case *c, struct plan_limit *limit, struct arena *arena,
                struct err *reterr)
{
	int channels[CHANNELS_OF_CHECK_MOST];
	size_t count = check_channels(c->use, channels);
	const struct plan_channel *channel = slowest(c, channels, count);
	const struct rig *rig = c->timing->rig;
	char needed_text[40], reach_text[40];
	struct text out;
	if (!channel) {
		(void)snprintf(limit->remedy, sizeof limit->remedy, "%s", limit->answered.forecast.why);
		return 0;
	}
	const struct plan_link *link = &c->plan->link[channel->link];
	int64_t needed = interval_needed(c, channel->interval_ns), alone = 0;
	if (plan_reach_alone(c->timing, c->plan->test, channels, count, channel->link, arena, &alone,
	                     reterr) < 0)
		return -1;
	text_init(&out, sizeof limit->remedy - 1);
	if (needed == 0) {
		text_puts(&out, limit->answered.forecast.why[0]
		                    ? limit->answered.forecast.why
		                    : "no interval helps, since the instrument or the mark is not exact "
		                      "enough");
		advise_limit(c, &out);
	} else {
		(void)duration_text(needed, needed_text, sizeof needed_text);
		text_printf(&out, "it needs samples every %s; ", needed_text);
		if (link->round_ns <= needed) {
			text_printf(&out, "%s can reach %s: sample faster", rig->links[channel->link].name,
			            duration_text(link->round_ns, reach_text, sizeof reach_text));
		} else if (alone > 0 && alone <= needed) {
			text_printf(&out, "%s reaches %s with these channels alone: sample fewer",
			            rig->links[channel->link].name,
			            duration_text(alone, reach_text, sizeof reach_text));
		} else {
			text_printf(
			    &out, "%s reaches %s at best: use a faster link or the controller's own recorder",
			    rig->links[channel->link].name,
			    duration_text(alone > 0 ? alone : link->round_ns, reach_text, sizeof reach_text));
		}
		advise_limit(c, &out);
	}
	(void)snprintf(limit->remedy, sizeof limit->remedy, "%s", text_string(&out));
	text_release(&out);
	return 0;
}
