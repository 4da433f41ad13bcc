/* SPDX-License-Identifier: Apache-2.0 */
/*
 * See guard.h. It repeats on purpose what command_request() has checked: that
 * one makes commands, this one doubts them. Sharing the check was rejected,
 * since a mistake in it would then open both doors.
 */
#include "guard.h"

#include <math.h>
#include <stdlib.h>

/* A ramp's steps come a little early or late; so much time is given on top. */
static const double SLEW_SLACK_S = 0.02;

int guard_init(struct guard *guard, const struct rig *rig, struct err *reterr)
{
	guard->rig = rig;
	guard->last = calloc(rig->channel_count + 1, sizeof *guard->last);
	guard->last_at_ns = calloc(rig->channel_count + 1, sizeof *guard->last_at_ns);
	if (!guard->last || !guard->last_at_ns) {
		guard_release(guard);
		return err_set(reterr, ERR_NOMEM, "no memory for the guard of a link");
	}
	for (size_t i = 0; i < rig->channel_count; i++)
		guard->last[i] = (double)NAN;
	return 0;
}

void guard_release(struct guard *guard)
{
	free(guard->last);
	free(guard->last_at_ns);
	guard->last = NULL;
	guard->last_at_ns = NULL;
}

static int channel_length(const struct rig_channel *channel)
{
	return channel->place == PLACE_COIL ? 1 : codec_registers(&channel->codec);
}

static double written_value(const struct rig_channel *channel, const struct link_request *request)
{
	int at = channel->address - request->address;
	if (channel->place == PLACE_COIL)
		return request->words[at] ? 1 : 0;
	return codec_decode(&channel->codec, request->words + at);
}

static int check_value(const struct guard *guard, size_t index, double value, bool resting,
                       int64_t now_ns, struct err *reterr)
{
	const struct rig_channel *channel = &guard->rig->channels[index];
	double slack = 1e-6 * fabs(value) + 1e-9 * channel->info.resolution;
	if (!(value >= channel->least - slack && value <= channel->most + slack))
		return err_set(reterr, ERR_REFUSED, "%s = %g %s is outside what the rig allows, %g to %g",
		               channel->info.name, value, channel->info.unit->name, channel->least,
		               channel->most);
	if (!(channel->slew > 0) || resting || isnan(guard->last[index]))
		return 0;
	double seconds = (double)(now_ns - guard->last_at_ns[index]) / 1e9 + SLEW_SLACK_S;
	if (fabs(value - guard->last[index]) > channel->slew * seconds + channel->info.resolution)
		return err_set(reterr, ERR_REFUSED,
		               "%s from %g to %g %s in %.3g s is faster than the rig allows, %g per second",
		               channel->info.name, guard->last[index], value, channel->info.unit->name,
		               seconds, channel->slew);
	return 0;
}

/* The channels of a write are checked, then remembered; each address must belong to one. */
static int check_write(struct guard *guard, int device, const struct link_request *request,
                       enum place place, bool resting, int64_t now_ns, struct err *reterr)
{
	const struct rig *rig = guard->rig;
	unsigned char owned[LINK_WRITE_BITS_MOST] = {0};
	int first = request->address, end = first + request->count;
	if (request->count == 0 || request->count > LINK_WRITE_BITS_MOST ||
	    (place == PLACE_HOLDING_REGISTER && request->count > LINK_WRITE_REGISTERS_MOST))
		return err_set(reterr, ERR_REFUSED, "a write of %u values", request->count);
	for (int pass = 0; pass < 2; pass++)
		for (size_t i = 0; i < rig->channel_count; i++) {
			const struct rig_channel *channel = &rig->channels[i];
			int from = channel->address, to = from + channel_length(channel);
			/* What only reads a register does not make it writable. */
			if (!channel->command || channel->device != device || channel->place != place ||
			    to <= first || from >= end)
				continue;
			if (from < first || to > end)
				return err_set(reterr, ERR_REFUSED, "%s would be written in part",
				               channel->info.name);
			double value = written_value(channel, request);
			if (pass == 0) {
				if (check_value(guard, i, value, resting, now_ns, reterr) < 0)
					return -1;
				for (int at = from; at < to; at++)
					owned[at - first] = 1;
			} else {
				guard->last[i] = value;
				guard->last_at_ns[i] = now_ns;
			}
		}
	for (int at = first; at < end; at++)
		if (!owned[at - first])
			return err_set(reterr, ERR_REFUSED,
			               "a write to %d of %s, which is no command of the rig", at,
			               rig->devices[device].name);
	return 0;
}

int guard_pass(struct guard *guard, int device, const struct link_request *request, bool resting,
               int64_t now_ns, struct err *reterr)
{
	switch (request->function) {
	case LINK_READ_COILS:
	case LINK_READ_DISCRETE_INPUTS:
	case LINK_READ_HOLDING_REGISTERS:
	case LINK_READ_INPUT_REGISTERS:
	case LINK_IDENTIFY:
		return 0;
	case LINK_WRITE_COIL:
	case LINK_WRITE_COILS:
		return check_write(guard, device, request, PLACE_COIL, resting, now_ns, reterr);
	case LINK_WRITE_REGISTER:
	case LINK_WRITE_REGISTERS:
		return check_write(guard, device, request, PLACE_HOLDING_REGISTER, resting, now_ns, reterr);
	case LINK_MASK_WRITE:
	case LINK_RAW:
		break;
	}
	return err_set(reterr, ERR_REFUSED, "function %d is no read and no plain write",
	               (int)request->function);
}
