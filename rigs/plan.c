/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Which transactions read a set of channels, at the least cost on the wire.
 *
 * Channels of one device and place are intervals of addresses. Sorted by
 * start, some best division puts neighbours together: if a block held i and k
 * but not j between them, j lies inside that block's span, or k inside that of
 * j's block, and can move there at no cost. So a dynamic program over the
 * sorted list finds the optimum of all divisions in n^2 steps.
 *
 * Registers that no needed channel covers may be read across where the rig
 * describes them, or where the device allows gaps. Joining greedily whatever is
 * near was rejected: with a slow line and a limit of registers it splits in
 * the wrong places.
 */
#include "plan.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

struct interval {
	int first, end; /* addresses [first, end) */
	int channel;
};

/* One device and place. */
struct area {
	const struct rig *rig;
	int device;
	enum place place;
	struct timing timing;
	struct interval *intervals;
	size_t count;
};

struct timing rig_link_timing(const struct rig *rig, int link)
{
	const struct link_config *config = &rig->links[link].config;
	if (config->tcp_host)
		return timing_tcp();
	int bits = 1 + 8 + (config->parity != PARITY_NONE) + (config->stop_bits == 2 ? 2 : 1);
	return timing_rtu(config->baud, bits);
}

static bool is_bit_place(enum place place)
{
	return place == PLACE_COIL || place == PLACE_DISCRETE_INPUT;
}

static enum link_function read_function(enum place place)
{
	switch (place) {
	case PLACE_COIL:
		return LINK_READ_COILS;
	case PLACE_DISCRETE_INPUT:
		return LINK_READ_DISCRETE_INPUTS;
	case PLACE_INPUT_REGISTER:
		return LINK_READ_INPUT_REGISTERS;
	default:
		return LINK_READ_HOLDING_REGISTERS;
	}
}

static int width_of(const struct rig_channel *channel)
{
	return is_bit_place(channel->place) ? 1 : codec_registers(&channel->codec);
}

static int by_address(const void *a, const void *b)
{
	const struct interval *left = a, *right = b;
	if (left->first != right->first)
		return left->first < right->first ? -1 : 1;
	if (left->end != right->end)
		return left->end < right->end ? -1 : 1;
	return (left->channel > right->channel) - (left->channel < right->channel);
}

static bool lies_in(const struct area *area, const struct rig_channel *channel)
{
	return channel->device == area->device && channel->place == area->place;
}

/* Collects the needed intervals, sorted. */
static void collect(struct area *area, const unsigned char *needed)
{
	area->count = 0;
	for (size_t i = 0; i < area->rig->channel_count; i++) {
		const struct rig_channel *channel = &area->rig->channels[i];
		if (!needed[i] || !lies_in(area, channel) || channel->codec.type == CODEC_TEXT)
			continue;
		area->intervals[area->count++] = (struct interval){
		    .first = channel->address,
		    .end = channel->address + width_of(channel),
		    .channel = (int)i,
		};
	}
	qsort(area->intervals, area->count, sizeof *area->intervals, by_address);
}

/* Whether the rig describes every address of [first, end): then it is no gap. */
static bool is_described(const struct area *area, int first, int end)
{
	while (first < end) {
		int covered_to = first;
		for (size_t i = 0; i < area->rig->channel_count; i++) {
			const struct rig_channel *channel = &area->rig->channels[i];
			int channel_end = channel->address + width_of(channel);
			if (lies_in(area, channel) && channel->address <= first && channel_end > covered_to)
				covered_to = channel_end;
		}
		if (covered_to == first)
			return false;
		first = covered_to;
	}
	return true;
}

/* Most registers or bits that the device gives in one reply. */
static int most_of(const struct area *area)
{
	int most = area->rig->devices[area->device].max_registers;
	if (most < 1 || most > LINK_REGISTERS_MOST)
		most = LINK_REGISTERS_MOST;
	return is_bit_place(area->place) ? 16 * most : most;
}

/*
 * Dynamic program: cost[i] is the least cost of reading intervals i and up,
 * and last[i] the end of the block that begins there.
 */
static void divide(const struct area *area, int64_t *cost, size_t *last)
{
	const int most = most_of(area);
	const bool gaps = area->rig->devices[area->device].gaps_allowed;
	const int function = (int)read_function(area->place);

	cost[area->count] = 0;
	for (size_t i = area->count; i-- > 0;) {
		const int first = area->intervals[i].first;
		int end = area->intervals[i].end;
		cost[i] = INT64_MAX;
		for (size_t j = i; j < area->count; j++) {
			const struct interval *next = &area->intervals[j];
			if (!gaps && next->first > end && !is_described(area, end, next->first))
				break;
			end = next->end > end ? next->end : end;
			/* A value alone is never split, whatever the device says that it allows. */
			if (end - first > most && j > i)
				break;
			int64_t sum = timing_transaction_ns(&area->timing, function, end - first) + cost[j + 1];
			if (sum <= cost[i]) { /* of equal ones the longer block */
				cost[i] = sum;
				last[i] = j + 1;
			}
		}
	}
}

static int ascending(const void *a, const void *b)
{
	const int left = *(const int *)a, right = *(const int *)b;
	return (left > right) - (left < right);
}

/* Makes the block of intervals [from, to). */
static int add_block(const struct area *area, size_t from, size_t to, struct arena *arena,
                     struct read_plan *plan)
{
	struct read_block *block = &plan->blocks[plan->count];
	int end = 0;
	*block = (struct read_block){
	    .device = area->device,
	    .link = area->rig->devices[area->device].link,
	    .place = area->place,
	    .address = (uint16_t)area->intervals[from].first,
	    .channels = arena_array(arena, to - from, sizeof *block->channels),
	    .channel_count = to - from,
	    .id = (int)plan->count,
	};
	if (!block->channels)
		return -1;
	for (size_t i = from; i < to; i++) {
		block->channels[i - from] = area->intervals[i].channel;
		end = area->intervals[i].end > end ? area->intervals[i].end : end;
	}
	block->count = (uint16_t)(end - block->address);
	qsort(block->channels, block->channel_count, sizeof *block->channels, ascending);
	plan->count++;
	return 0;
}

static int plan_area(struct area *area, const unsigned char *needed, int64_t *cost, size_t *last,
                     struct arena *arena, struct read_plan *plan)
{
	collect(area, needed);
	divide(area, cost, last);
	for (size_t i = 0; i < area->count; i = last[i])
		if (add_block(area, i, last[i], arena, plan) < 0)
			return -1;
	return 0;
}

static int plan_device(const struct rig *rig, int device, const unsigned char *needed,
                       struct interval *intervals, int64_t *cost, size_t *last, struct arena *arena,
                       struct read_plan *plan)
{
	struct area area = {
	    .rig = rig,
	    .device = device,
	    .timing = rig_link_timing(rig, rig->devices[device].link),
	    .intervals = intervals,
	};
	area.timing.minimum_pause_ns = rig->devices[device].minimum_pause_ns;
	for (int place = PLACE_COIL; place <= PLACE_HOLDING_REGISTER; place++) {
		area.place = (enum place)place;
		if (plan_area(&area, needed, cost, last, arena, plan) < 0)
			return -1;
	}
	return 0;
}

int plan_reads(const struct rig *rig, const unsigned char *needed, struct arena *arena,
               struct read_plan *ret_plan, struct err *reterr)
{
	const size_t most = rig->channel_count + 1;
	struct interval *intervals = arena_array(arena, most, sizeof *intervals);
	int64_t *cost = arena_array(arena, most, sizeof *cost);
	size_t *last = arena_array(arena, most, sizeof *last);

	*ret_plan = (struct read_plan){
	    .blocks = arena_array(arena, most, sizeof *ret_plan->blocks),
	};
	if (!intervals || !cost || !last || !ret_plan->blocks)
		return err_set(reterr, ERR_NOMEM, "memory ran out");
	for (size_t link = 0; link < rig->link_count; link++)
		for (size_t device = 0; device < rig->device_count; device++)
			if (rig->devices[device].link == (int)link &&
			    plan_device(rig, (int)device, needed, intervals, cost, last, arena, ret_plan) < 0)
				return err_set(reterr, ERR_NOMEM, "memory ran out");
	return 0;
}

void block_request(const struct rig *rig, const struct read_block *block,
                   struct link_request *ret_request)
{
	*ret_request = (struct link_request){
	    .unit = rig->devices[block->device].unit,
	    .function = read_function(block->place),
	    .address = block->address,
	    .count = block->count,
	};
}

double block_value(const struct rig *rig, const struct read_block *block, int channel,
                   const struct link_reply *reply)
{
	const struct rig_channel *read = &rig->channels[channel];
	int at = read->address - block->address;
	if (reply->status != LINK_OK || at < 0 || at + width_of(read) > reply->count)
		return (double)NAN;
	if (is_bit_place(read->place))
		return (double)reply->words[at];
	return codec_decode(&read->codec, reply->words + at);
}

static bool shares_register(const struct codec *codec)
{
	return codec->type == CODEC_BIT || codec->mask != 0;
}

/* The request that writes encoded words of a register channel. */
static int register_request(const struct rig_channel *channel, double value,
                            const uint16_t *words_before, struct link_request *request,
                            double *ret_held)
{
	const int width = codec_registers(&channel->codec);
	const bool alone = !shares_register(&channel->codec);
	const size_t bytes = (size_t)width * sizeof *request->words;

	if (words_before)
		memcpy(request->words, words_before, bytes);
	if (codec_encode(&channel->codec, value, request->words, ret_held) < 0)
		return -1;
	request->count = (uint16_t)width;
	request->function = width == 1 ? LINK_WRITE_REGISTER : LINK_WRITE_REGISTERS;
	if (alone || words_before)
		return 0;
	if (width != 1)
		return -1;
	/* Without knowing what stands beside the field, the device must join them: the bits that
	 * encoding into all ones and into zeros leaves equal are those of the field. */
	uint16_t ones = 0xFFFF;
	(void)codec_encode(&channel->codec, value, &ones, NULL);
	uint16_t beside = request->words[0] ^ ones;
	request->function = LINK_MASK_WRITE;
	request->words[1] = request->words[0];
	request->words[0] = beside;
	return 0;
}

/* The write of a channel, not yet compared with its limits. */
static int write_request(const struct rig *rig, int channel, double value,
                         const uint16_t *words_before, struct link_request *request,
                         double *ret_held, struct err *reterr)
{
	const struct rig_channel *written = &rig->channels[channel];
	int rc = -1;

	if (written->device >= 0)
		*request = (struct link_request){
		    .unit = rig->devices[written->device].unit,
		    .address = (uint16_t)written->address,
		};
	if (written->place == PLACE_COIL && (value == 0.0 || value == 1.0)) {
		request->function = LINK_WRITE_COIL;
		request->count = 1;
		request->words[0] = value == 1.0;
		*ret_held = value;
		rc = 0;
	} else if (written->place == PLACE_HOLDING_REGISTER) {
		rc = register_request(written, value, words_before, request, ret_held);
	}
	if (rc < 0)
		return err_set(reterr, ERR_REFUSED, "%s cannot be written as %g %s", written->info.name,
		               value, written->info.unit->name);
	return 0;
}

int command_request(const struct rig *rig, int channel, double value, const uint16_t *words_before,
                    struct link_request *ret_request, struct err *reterr)
{
	const struct rig_channel *written = &rig->channels[channel];
	const char *unit = written->info.unit->name;
	double held = (double)NAN;

	if (!written->command)
		return err_set(reterr, ERR_REFUSED, "%s is no command of this rig", written->info.name);
	/* Written so that a value that is no number is refused too. */
	if (!(value >= written->least && value <= written->most))
		return err_set(reterr, ERR_REFUSED, "%s = %g %s is outside what the rig allows, %g to %g",
		               written->info.name, value, unit, written->least, written->most);
	if (write_request(rig, channel, value, words_before, ret_request, &held, reterr) < 0)
		return -1;
	/* What the device will read out of the registers, up to the last digits of its type. */
	double digits = written->codec.type == CODEC_FLOAT32 ? 1.2e-7 : 1e-12;
	double slack = digits * fabs(held) + 1e-9 * codec_resolution(&written->codec);
	if (!(held >= written->least - slack && held <= written->most + slack))
		return err_set(reterr, ERR_REFUSED,
		               "%s = %g %s would be held as %g, outside what the rig allows, %g to %g",
		               written->info.name, value, unit, held, written->least, written->most);
	return 0;
}

bool attempt_allowed(const struct rig *rig, const struct attempt *attempt)
{
	for (size_t i = 0; i < rig->attempt_count; i++) {
		const struct allowed_attempt *allowed = &rig->attempts[i];
		if (attempt->channel >= 0 && allowed->channel == attempt->channel)
			return true;
		if (attempt->channel < 0 && allowed->channel < 0 && allowed->any_function &&
		    allowed->device == attempt->device)
			return true;
	}
	return false;
}

int attempt_request(const struct rig *rig, const struct attempt *attempt,
                    struct link_request *ret_request, struct err *reterr)
{
	double held;
	if (!attempt_allowed(rig, attempt))
		return err_set(reterr, ERR_REFUSED, "the rig does not allow the attempt '%s'",
		               attempt->name);
	if (attempt->channel >= 0)
		return write_request(rig, attempt->channel, attempt->value, NULL, ret_request, &held,
		                     reterr);
	*ret_request = attempt->request;
	ret_request->unit = rig->devices[attempt->device].unit;
	return 0;
}
