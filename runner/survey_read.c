/* SPDX-License-Identifier: Apache-2.0 */
/*
 * See survey_read.h. Channels are first read one by one, so that an address
 * that the device does not have spoils no other; what answers is then read in
 * the blocks that a test would use, again and again, for the times.
 *
 * How often values change is told from life counters and from values that
 * change regularly only. A quantised value at rest changes when it likes; to
 * call that a refresh interval was rejected.
 */
#include "survey_read.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "survey_show.h"
#include "text.h"

enum { LOST_MOST = 3 };

static const enum link_function FUNCTIONS[] = {
    [PLACE_COIL] = LINK_READ_COILS,
    [PLACE_DISCRETE_INPUT] = LINK_READ_DISCRETE_INPUTS,
    [PLACE_INPUT_REGISTER] = LINK_READ_INPUT_REGISTERS,
    [PLACE_HOLDING_REGISTER] = LINK_READ_HOLDING_REGISTERS,
    [PLACE_IDENTIFICATION] = LINK_IDENTIFY,
};

static bool is_bits(enum place place)
{
	return place == PLACE_COIL || place == PLACE_DISCRETE_INPUT;
}

/* One request, waited for. False: the device is left alone, or gave no answer at all. */
static bool ask(struct survey *survey, int device, const struct link_request *request)
{
	const struct rig_device *rig_device = &survey->rig->devices[device];
	struct survey_device *state = &survey->device[device];
	struct link *link = survey->links[rig_device->link];
	struct link_reply *reply = survey->reply;
	struct err err = {0};
	if (!survey->link[rig_device->link].open || state->lost >= LOST_MOST)
		return false;
	if (rig_device->minimum_pause_ns > 0) {
		struct timespec pause = {.tv_sec = rig_device->minimum_pause_ns / NS_PER_S,
		                         .tv_nsec = rig_device->minimum_pause_ns % NS_PER_S};
		(void)nanosleep(&pause, NULL);
	}
	state->requests++;
	int64_t now = clock_now(&survey->clock);
	if (link_begin(link, request, now, &err) < 0) {
		reply->status = LINK_LOST;
		(void)snprintf(reply->message, sizeof reply->message, "%.150s", err.message);
	} else {
		while (link_end(link, now, reply) > now)
			now = clock_now(&survey->clock);
	}
	bool answered = reply->status == LINK_OK || reply->status == LINK_EXCEPTION;
	/* From a gateway: the device behind it is not there. */
	bool gateway =
	    reply->status == LINK_EXCEPTION && (reply->exception == 10 || reply->exception == 11);
	if (gateway)
		(void)snprintf(state->cause, sizeof state->cause, "exception %d (%s): %s", reply->exception,
		               modbus_exception_name(reply->exception),
		               survey_exception_hint(reply->exception));
	if (answered) {
		state->answers = state->answers || !gateway;
		state->lost = 0;
		return true;
	}
	state->lost++;
	state->timeouts++;
	(void)snprintf(state->cause, sizeof state->cause, "%s",
	               reply->message[0] ? reply->message : "no reply");
	return false;
}

static void clean_copy(char *out, size_t size, const char *raw)
{
	struct text text;
	text_init(&text, 1024);
	text_add_clean(&text, raw, strlen(raw));
	(void)snprintf(out, size, "%s", text_string(&text));
	text_release(&text);
}

/* ---- who is there ----------------------------------------------------------- */

static void open_links(struct survey *survey)
{
	for (size_t i = 0; i < survey->rig->link_count; i++) {
		struct err err = {0};
		survey->link[i].between_ns = -1;
		survey->link[i].open = link_open(survey->links[i], &err) == 0;
		if (!survey->link[i].open)
			(void)snprintf(survey->link[i].cause, sizeof survey->link[i].cause, "%.250s",
			               err.message);
	}
}

/* The basic objects of function 43/14, as far as the device has them. */
static void identify(struct survey *survey, int device)
{
	struct survey_device *state = &survey->device[device];
	for (int object = 0; object < SURVEY_OBJECTS; object++) {
		struct link_request request = {.unit = survey->rig->devices[device].unit,
		                               .function = LINK_IDENTIFY,
		                               .address = (uint16_t)object,
		                               .count = 1};
		bool answered = ask(survey, device, &request);
		state->object_status = survey->reply->status;
		state->object_exception = survey->reply->exception;
		if (!answered || survey->reply->status != LINK_OK)
			break;
		clean_copy(state->objects[object], sizeof state->objects[object], survey->reply->text);
	}
	state->lost = 0; /* a device without function 43 may also be silent about it */
}

/* ---- channels one by one ------------------------------------------------------ */

static void take_words(struct survey *survey, struct survey_channel *state,
                       const struct rig_channel *channel)
{
	const struct link_reply *reply = survey->reply;
	char raw[2 * LINK_REGISTERS_MOST + 1];
	if (channel->place == PLACE_IDENTIFICATION) {
		clean_copy(state->text, sizeof state->text, reply->text);
		return;
	}
	state->word_count = reply->count < SURVEY_WORDS_SHOWN ? reply->count : SURVEY_WORDS_SHOWN;
	memcpy(state->words, reply->words, (size_t)state->word_count * sizeof *state->words);
	if (channel->codec.type == CODEC_TEXT) {
		codec_decode_text(&channel->codec, reply->words, raw, sizeof raw);
		clean_copy(state->text, sizeof state->text, raw);
	} else if (is_bits(channel->place)) {
		state->value = reply->words[0];
	} else {
		state->value = codec_decode(&channel->codec, reply->words);
	}
}

static void read_channel(struct survey *survey, int index)
{
	const struct rig_channel *channel = &survey->rig->channels[index];
	struct survey_channel *state = &survey->channel[index];
	*state = (struct survey_channel){
	    .value = (double)NAN, .last = (double)NAN, .least = (double)NAN, .most = (double)NAN};
	if (channel->place == PLACE_DERIVED)
		return;
	bool single = is_bits(channel->place) || channel->place == PLACE_IDENTIFICATION;
	struct link_request request = {
	    .unit = survey->rig->devices[channel->device].unit,
	    .function = FUNCTIONS[channel->place],
	    .address = (uint16_t)channel->address,
	    .count = (uint16_t)(single ? 1 : codec_registers(&channel->codec)),
	};
	survey->reply->status = LINK_STOPPED;
	state->asked = ask(survey, channel->device, &request) || survey->reply->status != LINK_STOPPED;
	if (!state->asked)
		return;
	state->status = survey->reply->status;
	state->exception = survey->reply->exception;
	(void)snprintf(state->message, sizeof state->message, "%s", survey->reply->message);
	if (state->status == LINK_OK)
		take_words(survey, state, channel);
}

/* ---- blocks again and again ---------------------------------------------------- */

static void take_value(struct survey_channel *state, double value, int64_t now_ns)
{
	state->value = value;
	if (isnan(value))
		return;
	state->reads++;
	state->least = isnan(state->least) ? value : fmin(state->least, value);
	state->most = isnan(state->most) ? value : fmax(state->most, value);
	if (!isnan(state->last) && value != state->last) {
		if (state->changes == 0)
			state->first_change_ns = now_ns;
		else if (now_ns - state->last_change_ns > state->gap_most_ns)
			state->gap_most_ns = now_ns - state->last_change_ns;
		state->last_change_ns = now_ns;
		state->changes++;
	}
	state->last = value;
}

static bool read_block(struct survey *survey, struct survey_block *block)
{
	struct link_request request;
	block_request(survey->rig, block->read, &request);
	if (!ask(survey, block->read->device, &request) || survey->reply->status != LINK_OK)
		return false;
	for (size_t c = 0; c < block->read->channel_count; c++) {
		int channel = block->read->channels[c];
		int at = survey->rig->channels[channel].address - block->read->address;
		memcpy(survey->channel[channel].words, survey->reply->words + at,
		       (size_t)survey->channel[channel].word_count * sizeof *survey->reply->words);
		take_value(&survey->channel[channel],
		           block_value(survey->rig, block->read, channel, survey->reply),
		           survey->reply->received_ns);
	}
	return true;
}

static int ascending(const void *a, const void *b)
{
	const int64_t left = *(const int64_t *)a, right = *(const int64_t *)b;
	return (left > right) - (left < right);
}

static int time_link(struct survey *survey, int link, struct err *reterr)
{
	int64_t begin = clock_now(&survey->clock), before = 0;
	size_t blocks = 0, pauses = 0;
	for (size_t b = 0; b < survey->plan.count; b++)
		blocks += survey->plan.blocks[b].link == link;
	int64_t *pause = arena_array(survey->arena, (size_t)SURVEY_ROUNDS * blocks + 1, sizeof *pause);
	if (!pause)
		return err_set(reterr, ERR_NOMEM, "no memory for the survey");
	for (int round = 0; round < SURVEY_ROUNDS && blocks > 0; round++) {
		size_t good = 0;
		for (size_t b = 0; b < survey->plan.count; b++) {
			struct survey_block *block = &survey->block[b];
			if (block->read->link != link || !read_block(survey, block))
				continue;
			good++;
			block->rtt_ns[block->reads++] = survey->reply->received_ns - survey->reply->sent_ns;
			if (before > 0)
				pause[pauses++] = survey->reply->sent_ns - before;
			before = survey->reply->received_ns;
		}
		if (good == 0 || clock_now(&survey->clock) - begin > SURVEY_LINK_NS)
			break;
	}
	if (pauses > 0) {
		qsort(pause, pauses, sizeof *pause, ascending);
		survey->link[link].between_ns = pause[pauses / 2];
	}
	for (size_t b = 0; b < survey->plan.count; b++)
		if (survey->plan.blocks[b].link == link)
			qsort(survey->block[b].rtt_ns, survey->block[b].reads, sizeof(int64_t), ascending);
	return 0;
}

static int plan_blocks(struct survey *survey, struct err *reterr)
{
	const struct rig *rig = survey->rig;
	unsigned char *needed = arena_alloc(survey->arena, rig->channel_count + 1);
	if (!needed)
		return err_set(reterr, ERR_NOMEM, "no memory for the survey");
	for (size_t c = 0; c < rig->channel_count; c++)
		needed[c] = survey->channel[c].asked && survey->channel[c].status == LINK_OK;
	if (plan_reads(rig, needed, survey->arena, &survey->plan, reterr) < 0)
		return -1;
	survey->block = arena_array(survey->arena, survey->plan.count + 1, sizeof *survey->block);
	if (!survey->block)
		return err_set(reterr, ERR_NOMEM, "no memory for the survey");
	for (size_t b = 0; b < survey->plan.count; b++) {
		survey->block[b].read = &survey->plan.blocks[b];
		survey->block[b].rtt_ns = arena_array(survey->arena, SURVEY_ROUNDS, sizeof(int64_t));
		if (!survey->block[b].rtt_ns)
			return err_set(reterr, ERR_NOMEM, "no memory for the survey");
	}
	return 0;
}

int survey_take(struct survey *survey, struct session *session, struct err *reterr)
{
	const struct rig *rig = session->rig;
	*survey = (struct survey){
	    .rig = rig,
	    .links = session->links,
	    .clock = session->clock,
	    .arena = &session->arena,
	    .reply = arena_alloc(&session->arena, sizeof *survey->reply),
	    .link = arena_array(&session->arena, rig->link_count + 1, sizeof *survey->link),
	    .device = arena_array(&session->arena, rig->device_count + 1, sizeof *survey->device),
	    .channel = arena_array(&session->arena, rig->channel_count + 1, sizeof *survey->channel),
	};
	if (!survey->reply || !survey->link || !survey->device || !survey->channel)
		return err_set(reterr, ERR_NOMEM, "no memory for the survey");
	open_links(survey);
	for (size_t c = 0; c < rig->channel_count; c++)
		read_channel(survey, (int)c);
	for (size_t d = 0; d < rig->device_count; d++)
		if (survey->device[d].answers)
			identify(survey, (int)d);
	if (plan_blocks(survey, reterr) < 0)
		return -1;
	for (size_t l = 0; l < rig->link_count; l++)
		if (time_link(survey, (int)l, reterr) < 0)
			return -1;
	return 0;
}

void survey_again(struct survey *survey)
{
	for (size_t d = 0; d < survey->rig->device_count; d++)
		if (survey->device[d].lost >= LOST_MOST)
			survey->device[d].lost = LOST_MOST - 1; /* one more chance each time */
	for (size_t b = 0; b < survey->plan.count; b++)
		if (!read_block(survey, &survey->block[b]))
			for (size_t c = 0; c < survey->plan.blocks[b].channel_count; c++)
				survey->channel[survey->plan.blocks[b].channels[c]].value = (double)NAN;
}

/* ---- what it means ---------------------------------------------------------------- */

double survey_value(const struct survey *survey, int channel)
{
	const struct rig_channel *rig_channel = &survey->rig->channels[channel];
	if (rig_channel->place != PLACE_DERIVED)
		return survey->channel[channel].value;
	double inputs[DERIVE_INPUTS_MOST];
	struct channel_info infos[DERIVE_INPUTS_MOST];
	for (int i = 0; i < DERIVE_INPUTS_MOST; i++) {
		int input = rig_channel->derivation.inputs[i];
		inputs[i] = input >= 0 ? survey_value(survey, input) : (double)NAN;
		infos[i] = survey->rig->infos[input >= 0 ? input : channel];
	}
	return derive_value(&rig_channel->derivation, infos, inputs, &survey->rig->infos[channel],
	                    &survey->rig->machine);
}

int64_t survey_change_ns(const struct survey *survey, int channel, bool *ret_faster)
{
	const struct survey_channel *state = &survey->channel[channel];
	*ret_faster = false;
	if (state->changes < 10)
		return 0;
	int64_t mean = (state->last_change_ns - state->first_change_ns) / ((int64_t)state->changes - 1);
	if (state->gap_most_ns > 3 * mean)
		return 0; /* it changes when it likes */
	*ret_faster = (double)state->changes > 0.8 * (double)state->reads;
	return mean;
}
