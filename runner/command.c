/* SPDX-License-Identifier: Apache-2.0 */
/*
 * One command, until it is known to have been taken.
 *
 * A reply is proof enough. After a lost reply nobody knows: the register is
 * read back, and only where it does not show the value is the write repeated
 * (writing first and asking later would start a motor twice). A channel with
 * `read_back: none` cannot be asked, so a lost reply is a failure. On the way
 * to rest writes are repeated blindly: that is the one exception.
 */
#include <stdio.h>

#include "conductor_state.h"

enum stage { STAGE_READ_BEFORE = 0, STAGE_WRITE, STAGE_READ_BACK };

enum { TRIES_MOST = 3 };

static bool is_masked(const struct rig_channel *channel)
{
	return channel->codec.mask != 0 ||
	       (channel->codec.type == CODEC_BIT && channel->place == PLACE_HOLDING_REGISTER);
}

void command_start(struct conductor *conductor, struct command_op *op, int channel, double value,
                   int64_t now_ns)
{
	const struct rig_channel *rig_channel = &conductor->rig->channels[channel];
	const struct rig_link *link =
	    &conductor->rig->links[conductor->rig->devices[rig_channel->device].link];
	*op = (struct command_op){.channel = channel,
	                          .value = value,
	                          .stage = is_masked(rig_channel) ? STAGE_READ_BEFORE : STAGE_WRITE,
	                          .begin_ns = now_ns,
	                          .deadline_ns = now_ns + NS_PER_S + 4 * link->reply_timeout_ns,
	                          .first_sent_ns = -1};
}

static void read_request(const struct rig *rig, const struct rig_channel *channel,
                         struct link_request *request)
{
	static const enum link_function functions[] = {
	    [PLACE_COIL] = LINK_READ_COILS,
	    [PLACE_DISCRETE_INPUT] = LINK_READ_DISCRETE_INPUTS,
	    [PLACE_INPUT_REGISTER] = LINK_READ_INPUT_REGISTERS,
	    [PLACE_HOLDING_REGISTER] = LINK_READ_HOLDING_REGISTERS,
	};
	bool bits = channel->place == PLACE_COIL || channel->place == PLACE_DISCRETE_INPUT;
	*request = (struct link_request){
	    .unit = rig->devices[channel->device].unit,
	    .function = functions[channel->place],
	    .address = (uint16_t)channel->address,
	    .count = (uint16_t)(bits ? 1 : codec_registers(&channel->codec)),
	};
}

static int make_request(struct conductor *conductor, struct command_op *op,
                        struct link_request *request, struct err *err)
{
	const struct rig *rig = conductor->rig;
	const struct rig_channel *channel = &rig->channels[op->channel];
	if (op->stage == STAGE_WRITE)
		return command_request(rig, op->channel, op->value,
		                       op->have_before ? op->words_before : NULL, request, err);
	int shown = op->stage == STAGE_READ_BACK ? channel->read_back : op->channel;
	read_request(rig, &rig->channels[shown], request);
	return 0;
}

static double shown_value(const struct rig_channel *channel, const struct link_reply *reply)
{
	if (channel->place == PLACE_COIL || channel->place == PLACE_DISCRETE_INPUT)
		return reply->words[0];
	return codec_decode(&channel->codec, reply->words);
}

static enum progress fail(struct command_op *op, const char *name, const char *what)
{
	(void)snprintf(op->why, sizeof op->why, "command %s = %.6g: %s", name, op->value, what);
	return PROGRESS_FAILED;
}

/* What the reply of the present stage means. */
static enum progress take_reply(struct conductor *conductor, struct command_op *op, bool resting,
                                const struct link_reply *reply)
{
	const struct rig_channel *channel = &conductor->rig->channels[op->channel];
	const char *name = channel->info.name;
	bool good = reply->status == LINK_OK;
	if (op->stage == STAGE_WRITE && op->first_sent_ns < 0)
		op->first_sent_ns = reply->sent_ns;
	if (reply->status == LINK_EXCEPTION) {
		op->exception = reply->exception;
		char what[96];
		(void)snprintf(what, sizeof what, "the device refuses with exception %d (%s)",
		               reply->exception, modbus_exception_name(reply->exception));
		return fail(op, name, what);
	}
	if (reply->status == LINK_REFUSED)
		return fail(op, name, reply->message);
	if (!good && ++op->tries >= TRIES_MOST)
		return fail(op, name, reply->message[0] ? reply->message : "no reply");
	switch ((enum stage)op->stage) {
	case STAGE_READ_BEFORE:
		if (good) {
			for (int i = 0; i < codec_registers(&channel->codec) && i < 4; i++)
				op->words_before[i] = reply->words[i];
			op->have_before = true;
			op->stage = STAGE_WRITE;
		}
		return PROGRESS_RUNNING;
	case STAGE_WRITE:
		op->sent_ns = op->first_sent_ns;
		op->received_ns = reply->received_ns;
		if (good)
			return PROGRESS_DONE;
		if (resting)
			return PROGRESS_RUNNING; /* again, blindly */
		if (channel->read_back < 0)
			return fail(op, name, "the reply was lost, and the rig says read_back: none");
		op->stage = STAGE_READ_BACK;
		return PROGRESS_RUNNING;
	case STAGE_READ_BACK:
		if (!good)
			return PROGRESS_RUNNING;
		const struct rig_channel *shown = &conductor->rig->channels[channel->read_back];
		double step = codec_resolution(&channel->codec) + codec_resolution(&shown->codec);
		if (fabs(shown_value(shown, reply) - op->value) <= step + 1e-6 * fabs(op->value)) {
			op->received_ns = reply->received_ns;
			return PROGRESS_DONE;
		}
		op->stage = STAGE_WRITE; /* it was not taken: this is a first write still */
		return PROGRESS_RUNNING;
	}
	return PROGRESS_FAILED;
}

enum progress command_tick(struct conductor *conductor, struct command_op *op, bool resting,
                           int64_t now_ns, int64_t *due_ns)
{
	const struct rig *rig = conductor->rig;
	const struct rig_channel *channel = &rig->channels[op->channel];
	struct worker *worker = conductor->workers[rig->devices[channel->device].link];
	if (op->posted) {
		struct link_reply reply;
		if (!worker_done(worker, &reply)) {
			if (now_ns < op->deadline_ns) {
				if (op->deadline_ns < *due_ns)
					*due_ns = op->deadline_ns;
				return PROGRESS_RUNNING;
			}
			worker_drop_job(worker);
			char text[192];
			return fail(op, channel->info.name, worker_last_error(worker, text, sizeof text));
		}
		op->posted = false;
		enum progress progress = take_reply(conductor, op, resting, &reply);
		if (progress != PROGRESS_RUNNING)
			return progress;
	}
	if (now_ns >= op->deadline_ns)
		return fail(op, channel->info.name, "it could not be confirmed in time");
	if (!worker_job_free(worker)) {
		if (now_ns + NS_PER_MS < *due_ns)
			*due_ns = now_ns + NS_PER_MS;
		return PROGRESS_RUNNING;
	}
	struct link_request request;
	struct err err = {0};
	if (make_request(conductor, op, &request, &err) < 0) {
		(void)snprintf(op->why, sizeof op->why, "%.190s", err.message);
		return PROGRESS_FAILED;
	}
	conductor->anything_commanded = true;
	worker_post(worker, &request, channel->device, false);
	op->posted = true;
	if (op->deadline_ns < *due_ns)
		*due_ns = op->deadline_ns;
	return PROGRESS_RUNNING;
}
