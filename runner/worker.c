/* SPDX-License-Identifier: Apache-2.0 */
/*
 * See worker.h. One slot for jobs is enough, since the conductor commands in
 * the order of the suite and waits for each reply; a queue would let a command
 * of an aborted test slip out behind the safe state.
 *
 * Which group is polled next: of those whose slot has come the one whose next
 * slot is nearest, asked anew before each block, so that a group of many blocks
 * and a long period does not hold up a fast one. A group without a pause counts
 * as if its period were the longest of the others: it takes what is left, and
 * is never starved. A slot that has passed when its turn comes is skipped and
 * counted, never made up for.
 *
 * Several polls may be under way where the link can and the device's in_flight
 * allows it, all to one device. A command waits until they are answered and
 * then goes alone, so that a reply to a write is never mixed up with anything.
 *
 * Thread rule: fields under "tick only" belong to worker_tick(); fields under
 * "shared" are touched with the mutex held, and the mutex is never held while
 * the link blocks.
 */
#include "worker.h"

#include <semaphore.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/prctl.h>
#include <time.h>

enum { FLIGHTS_MOST = 16 };

enum job_state { JOB_FREE = 0, JOB_POSTED, JOB_RUNNING, JOB_DONE };

struct device_state {
	bool silent;
	int64_t last_sent_ns, last_received_ns;
	int64_t last_good_ns;
	int64_t pause_until_ns;
	double life;
	int64_t life_moved_ns;
};

/* A request that is on the wire. */
struct flight {
	const struct poll_block *polled; /* NULL: a job */
	int device;
	bool attempt;  /* of a job: must be refused */
	bool recorded; /* of a poll: not one that `decimate` leaves out */
	int64_t since_ns;
};

/* Where a group stands: its slot, and the next block of the round that began with it. */
struct round {
	int64_t slot_ns;
	size_t next;
	int64_t number; /* of the round, for `decimate` */
};

struct worker {
	struct worker_config config;
	const struct rig *rig;
	/* tick only */
	struct link *link;
	struct guard guard;
	bool open, draining, broken; /* broken: to be closed once the last flight has ended */
	int64_t next_open_ns, open_pause_ns;
	struct flight flights[FLIGHTS_MOST]; /* in the order of their replies */
	size_t flight_first, flight_count;
	struct link_request request;
	struct link_reply reply;
	const struct poll_plan *plan;
	struct round rounds[GROUPS_MOST];
	int64_t longest_period_ns, spin_ns;
	bool watch_fired; /* since the conductor was last woken */
	struct row *row;
	struct ring rows, events;
	/* shared */
	pthread_mutex_t mutex;
	sem_t wakes; /* posted once for each time that woken becomes true */
	bool woken, quit, rest, renew, fresh;
	enum job_state job;
	bool job_dropped, job_attempt;
	int job_device;
	struct link_request job_request;
	struct link_reply job_reply;
	const struct poll_plan *next_plan;
	bool plan_changed;
	struct device_state *devices;
	double *latest;
	struct watch watches[WATCHES_MOST];
	bool watch_used[WATCHES_MOST];
	struct worker_counts counts;
	bool shared_busy;
	int shared_busy_device;
	int64_t shared_busy_since_ns, plan_since_ns;
	char last_error[192];
};

static void lock(struct worker *worker)
{
	(void)pthread_mutex_lock(&worker->mutex);
}

static void unlock(struct worker *worker)
{
	(void)pthread_mutex_unlock(&worker->mutex);
}

static const struct rig_link *link_of(const struct worker *worker)
{
	return &worker->rig->links[worker->config.link_index];
}

int worker_new(const struct worker_config *config, struct worker **ret_worker, struct err *reterr)
{
	struct worker *worker = calloc(1, sizeof *worker);
	if (!worker)
		return err_set(reterr, ERR_NOMEM, "no memory for the worker of a link");
	const struct rig *rig = config->rig;
	worker->config = *config;
	worker->rig = rig;
	worker->link = config->link;
	worker->open_pause_ns = 50 * NS_PER_MS;
	worker->devices = calloc(rig->device_count, sizeof *worker->devices);
	worker->latest = calloc(rig->channel_count, sizeof *worker->latest);
	size_t row_size = sizeof *worker->row + config->row_values_most * sizeof(double);
	worker->row = calloc(1, row_size);
	/* Main's progress line takes it too, and must not hold up a link of a higher priority. */
	pthread_mutexattr_t attributes;
	(void)pthread_mutexattr_init(&attributes);
	(void)pthread_mutexattr_setprotocol(&attributes, PTHREAD_PRIO_INHERIT);
	(void)pthread_mutex_init(&worker->mutex, &attributes);
	(void)pthread_mutexattr_destroy(&attributes);
	(void)sem_init(&worker->wakes, 0, 0);
	if (!worker->devices || !worker->latest || !worker->row ||
	    ring_init(&worker->rows, row_size, 16384, reterr) < 0 ||
	    ring_init(&worker->events, sizeof(struct journal_event), 256, reterr) < 0 ||
	    guard_init(&worker->guard, rig, reterr) < 0) {
		(void)err_set(reterr, ERR_NOMEM, "no memory for the worker of a link");
		worker->link = NULL; /* stays the caller's */
		worker_free(worker);
		return -1;
	}
	for (size_t i = 0; i < rig->channel_count; i++)
		worker->latest[i] = (double)NAN;
	for (size_t i = 0; i < rig->device_count; i++)
		worker->devices[i].life = (double)NAN;
	*ret_worker = worker;
	return 0;
}

void worker_free(struct worker *worker)
{
	if (!worker)
		return;
	link_release(worker->link);
	guard_release(&worker->guard);
	ring_release(&worker->rows);
	ring_release(&worker->events);
	free(worker->devices);
	free(worker->latest);
	free(worker->row);
	(void)sem_destroy(&worker->wakes);
	(void)pthread_mutex_destroy(&worker->mutex);
	free(worker);
}

/* What happened on the link, for the journal. The ring is large; a full one only costs the line. */
static void tell(struct worker *worker, int64_t now_ns, const char *text)
{
	struct journal_event event = {.kind = JOURNAL_LINK,
	                              .time_ns = now_ns,
	                              .suite = -1,
	                              .test = -1,
	                              .device = -1,
	                              .link = worker->config.link_index,
	                              .channel = -1,
	                              .value = (double)NAN};
	(void)snprintf(event.text, sizeof event.text, "%s", text);
	(void)ring_push(&worker->events, &event, sizeof event);
	lock(worker);
	(void)snprintf(worker->last_error, sizeof worker->last_error, "%s", text);
	unlock(worker);
}

/* ---- rows and watches -------------------------------------------------- */

static bool life_stands(const struct worker *worker, int device, int64_t now_ns)
{
	const struct rig_device *rig_device = &worker->rig->devices[device];
	const struct device_state *state = &worker->devices[device];
	return rig_device->life >= 0 && !isnan(state->life) &&
	       now_ns - state->life_moved_ns > rig_device->life_within_ns;
}

static double channel_now(const struct worker *worker, int channel)
{
	const struct rig_channel *rig_channel = &worker->rig->channels[channel];
	if (rig_channel->place != PLACE_DERIVED)
		return worker->latest[channel];
	double inputs[DERIVE_INPUTS_MOST];
	struct channel_info infos[DERIVE_INPUTS_MOST];
	for (int i = 0; i < DERIVE_INPUTS_MOST; i++) {
		int input = rig_channel->derivation.inputs[i];
		inputs[i] = input >= 0 ? channel_now(worker, input) : (double)NAN;
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
		          usable ? channel_now(worker, watch->condition.channel) : (double)NAN);
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

static void row_out(struct worker *worker, const struct flight *flight, bool good)
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
	lock(worker);
	for (size_t i = 0; i < block->channel_count; i++)
		worker->latest[block->channels[i]] = row->values[i];
	if (good)
		note_life(worker, block->device, row->received_ns);
	const struct watch *violated = feed_watches(worker, block, good, &worker->reply);
	if (violated)
		violated_copy = *violated;
	bool rest = worker->rest;
	worker->counts.rows++;
	unlock(worker);
	if (violated && !rest)
		interlock_violated(worker, &violated_copy, row->received_ns);
	if (row->generation >= 0 && flight->recorded &&
	    !ring_push(&worker->rows, row, sizeof *row + row->count * sizeof(double)))
		(void)stop_raise(worker->config.stop,
		                 "samples come faster than they can be written to the disk");
}

/* ---- the end of a transaction ------------------------------------------ */

static void count_reply(struct worker *worker, const struct link_reply *reply)
{
	struct worker_counts *counts = &worker->counts;
	counts->requests++;
	counts->timeouts += reply->status == LINK_TIMEOUT;
	counts->garbled += reply->status == LINK_GARBLED;
	counts->exceptions += reply->status == LINK_EXCEPTION;
	counts->lost_replies += reply->status != LINK_OK && reply->status != LINK_EXCEPTION;
}

/* What worker_silent() and worker_break_off() go by: the oldest flight. Mutex held. */
static void share_flights(struct worker *worker)
{
	const struct flight *oldest = &worker->flights[worker->flight_first];
	worker->shared_busy = worker->flight_count > 0;
	worker->shared_busy_device = oldest->device;
	worker->shared_busy_since_ns = oldest->since_ns;
}

static void add_flight(struct worker *worker, const struct flight *flight)
{
	worker->flights[(worker->flight_first + worker->flight_count++) % FLIGHTS_MOST] = *flight;
	lock(worker);
	share_flights(worker);
	unlock(worker);
}

/* Takes note of worker->reply, which ends the flight. */
static void note_reply(struct worker *worker, const struct flight *flight, bool answered)
{
	const struct link_reply *reply = &worker->reply;
	struct device_state *device = &worker->devices[flight->device];
	lock(worker);
	count_reply(worker, reply);
	device->last_sent_ns = reply->sent_ns;
	device->last_received_ns = reply->received_ns;
	/* Of a poll an exception is no measurement; of a command it is an answer. */
	if (reply->status == LINK_OK || (answered && !flight->polled))
		device->last_good_ns = reply->received_ns;
	device->pause_until_ns =
	    reply->received_ns + worker->rig->devices[flight->device].minimum_pause_ns;
	share_flights(worker);
	if (!flight->polled) {
		worker->job = worker->job_dropped ? JOB_FREE : JOB_DONE;
		worker->job_reply = *reply;
	}
	unlock(worker);
}

static void finish(struct worker *worker, const struct flight *flight, int64_t now_ns)
{
	const struct link_reply *reply = &worker->reply;
	bool answered = reply->status == LINK_OK || reply->status == LINK_EXCEPTION;
	note_reply(worker, flight, answered);
	if (!answered && reply->status != LINK_STOPPED && !worker->draining) {
		char text[256];
		(void)snprintf(text, sizeof text, "%s: %s", worker->rig->devices[flight->device].name,
		               reply->message[0] ? reply->message : "no reply");
		tell(worker, now_ns, text);
	}
	if (reply->status == LINK_LOST || reply->status == LINK_STOPPED) {
		worker->broken = true;
		worker->next_open_ns = now_ns + (reply->status == LINK_LOST ? worker->open_pause_ns : 0);
	}
	worker->draining = (worker->draining || !answered) && worker->flight_count > 0;
	if (worker->broken && worker->flight_count == 0) {
		link_close(worker->link);
		worker->open = worker->broken = false;
	}
	if (flight->polled)
		row_out(worker, flight, reply->status == LINK_OK);
	/* Waking it for each row was tried: half of the processor time of a fast run went there. */
	if (!flight->polled || !answered || worker->watch_fired || stop_raised(worker->config.stop))
		worker->config.wake(worker->config.wake_context);
	worker->watch_fired = false;
}

/* ---- what comes next --------------------------------------------------- */

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
		lock(worker);
		worker->counts.missed_slots += (uint64_t)missed;
		unlock(worker);
	}
}

static bool is_silent(struct worker *worker, int device)
{
	lock(worker);
	bool silent = worker->devices[device].silent;
	unlock(worker);
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
static const struct poll_block *next_poll(struct worker *worker, int64_t now_ns, int64_t *due,
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

static void adopt_plan(struct worker *worker, int64_t now_ns)
{
	lock(worker);
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
	unlock(worker);
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

static bool ensure_open(struct worker *worker, int64_t now_ns, int64_t *due)
{
	lock(worker);
	bool renew = worker->renew;
	worker->renew = false;
	int64_t pause_most = worker->rest ? 50 * NS_PER_MS : NS_PER_S;
	unlock(worker);
	if (renew && worker->open) {
		link_close(worker->link);
		worker->open = false;
		worker->next_open_ns = now_ns;
	}
	if (worker->open)
		return true;
	if (worker->open_pause_ns > pause_most)
		worker->open_pause_ns = pause_most;
	if (now_ns < worker->next_open_ns && worker->next_open_ns - now_ns <= pause_most) {
		*due = worker->next_open_ns;
		return false;
	}
	struct err err = {0};
	if (link_open(worker->link, &err) < 0) {
		tell(worker, now_ns, err.message);
		int64_t after = clock_now(&worker->config.clock);
		worker->next_open_ns = (after > now_ns ? after : now_ns) + worker->open_pause_ns;
		worker->open_pause_ns *= 2;
		*due = worker->next_open_ns;
		return false;
	}
	worker->open = true;
	worker->open_pause_ns = 50 * NS_PER_MS;
	lock(worker);
	worker->counts.reconnects++;
	worker->fresh = true;
	unlock(worker);
	return true;
}

/* Nothing goes out that the rig does not allow; true where the request may. */
static bool guarded(struct worker *worker, const struct flight *flight, int64_t now_ns)
{
	struct err err = {0};
	if (flight->attempt)
		return true;
	lock(worker);
	bool resting = worker->rest;
	unlock(worker);
	if (guard_pass(&worker->guard, flight->device, &worker->request, resting, now_ns, &err) == 0)
		return true;
	(void)stop_raise(worker->config.stop, "a command was held back: %.200s", err.message);
	worker->reply =
	    (struct link_reply){.status = LINK_REFUSED, .sent_ns = now_ns, .received_ns = now_ns};
	(void)snprintf(worker->reply.message, sizeof worker->reply.message, "%.150s", err.message);
	return false;
}

/* Sends worker->request. */
static void begin(struct worker *worker, const struct flight *flight, int64_t now_ns)
{
	struct err err = {0};
	if (!guarded(worker, flight, now_ns)) {
		finish(worker, flight, now_ns);
		return;
	}
	if (link_begin(worker->link, &worker->request, now_ns, &err) == 0) {
		add_flight(worker, flight);
		return;
	}
	worker->reply.status = LINK_LOST;
	worker->reply.sent_ns = now_ns;
	worker->reply.received_ns = clock_now(&worker->config.clock);
	(void)snprintf(worker->reply.message, sizeof worker->reply.message, "%.150s", err.message);
	finish(worker, flight, now_ns);
}

/* Takes the posted job, unless it is for a silent device or a pause holds it back. */
static bool take_job(struct worker *worker, int64_t now_ns, struct flight *flight, int64_t *due)
{
	bool taken = false;
	lock(worker);
	if (worker->job == JOB_POSTED) {
		struct device_state *state = &worker->devices[worker->job_device];
		if (state->pause_until_ns > now_ns) {
			*due = state->pause_until_ns;
		} else {
			worker->job = JOB_RUNNING;
			worker->request = worker->job_request;
			*flight = (struct flight){
			    .device = worker->job_device, .attempt = worker->job_attempt, .since_ns = now_ns};
			taken = true;
		}
	}
	unlock(worker);
	return taken;
}

/* Whether the conductor wants something of the link, beside polls. */
static bool is_wanted(struct worker *worker)
{
	lock(worker);
	bool waits = worker->job == JOB_POSTED || worker->renew;
	unlock(worker);
	return waits;
}

static bool take_poll(struct worker *worker, int64_t now_ns, struct flight *flight, int64_t *due)
{
	bool recorded = true;
	const struct poll_block *polled = next_poll(worker, now_ns, due, &recorded);
	if (!polled)
		return false;
	*flight = (struct flight){
	    .polled = polled, .device = polled->read->device, .recorded = recorded, .since_ns = now_ns};
	worker->request = polled->request;
	return true;
}

/* Sends one more poll beside those under way; false where the next reply must come first. */
static bool fly_another(struct worker *worker, int64_t now_ns)
{
	struct flight flight;
	int64_t due;
	if (worker->link->depth < 2 || worker->draining ||
	    !worker->flights[worker->flight_first].polled)
		return false;
	lock(worker);
	bool wanted = worker->job == JOB_POSTED || worker->renew || worker->plan_changed;
	unlock(worker);
	if (wanted || !take_poll(worker, now_ns, &flight, &due))
		return false;
	begin(worker, &flight, now_ns);
	return true;
}

static void watch_devices(struct worker *worker, int64_t now_ns)
{
	bool before = stop_raised(worker->config.stop);
	lock(worker);
	check_stale(worker, now_ns);
	unlock(worker);
	if (!before && stop_raised(worker->config.stop))
		worker->config.wake(worker->config.wake_context);
}

int64_t worker_tick(struct worker *worker, int64_t now_ns)
{
	if (worker->flight_count > 0) {
		if (fly_another(worker, now_ns))
			return now_ns;
		int64_t due = link_end(worker->link, now_ns, &worker->reply);
		if (due > now_ns)
			return due;
		int64_t after = clock_now(&worker->config.clock);
		now_ns = after > now_ns ? after : now_ns;
		struct flight flight = worker->flights[worker->flight_first];
		worker->flight_first = (worker->flight_first + 1) % FLIGHTS_MOST;
		worker->flight_count--;
		finish(worker, &flight, now_ns);
	}
	watch_devices(worker, now_ns);
	if (worker->flight_count > 0)
		return now_ns;
	adopt_plan(worker, now_ns);
	int64_t due = INT64_MAX, open_due = INT64_MAX;
	bool wanted = is_wanted(worker) || worker->plan;
	if (!wanted || !ensure_open(worker, now_ns, &open_due))
		return open_due;
	int64_t after = clock_now(&worker->config.clock);
	now_ns = after > now_ns ? after : now_ns;
	struct flight flight;
	int64_t poll_due = INT64_MAX;
	if (!take_job(worker, now_ns, &flight, &due) && !take_poll(worker, now_ns, &flight, &poll_due))
		return poll_due < due ? poll_due : due;
	begin(worker, &flight, now_ns);
	return now_ns;
}

/* ---- the thread -------------------------------------------------------- */

/*
 * Waits until shortly before due_ns, or for a wake. True: woken. By a semaphore,
 * since a wait for a condition takes the mutex again: a system call more a row.
 */
static bool wait_until(struct worker *worker, int64_t due_ns)
{
	for (;;) {
		/* First this clock, so that a thread held up in between wakes early, not late. */
		struct timespec at;
		(void)clock_gettime(CLOCK_MONOTONIC, &at);
		int64_t left = due_ns - worker->spin_ns - clock_now(&worker->config.clock);
		if (left <= 0)
			return false;
		int64_t ns = at.tv_nsec + (left > NS_PER_S ? NS_PER_S : left);
		at.tv_sec += ns / NS_PER_S;
		at.tv_nsec = ns % NS_PER_S;
		if (sem_clockwait(&worker->wakes, CLOCK_MONOTONIC, &at) == 0)
			return true;
	}
}

void worker_loop(struct worker *worker)
{
	(void)prctl(PR_SET_TIMERSLACK, 1UL);
	for (;;) {
		int64_t due = worker_tick(worker, clock_now(&worker->config.clock));
		bool woken = wait_until(worker, due);
		lock(worker);
		if (worker->woken && !woken) /* it came after the wait: what it announces is seen now */
			(void)sem_trywait(&worker->wakes);
		worker->woken = false;
		bool quit = worker->quit;
		unlock(worker);
		if (quit)
			return;
		/* At most spin_ns: a wake that comes meanwhile waits for as long. */
		while (!woken && worker->spin_ns > 0 && clock_now(&worker->config.clock) < due)
			;
	}
}

void worker_spin(struct worker *worker, int64_t spin_ns)
{
	worker->spin_ns = spin_ns;
}

static void wake_worker(struct worker *worker)
{
	if (!worker->woken)
		(void)sem_post(&worker->wakes);
	worker->woken = true;
}

void worker_quit(struct worker *worker)
{
	lock(worker);
	worker->quit = true;
	wake_worker(worker);
	unlock(worker);
}

/* ---- the conductor's side ---------------------------------------------- */

void worker_post(struct worker *worker, const struct link_request *request, int device,
                 bool attempt)
{
	lock(worker);
	worker->job_attempt = attempt;
	worker->job = JOB_POSTED;
	worker->job_dropped = false;
	worker->job_device = device;
	worker->job_request = *request;
	wake_worker(worker);
	unlock(worker);
}

bool worker_done(struct worker *worker, struct link_reply *ret_reply)
{
	lock(worker);
	bool done = worker->job == JOB_DONE;
	if (done) {
		*ret_reply = worker->job_reply;
		worker->job = JOB_FREE;
	}
	unlock(worker);
	return done;
}

void worker_drop_job(struct worker *worker)
{
	lock(worker);
	if (worker->job == JOB_POSTED || worker->job == JOB_DONE)
		worker->job = JOB_FREE;
	else if (worker->job == JOB_RUNNING)
		worker->job_dropped = true;
	unlock(worker);
}

bool worker_job_free(struct worker *worker)
{
	lock(worker);
	bool is_free = worker->job == JOB_FREE;
	unlock(worker);
	return is_free;
}

void worker_set_plan(struct worker *worker, const struct poll_plan *plan)
{
	lock(worker);
	worker->next_plan = plan;
	worker->plan_changed = true;
	wake_worker(worker);
	unlock(worker);
}

void worker_silence(struct worker *worker, int device, bool silent)
{
	lock(worker);
	worker->devices[device].silent = silent;
	if (!silent) {
		/* The silence itself is no staleness, and no standing life counter. */
		worker->devices[device].last_good_ns = clock_now(&worker->config.clock);
		worker->devices[device].life = (double)NAN;
	}
	wake_worker(worker);
	unlock(worker);
}

bool worker_silent(struct worker *worker, int device, int64_t *ret_sent, int64_t *ret_received)
{
	lock(worker);
	bool settled = !(worker->shared_busy && worker->shared_busy_device == device);
	*ret_sent = worker->devices[device].last_sent_ns;
	*ret_received = worker->devices[device].last_received_ns;
	unlock(worker);
	return settled;
}

int worker_watch_add(struct worker *worker, enum watch_kind kind, const struct condition *condition,
                     int64_t not_before_ns)
{
	int found = -1;
	lock(worker);
	for (int i = 0; i < WATCHES_MOST && found < 0; i++)
		if (!worker->watch_used[i])
			found = i;
	if (found >= 0) {
		worker->watch_used[found] = true;
		watch_start(&worker->watches[found], kind, condition, not_before_ns);
	}
	unlock(worker);
	return found;
}

void worker_watch_get(struct worker *worker, int watch, struct watch *ret_watch)
{
	lock(worker);
	*ret_watch = worker->watches[watch];
	unlock(worker);
}

void worker_watch_remove(struct worker *worker, int watch)
{
	if (watch < 0)
		return;
	lock(worker);
	worker->watch_used[watch] = false;
	unlock(worker);
}

void worker_rest_mode(struct worker *worker, bool on)
{
	lock(worker);
	worker->rest = on;
	for (size_t i = 0; i < worker->rig->device_count; i++)
		worker->devices[i].silent = false;
	if (!on) {
		/* Interlocks start afresh with the next test. */
		for (int i = 0; i < WATCHES_MOST; i++)
			if (worker->watch_used[i] && worker->watches[i].kind == WATCH_INTERLOCK) {
				struct condition condition = worker->watches[i].condition;
				watch_start(&worker->watches[i], WATCH_INTERLOCK, &condition, 0);
			}
	}
	wake_worker(worker);
	unlock(worker);
}

void worker_renew(struct worker *worker)
{
	lock(worker);
	worker->renew = true;
	worker->fresh = false;
	wake_worker(worker);
	unlock(worker);
}

bool worker_fresh(struct worker *worker)
{
	lock(worker);
	bool fresh = worker->fresh && !worker->renew;
	unlock(worker);
	return fresh;
}

bool worker_break_off(struct worker *worker, int64_t since_ns, int64_t now_ns,
                      int64_t longer_than_ns)
{
	lock(worker);
	bool old = worker->shared_busy && worker->shared_busy_since_ns <= since_ns;
	bool blocked = old && now_ns - worker->shared_busy_since_ns > longer_than_ns;
	unlock(worker);
	if (blocked)
		link_interrupt(worker->link);
	return old;
}

struct link *worker_link(struct worker *worker)
{
	return worker->link;
}

double worker_latest(struct worker *worker, int channel)
{
	lock(worker);
	double value = channel_now(worker, channel);
	unlock(worker);
	return value;
}

struct worker_counts worker_counts(struct worker *worker)
{
	lock(worker);
	struct worker_counts counts = worker->counts;
	unlock(worker);
	return counts;
}

const char *worker_last_error(struct worker *worker, char *buffer, size_t size)
{
	lock(worker);
	(void)snprintf(buffer, size, "%s", worker->last_error);
	unlock(worker);
	return buffer;
}

struct ring *worker_rows(struct worker *worker)
{
	return &worker->rows;
}

struct ring *worker_events(struct worker *worker)
{
	return &worker->events;
}
