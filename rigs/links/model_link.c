/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The modelled bench as a link in virtual time. Nothing blocks: end() says
 * when to come back, first when the request is at the device (only then is it
 * executed, so that several links move one model forward in the order of
 * time), then when the last byte of the reply is in.
 *
 * A fixed duration for every transaction was rejected: rehearsed intervals
 * would say nothing about the bench. The extra of the turnaround is drawn from
 * a seeded generator, so that one seed gives one rehearsal, bit for bit.
 */
#include <stdatomic.h>
#include <stdio.h>
#include <stdlib.h>

#include "pdu.h"
#include "timing.h"

enum stage { STAGE_IDLE, STAGE_ON_THE_WAY, STAGE_ANSWERING };

struct model_link {
	struct link link;
	struct timing timing;
	int64_t timeout_ns;
	uint64_t random;
	link_execute *execute;
	void *context;
	atomic_bool interrupted;
	enum stage stage;
	struct link_request request;
	int64_t free_from_ns; /* the pause after the last frame is over */
	int64_t sent_ns, arrival_ns, due_ns;
	size_t reply_length; /* 0: no answer */
	uint8_t reply[LINK_PDU_MOST];
};

static struct model_link *model_of(struct link *link)
{
	return (struct model_link *)link;
}

static int model_open(struct link *link, struct err *reterr)
{
	(void)reterr;
	model_of(link)->stage = STAGE_IDLE;
	return 0;
}

static void model_close(struct link *link)
{
	model_of(link)->stage = STAGE_IDLE;
}

/* Xorshift (Marsaglia, Journal of Statistical Software 8(14), 2003): a number in [0, most]. */
static int64_t draw(struct model_link *model, int64_t most)
{
	model->random ^= model->random << 13;
	model->random ^= model->random >> 7;
	model->random ^= model->random << 17;
	return most > 0 ? (int64_t)((model->random >> 11) % (uint64_t)(most + 1)) : 0;
}

/* What timing wants to know: raw requests say their length as the count. */
static int count_of(const struct link_request *request)
{
	return request->function == LINK_RAW ? request->pdu_length : request->count;
}

static int model_begin(struct link *link, const struct link_request *request, int64_t now_ns,
                       struct err *reterr)
{
	struct model_link *model = model_of(link);
	uint8_t pdu[LINK_PDU_MOST];
	if (model->stage != STAGE_IDLE)
		return err_set(reterr, ERR_STATE, "%s: a request is still outstanding", link->address);
	if (pdu_build(request, pdu, reterr) < 0)
		return -1;
	atomic_store(&model->interrupted, false);
	model->request = *request;
	model->sent_ns = now_ns > model->free_from_ns ? now_ns : model->free_from_ns;
	model->arrival_ns = model->sent_ns + timing_request_ns(&model->timing, (int)request->function,
	                                                       count_of(request));
	model->stage = STAGE_ON_THE_WAY;
	return 0;
}

/* The request is at the device: it answers now. */
static void arrive(struct model_link *model)
{
	uint8_t pdu[LINK_PDU_MOST];
	const struct link_request *request = &model->request;
	int length = pdu_build(request, pdu, NULL);
	model->reply_length = model->execute(model->context, request->unit, pdu, (size_t)length,
	                                     model->arrival_ns, model->reply);
	int64_t reply_ns =
	    model->reply_length == 2 /* an exception */
	        ? timing_reply_ns(&model->timing, LINK_RAW, 0)
	        : timing_reply_ns(&model->timing, (int)request->function, count_of(request));
	model->due_ns = model->arrival_ns + reply_ns + draw(model, model->timing.jitter_ns);
	int64_t given_up_ns = model->sent_ns + model->timeout_ns;
	if (model->reply_length == 0 || model->due_ns > given_up_ns) {
		model->reply_length = 0;
		model->due_ns = given_up_ns > model->arrival_ns ? given_up_ns : model->arrival_ns;
	}
	model->stage = STAGE_ANSWERING;
}

static int64_t finish(struct model_link *model, int64_t at_ns)
{
	int64_t pause_ns = timing_t35_ns(&model->timing);
	if (pause_ns < model->timing.minimum_pause_ns)
		pause_ns = model->timing.minimum_pause_ns;
	model->free_from_ns = at_ns + pause_ns;
	model->stage = STAGE_IDLE;
	return at_ns;
}

static int64_t model_end(struct link *link, int64_t now_ns, struct link_reply *ret_reply)
{
	struct model_link *model = model_of(link);
	pdu_reply_clear(ret_reply);
	ret_reply->sent_ns = ret_reply->received_ns = now_ns;
	if (model->stage == STAGE_IDLE) {
		reply_set(ret_reply, LINK_LOST, "no request was begun");
		return now_ns;
	}
	if (atomic_exchange(&model->interrupted, false)) {
		reply_set(ret_reply, LINK_STOPPED, "broken off");
		ret_reply->sent_ns = model->sent_ns;
		return finish(model, now_ns);
	}
	if (model->stage == STAGE_ON_THE_WAY) {
		if (now_ns < model->arrival_ns)
			return model->arrival_ns;
		arrive(model);
	}
	if (now_ns < model->due_ns)
		return model->due_ns;
	ret_reply->sent_ns = model->sent_ns;
	ret_reply->received_ns = model->due_ns;
	if (model->reply_length == 0)
		reply_set(ret_reply, LINK_TIMEOUT, "%.60s, unit %u: no reply within %lld ms", link->address,
		          model->request.unit, (long long)(model->timeout_ns / 1000000));
	else
		pdu_parse(&model->request, model->reply, model->reply_length, ret_reply);
	return finish(model, model->due_ns);
}

static void model_interrupt(struct link *link)
{
	atomic_store(&model_of(link)->interrupted, true);
}

static void model_release(struct link *link)
{
	free(link);
}

static const struct link_ops model_ops = {
    .name = "model",
    .open = model_open,
    .close = model_close,
    .begin = model_begin,
    .end = model_end,
    .interrupt = model_interrupt,
    .release = model_release,
};

int link_model_new(const struct link_config *config, const struct timing *timing, uint64_t seed,
                   link_execute *execute, void *context, struct link **ret_link, struct err *reterr)
{
	struct model_link *model = calloc(1, sizeof *model);
	*ret_link = NULL;
	if (!model)
		return err_set(reterr, ERR_NOMEM, "memory ran out");
	model->timing = *timing;
	model->timeout_ns = config->reply_timeout_ns;
	model->random = seed * UINT64_C(0x9E3779B97F4A7C15) + 1; /* never 0, where it would stay */
	if (model->random == 0)
		model->random = 1;
	model->execute = execute;
	model->context = context;
	model->link.ops = &model_ops;
	model->link.clock = config->clock;
	model->link.clock_context = config->clock_context;
	(void)snprintf(model->link.address, sizeof model->link.address, "the modelled bench");
	*ret_link = &model->link;
	return 0;
}
