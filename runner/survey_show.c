/* SPDX-License-Identifier: Apache-2.0 */
/* See survey_show.h. Columns are as wide as the longest name of the rig. */
#include "survey_show.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

static const char *const PLACES[] = {
    "coil", "discrete input", "input register", "holding register", "identification", "derived"};

static int widest_name(const struct rig *rig)
{
	size_t widest = 8;
	for (size_t c = 0; c < rig->channel_count; c++) {
		size_t length = strlen(rig->channels[c].info.name);
		widest = length > widest ? length : widest;
	}
	return (int)widest;
}

static const char *raw_text(const struct survey_channel *state, const struct rig_channel *channel,
                            char *buffer, size_t size)
{
	size_t used = 0;
	buffer[0] = '\0';
	if (channel->place <= PLACE_DISCRETE_INPUT) {
		(void)snprintf(buffer, size, "%u", state->words[0]);
		return buffer;
	}
	for (int i = 0; i < state->word_count && used + 6 < size; i++)
		used += (size_t)snprintf(buffer + used, size - used, "%s%04X", i ? " " : "",
		                         (unsigned)state->words[i]);
	return buffer;
}

static void show_value(const struct survey *survey, int index, struct text *out)
{
	const struct rig_channel *channel = &survey->rig->channels[index];
	const struct survey_channel *state = &survey->channel[index];
	char buffer[80];
	double value = survey_value(survey, index);
	if (channel->place != PLACE_DERIVED && state->asked && state->status == LINK_EXCEPTION) {
		text_printf(out, "exception %d (%s): %s", state->exception,
		            modbus_exception_name(state->exception),
		            survey_exception_hint(state->exception));
		return;
	}
	if (channel->place != PLACE_DERIVED && !state->asked) {
		text_puts(out, "not asked");
		return;
	}
	if (channel->place != PLACE_DERIVED && state->status != LINK_OK) {
		text_printf(out, "no reply: %s", state->message);
		return;
	}
	if (state->text[0])
		text_printf(out, "\"%s\"", state->text);
	else if (isnan(value))
		text_puts(out, "no value");
	else
		text_puts(out, channel_value_text(survey->rig, index, value, buffer, sizeof buffer));
}

static void show_channel(const struct survey *survey, int index, int width, struct text *out)
{
	const struct rig_channel *channel = &survey->rig->channels[index];
	char where[48], raw[64];
	if (channel->place == PLACE_DERIVED)
		(void)snprintf(where, sizeof where, "%.40s", channel->derivation.kind->name);
	else
		(void)snprintf(where, sizeof where, "%s %d", PLACES[channel->place], channel->address);
	text_printf(out, "  %-*s  %-22s  %-20s  ", width, channel->info.name, where,
	            channel->place == PLACE_DERIVED
	                ? ""
	                : raw_text(&survey->channel[index], channel, raw, sizeof raw));
	show_value(survey, index, out);
	bool faster;
	int64_t change = survey_change_ns(survey, index, &faster);
	if (change > 0)
		text_printf(out, "  (changes every %s%s)", duration_text(change, raw, sizeof raw),
		            faster ? " or faster" : "");
	text_puts(out, "\n");
}

static void show_rtt(const struct survey *survey, const struct survey_block *block,
                     struct text *out)
{
	char least[40], median[40], most[40];
	size_t n = block->reads;
	const struct read_block *read = block->read;
	text_printf(out, "  %s %d, %d %s: ", PLACES[read->place], read->address, read->count,
	            read->place <= PLACE_DISCRETE_INPUT ? "bits" : "registers");
	if (n == 0) {
		text_puts(out, "no reply when read as one block\n");
		return;
	}
	text_printf(out, "round trip min %s, median %s, max %s over %zu reads\n",
	            duration_text(block->rtt_ns[0], least, sizeof least),
	            duration_text(block->rtt_ns[n / 2], median, sizeof median),
	            duration_text(block->rtt_ns[n - 1], most, sizeof most), n);
	(void)survey;
}

static void show_identity(const struct survey *survey, int device, struct text *out)
{
	static const char *const OBJECTS[] = {"vendor", "product code", "revision"};
	const struct rig_device *rig_device = &survey->rig->devices[device];
	const struct survey_device *state = &survey->device[device];
	for (size_t i = 0; i < rig_device->identity_count; i++) {
		int channel = rig_device->identity[i].channel;
		text_printf(out, "  %s: ", rig_device->identity[i].key);
		show_value(survey, channel, out);
		text_printf(out, " (%s)\n", survey->rig->infos[channel].name);
	}
	text_puts(out, "  function 43/14:");
	bool any = false;
	for (int i = 0; i < SURVEY_OBJECTS; i++)
		if (state->objects[i][0]) {
			text_printf(out, "%s %s \"%s\"", any ? "," : "", OBJECTS[i], state->objects[i]);
			any = true;
		}
	if (!any && state->object_status == LINK_EXCEPTION)
		text_printf(out, " not offered, exception %d (%s)", state->object_exception,
		            modbus_exception_name(state->object_exception));
	else if (!any)
		text_puts(out, " no answer");
	text_puts(out, "\n");
}

static void show_device(const struct survey *survey, int device, int width, struct text *out)
{
	const struct rig *rig = survey->rig;
	const struct survey_device *state = &survey->device[device];
	text_printf(out, "\n%s, unit %u on %s\n", rig->devices[device].name, rig->devices[device].unit,
	            rig->links[rig->devices[device].link].name);
	if (!state->answers) {
		text_printf(out, "  does not answer%s%s\n", state->cause[0] ? ": " : "", state->cause);
		return;
	}
	show_identity(survey, device, out);
	if (state->timeouts > 0)
		text_printf(out, "  %zu of %zu requests were not answered; the last: %s\n", state->timeouts,
		            state->requests, state->cause);
	for (size_t b = 0; b < survey->plan.count; b++)
		if (survey->plan.blocks[b].device == device)
			show_rtt(survey, &survey->block[b], out);
	for (size_t c = 0; c < rig->channel_count; c++)
		if (rig->channels[c].place != PLACE_DERIVED && rig->channels[c].device == device)
			show_channel(survey, (int)c, width, out);
}

void survey_show(const struct survey *survey, struct text *out)
{
	const struct rig *rig = survey->rig;
	int width = widest_name(rig);
	text_printf(out, "rig %s: nothing was commanded\n", rig->name);
	for (size_t l = 0; l < rig->link_count; l++) {
		char between[40];
		text_printf(out, "\nlink %s, %s", rig->links[l].name, survey->links[l]->address);
		if (!survey->link[l].open)
			text_printf(out, ": %s", survey->link[l].cause);
		else if (survey->link[l].between_ns >= 0)
			text_printf(out, ": %s from a reply to the next request",
			            duration_text(survey->link[l].between_ns, between, sizeof between));
		text_puts(out, "\n");
	}
	for (size_t d = 0; d < rig->device_count; d++)
		show_device(survey, (int)d, width, out);
	bool any = false;
	for (size_t c = 0; c < rig->channel_count; c++) {
		if (rig->channels[c].place != PLACE_DERIVED)
			continue;
		text_puts(out, any ? "" : "\nderived channels\n");
		any = true;
		show_channel(survey, (int)c, width, out);
	}
}

void survey_show_values(const struct survey *survey, struct text *out)
{
	int width = widest_name(survey->rig);
	for (size_t c = 0; c < survey->rig->channel_count; c++) {
		text_printf(out, "  %-*s  ", width, survey->rig->channels[c].info.name);
		show_value(survey, (int)c, out);
		text_puts(out, "\n");
	}
}
