/* SPDX-License-Identifier: Apache-2.0 */
/*
 * See worker.h. One slot for jobs is enough, since the conductor commands in
 * the order of the suite and waits for each reply; a queue would let a command
 * of an aborted test slip out behind the safe state.
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

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "worker_state.h"

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
void worker_tell(struct worker *worker, int64_t now_ns, const char *text)
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
	worker_lock(worker);
	(void)snprintf(worker->last_error, sizeof worker->last_error, "%s", text);
	worker_unlock(worker);
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
	worker_lock(worker);
	share_flights(worker);
	worker_unlock(worker);
}

/* Takes note of worker->reply, which ends the flight. */
static void note_reply(struct worker *worker, const struct flight *flight, bool answered)
{
	const struct link_reply *reply = &worker->reply;
	struct device_state *device = &worker->devices[flight->device];
	worker_lock(worker);
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
	worker_unlock(worker);
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
		worker_tell(worker, now_ns, text);
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
		worker_row_out(worker, flight, reply->status == LINK_OK);
	/* Waking it for each row was tried: half of the processor time of a fast run went there. */
	if (!flight->polled || !answered || worker->watch_fired || stop_raised(worker->config.stop))
		worker->config.wake(worker->config.wake_context);
	worker->watch_fired = false;
}

static bool ensure_open(struct worker *worker, int64_t now_ns, int64_t *due)
{
	worker_lock(worker);
	bool renew = worker->renew;
	worker->renew = false;
	int64_t pause_most = worker->rest ? 50 * NS_PER_MS : NS_PER_S;
	worker_unlock(worker);
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
		worker_tell(worker, now_ns, err.message);
		int64_t after = clock_now(&worker->config.clock);
		worker->next_open_ns = (after > now_ns ? after : now_ns) + worker->open_pause_ns;
		worker->open_pause_ns *= 2;
		*due = worker->next_open_ns;
		return false;
	}
	worker->open = true;
	worker->open_pause_ns = 50 * NS_PER_MS;
	worker_lock(worker);
	worker->counts.reconnects++;
	worker->fresh = true;
	worker_unlock(worker);
	return true;
}

/* Nothing goes out that the rig does not allow; true where the request may. */
static bool guarded(struct worker *worker, const struct flight *flight, int64_t now_ns)
{
	struct err err = {0};
	if (flight->attempt)
		return true;
	worker_lock(worker);
	bool resting = worker->rest;
	worker_unlock(worker);
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
	worker_lock(worker);
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
	worker_unlock(worker);
	return taken;
}

/* Whether the conductor wants something of the link, beside polls. */
static bool is_wanted(struct worker *worker)
{
	worker_lock(worker);
	bool waits = worker->job == JOB_POSTED || worker->renew;
	worker_unlock(worker);
	return waits;
}

static bool take_poll(struct worker *worker, int64_t now_ns, struct flight *flight, int64_t *due)
{
	bool recorded = true;
	const struct poll_block *polled = worker_next_poll(worker, now_ns, due, &recorded);
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
	worker_lock(worker);
	bool wanted = worker->job == JOB_POSTED || worker->renew || worker->plan_changed;
	worker_unlock(worker);
	if (wanted || !take_poll(worker, now_ns, &flight, &due))
		return false;
	begin(worker, &flight, now_ns);
	return true;
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
	worker_watch_devices(worker, now_ns);
	if (worker->flight_count > 0)
		return now_ns;
	worker_adopt_plan(worker, now_ns);
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
