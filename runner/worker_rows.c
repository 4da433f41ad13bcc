/* SPDX-License-Identifier: Apache-2.0 */
/*
 * What a reply means beside its values: watches are fed, life counters looked
 * at, interlocks raised, the row sent to main. Interlocks are evaluated here,
 * by who reads, so that no queue stands between a violation and the stop.
 */
#include <stdio.h>

#include "worker_state.h"

static const struct rig_link *link_of(const struct worker *worker)
{
	return &worker->rig->links[worker->config.link_index];
}

static bool life_stands(const struct worker *worker, int device, int64_t now_ns)
{
	const struct rig_device *rig_device = &worker->rig->devices[device];
	const struct device_state *state = &worker->devices[device];
	return rig_device->life >= 0 && !isnan(state->life) &&
	       now_ns - state->life_moved_ns > rig_device->life_within_ns;
}

double worker_channel_now(const struct worker *worker, int channel)
{
	const struct rig_channel *rig_channel = &worker->rig->channels[channel];
	if (rig_channel->place != PLACE_DERIVED)
		return worker->latest[channel];
	double inputs[DERIVE_INPUTS_MOST];
	struct channel_info infos[DERIVE_INPUTS_MOST];
	for (int i = 0; i < DERIVE_INPUTS_MOST; i++) {
		int input = rig_channel->derivation.inputs[i];
		inputs[i] = input >= 0 ? worker_channel_now(worker, input) : (double)NAN;
		infos[i] = worker->rig->infos[input >= 0 ? input : channel];
	}
	return derive_value(&rig_channel->derivation, infos, inputs, &worker->rig->infos[channel],
	                    &worker->rig->machine);
}

static bool block_feeds(const struct worker *worker, const struct read_block *block, int channel)
{
	const struct rig_channel *rig_channel = &worker->rig->channels[channel];
	if (rig_channel->place == PLACE_DERIVED) {
		for (int i = 0; i < DERIVE_INPUTS_MOST; i++)
			if (rig_channel->derivation.inputs[i] >= 0 &&
			    block_feeds(worker, block, rig_channel->derivation.inputs[i]))
				return true;
		return false;
	}
	for (size_t i = 0; i < block->channel_count; i++)
		if (block->channels[i] == channel)
			return true;
	return false;
}

/* Feeds the watches; returns a violated interlock or NULL. Mutex held. */
static const struct watch *feed_watches(struct worker *worker, const struct read_block *block,
                                        bool good, const struct link_reply *reply)
{
	const struct watch *violated = NULL;
	bool stands = life_stands(worker, block->device, reply->received_ns);
	for (int i = 0; i < WATCHES_MOST; i++) {
		struct watch *watch = &worker->watches[i];
		if (!worker->watch_used[i] || !watch->active ||
		    !block_feeds(worker, block, watch->condition.channel))
			continue;
		const struct channel_info *info = &worker->rig->infos[watch->condition.channel];
		bool usable = good && !(stands && watch->kind == WATCH_AWAIT), before = watch->fired;
		watch_row(watch, reply->sent_ns - info->refresh_ns - info->delay_most_ns,
		          reply->received_ns - info->delay_least_ns,
		          usable ? worker_channel_now(worker, watch->condition.channel) : (double)NAN);
		worker->watch_fired = worker->watch_fired || (watch->fired && !before);
		if (watch->fired && watch->kind == WATCH_INTERLOCK && !violated)
			violated = watch;
	}
	return violated;
}

static void note_life(struct worker *worker, int device, int64_t now_ns)
{
	int life = worker->rig->devices[device].life;
	struct device_state *state = &worker->devices[device];
	if (life < 0 || isnan(worker->latest[life]))
		return;
	if (isnan(state->life) || worker->latest[life] != state->life) {
		state->life = worker->latest[life];
		state->life_moved_ns = now_ns;
	}
}

static void interlock_violated(struct worker *worker, const struct watch *watch, int64_t now_ns)
{
	int channel = watch->condition.channel;
	const struct channel_info *info = &worker->rig->infos[channel];
	struct journal_event event = {.kind = JOURNAL_INTERLOCK,
	                              .time_ns = now_ns,
	                              .suite = -1,
	                              .test = -1,
	                              .device = -1,
	                              .link = worker->config.link_index,
	                              .channel = channel,
	                              .earliest_ns = watch->became_earliest_ns,
	                              .latest_ns = watch->became_latest_ns,
	                              .value = watch->value};
	(void)snprintf(event.text, sizeof event.text, "%s is %.6g %s", info->name, watch->value,
	               info->unit->name);
	if (stop_raise(worker->config.stop, "interlock: %s", event.text))
		(void)ring_push(&worker->events, &event, sizeof event);
}

void worker_row_out(struct worker *worker, const struct flight *flight, bool good)
{
	const struct read_block *block = flight->polled->read;
	struct row *row = worker->row;
	struct watch violated_copy;
	row->generation = worker->plan->generation;
	row->block = block->id;
	row->sent_ns = worker->reply.sent_ns;
	row->received_ns = worker->reply.received_ns;
	row->count = block->channel_count;
	for (size_t i = 0; i < block->channel_count; i++)
		row->values[i] = good ? block_value(worker->rig, block, block->channels[i], &worker->reply)
		                      : (double)NAN;
	worker_lock(worker);
	for (size_t i = 0; i < block->channel_count; i++)
		worker->latest[block->channels[i]] = row->values[i];
	if (good)
		note_life(worker, block->device, row->received_ns);
	const struct watch *violated = feed_watches(worker, block, good, &worker->reply);
	if (violated)
		violated_copy = *violated;
	bool rest = worker->rest;
	worker->counts.rows++;
	worker_unlock(worker);
	if (violated && !rest)
		interlock_violated(worker, &violated_copy, row->received_ns);
	if (row->generation >= 0 && flight->recorded &&
	    !ring_push(&worker->rows, row, sizeof *row + row->count * sizeof(double)))
		(void)stop_raise(worker->config.stop,
		                 "samples come faster than they can be written to the disk");
}

/*
 * A polled device ends the run when it has given no good answer for too long,
 * or when its life counter stands: a frozen register image looks like a calm
 * bench. Mutex held.
 */
static void check_stale(struct worker *worker, int64_t now_ns)
{
	const struct poll_plan *plan = worker->plan;
	if (!plan || worker->rest)
		return;
	for (size_t g = 0; g < plan->group_count; g++)
		for (size_t b = 0; b < plan->groups[g].count; b++) {
			int index = plan->groups[g].blocks[b].read->device;
			const struct device_state *device = &worker->devices[index];
			int64_t since = device->last_good_ns > worker->plan_since_ns ? device->last_good_ns
			                                                             : worker->plan_since_ns;
			if (device->silent)
				continue;
			int64_t patience = worker->rig->stale_after_ns > 2 * plan->groups[g].period_ns
			                       ? worker->rig->stale_after_ns
			                       : 2 * plan->groups[g].period_ns;
			if (life_stands(worker, index, now_ns) &&
			    now_ns - device->life_moved_ns >
			        worker->rig->devices[index].life_within_ns + patience &&
			    now_ns - worker->plan_since_ns > patience)
				(void)stop_raise(worker->config.stop, "the life counter of %s stands for %.3g s",
				                 worker->rig->devices[index].name,
				                 (double)(now_ns - device->life_moved_ns) / 1e9);
			if (now_ns - since > patience)
				(void)stop_raise(worker->config.stop,
				                 "link %s: no good answer from %s for %.3g s%s%s",
				                 link_of(worker)->name, worker->rig->devices[index].name,
				                 (double)(now_ns - since) / 1e9, worker->last_error[0] ? "; " : "",
				                 worker->last_error);
		}
}

void worker_watch_devices(struct worker *worker, int64_t now_ns)
{
	bool before = stop_raised(worker->config.stop);
	worker_lock(worker);
	check_stale(worker, now_ns);
	worker_unlock(worker);
	if (!before && stop_raised(worker->config.stop))
		worker->config.wake(worker->config.wake_context);
}
