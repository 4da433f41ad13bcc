/* SPDX-License-Identifier: Apache-2.0 */
/*
 * What looks wrong in a survey, with what to change in the rig file. Each is a
 * doubt and no verdict: the survey knows values and what the rig file expects
 * of them, and not what the bench does.
 *
 * An order of words is doubted where the value makes no sense as it is declared
 * (no number, beyond 1e9, nearer to 0 than 1e-9, outside what the rig expects)
 * and does in the other order. Turning values round until they fit was
 * rejected: the file says what the people meant, so they change it.
 */
#include <math.h>
#include <stdio.h>
#include <string.h>
#include <time.h>

#include "survey_show.h"

struct span {
	double least, most;
	const char *what; /* what says so; NULL: nothing does */
};

static void narrow(struct span *span, const struct condition *condition, const char *what)
{
	switch (condition->kind) {
	case CONDITION_ABOVE:
		span->least = fmax(span->least, condition->a);
		break;
	case CONDITION_BELOW:
		span->most = fmin(span->most, condition->a);
		break;
	case CONDITION_BETWEEN:
		span->least = fmax(span->least, condition->a);
		span->most = fmin(span->most, condition->b);
		break;
	case CONDITION_IS:
		return;
	}
	span->what = what;
}

/* What the rig expects of a channel: between of a command, interlocks, before. */
static struct span expected(const struct rig *rig, int index)
{
	const struct rig_channel *channel = &rig->channels[index];
	struct span span = {-(double)INFINITY, (double)INFINITY, NULL};
	if (channel->command && isfinite(channel->least)) {
		span = (struct span){channel->least, channel->most, "between"};
	}
	for (size_t i = 0; i < rig->interlock_count; i++)
		if (rig->interlocks[i].condition.channel == index)
			narrow(&span, &rig->interlocks[i].condition, "an interlock");
	for (size_t i = 0; i < rig->before_count; i++)
		if (rig->before[i].condition.channel == index)
			narrow(&span, &rig->before[i].condition, "before");
	return span;
}

static bool inside(const struct span *span, double value)
{
	return value >= span->least && value <= span->most;
}

static bool absurd(double value)
{
	return !isfinite(value) || fabs(value) > 1e9 || (value != 0 && fabs(value) < 1e-9);
}

static bool sane(const struct span *span, double value)
{
	return !absurd(value) && inside(span, value);
}

/* The same registers read in another order of words or bytes. */
static double other_order(const struct rig_channel *channel, const struct survey_channel *state,
                          bool words, bool bytes)
{
	struct codec codec = channel->codec;
	codec.low_word_first ^= words;
	codec.low_byte_first ^= bytes;
	return codec_decode(&codec, state->words);
}

static const char *order_name(bool low_first)
{
	return low_first ? "low_first" : "high_first";
}

static bool is_wide_integer(enum codec_type type)
{
	return type == CODEC_UINT32 || type == CODEC_INT32 || type == CODEC_UINT64 ||
	       type == CODEC_INT64;
}

/* A large integer whose last word is empty: a small one, its words turned round. */
static bool looks_shifted(const struct rig_channel *channel, const struct survey_channel *state)
{
	int last = codec_registers(&channel->codec) - 1;
	int low = channel->codec.low_word_first ? 0 : last, high = last - low;
	return is_wide_integer(channel->codec.type) && state->words[low] == 0 &&
	       state->words[high] != 0 && state->words[high] != 0xFFFF;
}

static size_t doubt_order(const struct rig *rig, int index, const struct survey_channel *state,
                          const struct span *span, struct text *out)
{
	const struct rig_channel *channel = &rig->channels[index];
	const char *name = channel->info.name;
	char is[64], other[64];
	int registers = codec_registers(&channel->codec);
	double value = codec_decode(&channel->codec, state->words);
	if (channel->place < PLACE_INPUT_REGISTER || channel->codec.type == CODEC_BIT)
		return 0;
	bool wrong = !sane(span, value) || looks_shifted(channel, state);
	(void)channel_value_text(rig, index, value, is, sizeof is);
	double words = other_order(channel, state, true, false);
	if (wrong && registers > 1 && sane(span, words) && fabs(words) < 1e9) {
		text_printf(out, "  ? %s is %s as the rig file reads it; with `words: %s` it would be %s\n",
		            name, is, order_name(!channel->codec.low_word_first),
		            channel_value_text(rig, index, words, other, sizeof other));
		return 1;
	}
	double bytes = other_order(channel, state, false, true);
	/* Of one register alone nearly any value would fit when turned round. */
	if (wrong && registers > 1 && sane(span, bytes)) {
		text_printf(out, "  ? %s is %s as the rig file reads it; with `bytes: %s` it would be %s\n",
		            name, is, order_name(!channel->codec.low_byte_first),
		            channel_value_text(rig, index, bytes, other, sizeof other));
		return 1;
	}
	return 0;
}

/* Outside what is expected: is the scale a power of ten away, or the sign turned? */
static size_t doubt_range(const struct rig *rig, int index, double value, const struct span *span,
                          struct text *out)
{
	static const double FACTORS[] = {0.1, 0.01, 0.001, 10, 100, -1};
	const struct rig_channel *channel = &rig->channels[index];
	char is[64], least[64], most[64], hint[160] = "";
	if (!span->what || inside(span, value))
		return 0;
	for (size_t i = 0; i < sizeof FACTORS / sizeof FACTORS[0] && !hint[0]; i++) {
		if (!inside(span, value * FACTORS[i]))
			continue;
		if (FACTORS[i] < 0)
			(void)snprintf(hint, sizeof hint, "; with the sign turned it would fit");
		else
			(void)snprintf(hint, sizeof hint, "; with a scale %g times as large it would fit",
			               FACTORS[i]);
	}
	text_printf(out,
	            "  ? %s is %s, outside what %s says (%s to %s): wrong scale, type or address%s\n",
	            channel->info.name, channel_value_text(rig, index, value, is, sizeof is),
	            span->what, channel_value_text(rig, index, span->least, least, sizeof least),
	            channel_value_text(rig, index, span->most, most, sizeof most), hint);
	return 1;
}

static size_t doubt_value(const struct survey *survey, int index, struct text *out)
{
	const struct rig *rig = survey->rig;
	const struct rig_channel *channel = &rig->channels[index];
	const struct survey_channel *state = &survey->channel[index];
	bool text = channel->place == PLACE_IDENTIFICATION || channel->codec.type == CODEC_TEXT;
	if (!state->asked || state->status != LINK_OK)
		return 0;
	if (text) {
		if (state->text[0])
			return 0;
		text_printf(out, "  ? %s is an empty text\n", channel->info.name);
		return 1;
	}
	struct span span = expected(rig, index);
	size_t count = doubt_order(rig, index, state, &span, out);
	if (count > 0)
		return count;
	if (isnan(state->value)) {
		text_printf(out, "  ? %s holds no number\n", channel->info.name);
		return 1;
	}
	if (channel->info.name_count > 0 && !channel_value_name(&channel->info, state->value)) {
		text_printf(out, "  ? %s is %g, a value that `names` does not know\n", channel->info.name,
		            state->value);
		return 1;
	}
	return doubt_range(rig, index, state->value, &span, out);
}

static size_t doubt_life(const struct survey *survey, int device, struct text *out)
{
	const struct rig_device *rig_device = &survey->rig->devices[device];
	if (rig_device->life < 0)
		return 0;
	const struct survey_channel *life = &survey->channel[rig_device->life];
	if (!life->asked || life->status != LINK_OK || life->reads < 2 || life->changes > 0)
		return 0;
	text_printf(
	    out, "  ? %s, the life counter of %s, stood over %zu reads: its registers may be frozen\n",
	    survey->rig->infos[rig_device->life].name, rig_device->name, life->reads);
	return 1;
}

/* Values that are older than the rig file says widen no interval, and so mislead. */
static size_t doubt_refresh(const struct survey *survey, int index, struct text *out)
{
	const struct channel_info *info = &survey->rig->infos[index];
	bool faster;
	char seen[40], said[40];
	int64_t change = survey_change_ns(survey, index, &faster);
	if (change == 0 || faster || change <= info->refresh_ns + info->refresh_ns / 4 + NS_PER_MS / 10)
		return 0;
	text_printf(out,
	            "  ? %s changes every %s, so its value may be as old; the rig file says %s%s\n",
	            info->name, duration_text(change, seen, sizeof seen),
	            info->refresh_ns ? "refresh: " : "nothing of its refresh",
	            info->refresh_ns ? duration_text(info->refresh_ns, said, sizeof said) : "");
	return 1;
}

static size_t doubt_calibration(const struct survey *survey, int index, struct text *out)
{
	const struct accuracy *accuracy = &survey->rig->infos[index].accuracy;
	int64_t today = (int64_t)time(NULL) / 86400;
	if (!accuracy->given || accuracy->calibrated_until_day == 0 ||
	    accuracy->calibrated_until_day >= today)
		return 0;
	text_printf(out, "  ? the calibration of %s ended %lld days ago\n",
	            survey->rig->infos[index].name,
	            (long long)(today - accuracy->calibrated_until_day));
	return 1;
}

/* The life counter is what shows the refresh of a whole register image. */
static bool is_life(const struct rig *rig, int channel)
{
	for (size_t d = 0; d < rig->device_count; d++)
		if (rig->devices[d].life == channel)
			return true;
	return false;
}

size_t survey_doubts(const struct survey *survey, struct text *out)
{
	size_t count = 0;
	for (size_t c = 0; c < survey->rig->channel_count; c++) {
		count += doubt_value(survey, (int)c, out);
		count += doubt_calibration(survey, (int)c, out);
		if (!is_life(survey->rig, (int)c))
			count += doubt_refresh(survey, (int)c, out);
	}
	for (size_t d = 0; d < survey->rig->device_count; d++)
		count += doubt_life(survey, (int)d, out);
	return count;
}

const char *survey_exception_hint(int exception)
{
	switch (exception) {
	case 1:
		return "the device does not know this function: try the other kind of register or bit";
	case 2:
		return "no such address, or it ends before this value: a manual that counts from 1, or "
		       "from "
		       "30001 or 40001, means one less here";
	case 3:
		return "it does not give as many registers at once, or only whole values: look at type, "
		       "registers and max_registers";
	case 4:
		return "the device failed while reading: its log or display says why";
	case 5:
		return "it needs longer: nothing to be had by polling";
	case 6:
		return "it is busy: try again, or give the device a minimum_pause";
	case 10:
		return "the gateway has no path to that unit: look at `unit`";
	case 11:
		return "nothing answers behind the gateway: look at `unit`, and whether the device is on";
	default:
		return "not an exception of the standard: the manual of the device explains it";
	}
}
