/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The worker seen from outside its tick: its thread, and what the conductor
 * asks of it. Everything here takes the mutex for a few instructions.
 */
#include <stdio.h>
#include <sys/prctl.h>
#include <time.h>

#include "worker_state.h"

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
		worker_lock(worker);
		if (worker->woken && !woken) /* it came after the wait: what it announces is seen now */
			(void)sem_trywait(&worker->wakes);
		worker->woken = false;
		bool quit = worker->quit;
		worker_unlock(worker);
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
	worker_lock(worker);
	worker->quit = true;
	wake_worker(worker);
	worker_unlock(worker);
}

/* ---- the conductor's side ---------------------------------------------- */

void worker_post(struct worker *worker, const struct link_request *request, int device,
                 bool attempt)
{
	worker_lock(worker);
	worker->job_attempt = attempt;
	worker->job = JOB_POSTED;
	worker->job_dropped = false;
	worker->job_device = device;
	worker->job_request = *request;
	wake_worker(worker);
	worker_unlock(worker);
}

bool worker_done(struct worker *worker, struct link_reply *ret_reply)
{
	worker_lock(worker);
	bool done = worker->job == JOB_DONE;
	if (done) {
		*ret_reply = worker->job_reply;
		worker->job = JOB_FREE;
	}
	worker_unlock(worker);
	return done;
}

void worker_drop_job(struct worker *worker)
{
	worker_lock(worker);
	if (worker->job == JOB_POSTED || worker->job == JOB_DONE)
		worker->job = JOB_FREE;
	else if (worker->job == JOB_RUNNING)
		worker->job_dropped = true;
	worker_unlock(worker);
}

bool worker_job_free(struct worker *worker)
{
	worker_lock(worker);
	bool is_free = worker->job == JOB_FREE;
	worker_unlock(worker);
	return is_free;
}

void worker_set_plan(struct worker *worker, const struct poll_plan *plan)
{
	worker_lock(worker);
	worker->next_plan = plan;
	worker->plan_changed = true;
	wake_worker(worker);
	worker_unlock(worker);
}

void worker_silence(struct worker *worker, int device, bool silent)
{
	worker_lock(worker);
	worker->devices[device].silent = silent;
	if (!silent) {
		/* The silence itself is no staleness, and no standing life counter. */
		worker->devices[device].last_good_ns = clock_now(&worker->config.clock);
		worker->devices[device].life = (double)NAN;
	}
	wake_worker(worker);
	worker_unlock(worker);
}

bool worker_silent(struct worker *worker, int device, int64_t *ret_sent, int64_t *ret_received)
{
	worker_lock(worker);
	bool settled = !(worker->shared_busy && worker->shared_busy_device == device);
	*ret_sent = worker->devices[device].last_sent_ns;
	*ret_received = worker->devices[device].last_received_ns;
	worker_unlock(worker);
	return settled;
}

int worker_watch_add(struct worker *worker, enum watch_kind kind, const struct condition *condition,
                     int64_t not_before_ns)
{
	int found = -1;
	worker_lock(worker);
	for (int i = 0; i < WATCHES_MOST && found < 0; i++)
		if (!worker->watch_used[i])
			found = i;
	if (found >= 0) {
		worker->watch_used[found] = true;
		watch_start(&worker->watches[found], kind, condition, not_before_ns);
	}
	worker_unlock(worker);
	return found;
}

void worker_watch_get(struct worker *worker, int watch, struct watch *ret_watch)
{
	worker_lock(worker);
	*ret_watch = worker->watches[watch];
	worker_unlock(worker);
}

void worker_watch_remove(struct worker *worker, int watch)
{
	if (watch < 0)
		return;
	worker_lock(worker);
	worker->watch_used[watch] = false;
	worker_unlock(worker);
}

void worker_rest_mode(struct worker *worker, bool on)
{
	worker_lock(worker);
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
	worker_unlock(worker);
}

void worker_renew(struct worker *worker)
{
	worker_lock(worker);
	worker->renew = true;
	worker->fresh = false;
	wake_worker(worker);
	worker_unlock(worker);
}

bool worker_fresh(struct worker *worker)
{
	worker_lock(worker);
	bool fresh = worker->fresh && !worker->renew;
	worker_unlock(worker);
	return fresh;
}

bool worker_break_off(struct worker *worker, int64_t since_ns, int64_t now_ns,
                      int64_t longer_than_ns)
{
	worker_lock(worker);
	bool old = worker->shared_busy && worker->shared_busy_since_ns <= since_ns;
	bool blocked = old && now_ns - worker->shared_busy_since_ns > longer_than_ns;
	worker_unlock(worker);
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
	worker_lock(worker);
	double value = worker_channel_now(worker, channel);
	worker_unlock(worker);
	return value;
}

struct worker_counts worker_counts(struct worker *worker)
{
	worker_lock(worker);
	struct worker_counts counts = worker->counts;
	worker_unlock(worker);
	return counts;
}

const char *worker_last_error(struct worker *worker, char *buffer, size_t size)
{
	worker_lock(worker);
	(void)snprintf(buffer, size, "%s", worker->last_error);
	worker_unlock(worker);
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
