/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Which group is polled next: of those whose slot has come the one whose next
 * slot is nearest, asked anew before each block, so that a group of many blocks
 * and a long period does not hold up a fast one. A group without a pause counts
 * as if its period were the longest of the others: it takes what is left, and
 * is never starved. A slot that has passed when its turn comes is skipped and
 * counted, never made up for.
 */
#include "worker_state.h"

/* The round of a group is over: on to the next slot that has not passed. */
static void end_round(struct worker *worker, size_t group, int64_t now_ns)
{
	struct round *round = &worker->rounds[group];
	int64_t period = worker->plan->groups[group].period_ns;
	round->next = 0;
	round->number++;
	if (period == 0) {
		round->slot_ns = now_ns;
		return;
	}
	round->slot_ns += period;
	if (round->slot_ns < now_ns) {
		int64_t missed = (now_ns - round->slot_ns + period - 1) / period;
		round->slot_ns += missed * period;
		worker_lock(worker);
		worker->counts.missed_slots += (uint64_t)missed;
		worker_unlock(worker);
	}
}

static bool is_silent(struct worker *worker, int device)
{
	worker_lock(worker);
	bool silent = worker->devices[device].silent;
	worker_unlock(worker);
	return silent;
}

/* Of the groups that are due the one whose next slot is nearest; -1 and *due. passed: by group. */
static int urgent_group(const struct worker *worker, const bool *passed, int64_t now_ns,
                        int64_t *due)
{
	const struct poll_plan *plan = worker->plan;
	int64_t nearest = INT64_MAX;
	int urgent = -1;
	for (size_t i = 0; i < plan->group_count; i++) {
		const struct round *round = &worker->rounds[i];
		int64_t period = plan->groups[i].period_ns;
		int64_t next_slot = round->slot_ns + (period > 0 ? period : worker->longest_period_ns);
		if (plan->groups[i].count == 0 || passed[i])
			continue;
		if (round->slot_ns > now_ns)
			*due = round->slot_ns < *due ? round->slot_ns : *due;
		else if (urgent < 0 || next_slot < nearest) {
			urgent = (int)i;
			nearest = next_slot;
		}
	}
	return urgent;
}

/* Whether a poll of the device may go out beside what is under way. */
static bool may_fly(const struct worker *worker, int device)
{
	const struct rig_device *rig_device = &worker->rig->devices[device];
	size_t most = (size_t)rig_device->in_flight;
	if (worker->flight_count == 0)
		return true;
	if (most > (size_t)worker->link->depth)
		most = (size_t)worker->link->depth;
	if (most > FLIGHTS_MOST)
		most = FLIGHTS_MOST;
	return worker->flights[worker->flight_first].device == device && worker->flight_count < most &&
	       rig_device->minimum_pause_ns == 0;
}

/* The next block to read, taken from its round; NULL and *due where none is due. */
const struct poll_block *worker_next_poll(struct worker *worker, int64_t now_ns, int64_t *due,
                                          bool *ret_recorded)
{
	bool passed[GROUPS_MOST] = {false};
	*due = INT64_MAX;
	if (!worker->plan)
		return NULL;
	for (size_t turns = 0; turns < 2 * GROUPS_MOST; turns++) {
		int g = urgent_group(worker, passed, now_ns, due);
		if (g < 0)
			return NULL;
		const struct poll_group *group = &worker->plan->groups[g];
		struct round *round = &worker->rounds[g];
		while (round->next < group->count &&
		       is_silent(worker, group->blocks[round->next].read->device))
			round->next++;
		if (round->next == group->count) {
			/* A round with a period is over when its last reply is there. */
			if (group->period_ns > 0 && worker->flight_count > 0)
				passed[g] = true;
			else
				end_round(worker, (size_t)g, now_ns);
			continue;
		}
		const struct poll_block *block = &group->blocks[round->next];
		int64_t pause_until = worker->devices[block->read->device].pause_until_ns;
		if (pause_until > now_ns) {
			*due = pause_until < *due ? pause_until : *due;
			passed[g] = true;
			continue;
		}
		if (!may_fly(worker, block->read->device))
			return NULL;
		round->next++;
		*ret_recorded = group->decimate < 2 || round->number % group->decimate == 0;
		return block;
	}
	*due = now_ns + NS_PER_MS; /* every block is of a silent device */
	return NULL;
}

void worker_adopt_plan(struct worker *worker, int64_t now_ns)
{
	worker_lock(worker);
	if (worker->plan_changed) {
		worker->plan = worker->next_plan;
		worker->plan_changed = false;
		worker->plan_since_ns = now_ns;
		worker->longest_period_ns = 0;
		for (size_t i = 0; i < GROUPS_MOST; i++)
			worker->rounds[i] = (struct round){.slot_ns = now_ns};
		for (size_t i = 0; worker->plan && i < worker->plan->group_count; i++)
			if (worker->plan->groups[i].period_ns > worker->longest_period_ns)
				worker->longest_period_ns = worker->plan->groups[i].period_ns;
		/* What was not read lately is not known. */
		for (size_t i = 0; i < worker->rig->channel_count; i++)
			worker->latest[i] = (double)NAN;
	}
	worker_unlock(worker);
}
