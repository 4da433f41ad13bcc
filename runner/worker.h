/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_WORKER_H
#define DRIVETRIAL_WORKER_H
/*
 * The worker of one link: the sole user of its context. It polls the blocks
 * of the present plan at absolute deadlines, lets one job at a time of the
 * conductor overtake the polls, feeds every row to the watches (interlocks,
 * awaits, events) and pushes it into a ring for main.
 *
 * A state machine driven by worker_tick(now) -> due. With the real clock a
 * thread calls it; in virtual time the one loop does. Everything else here is
 * called by the conductor's thread; what both touch is under the mutex. The
 * link itself, the rings' tails and the poll state belong to the tick alone.
 */
#include <pthread.h>

#include "clock.h"
#include "guard.h"
#include "journal.h"
#include "plan.h"
#include "ring.h"
#include "stop.h"
#include "watch.h"

enum { WATCHES_MOST = 64, GROUPS_MOST = 8 };

struct poll_block {
	const struct read_block *read;
	struct link_request request;
};

struct poll_group {
	int64_t period_ns; /* 0: without pause */
	int64_t decimate;  /* of so many rounds one is recorded; 0 is as 1 */
	const struct poll_block *blocks;
	size_t count;
};

/* What one worker polls during a test, or between tests. Never changes once made. */
struct poll_plan {
	int generation; /* names the plan in rows; -1: rows are not recorded */
	struct poll_group groups[GROUPS_MOST];
	size_t group_count;
};

/* A row on its way to main. */
struct row {
	int generation, block;
	int64_t sent_ns, received_ns;
	size_t count;
	double values[];
};

struct worker_counts {
	uint64_t requests, timeouts, garbled, exceptions, reconnects;
	uint64_t missed_slots, lost_replies, rows;
};

struct worker;

struct worker_config {
	const struct rig *rig;
	int link_index;
	struct link *link;  /* becomes the worker's; released by worker_free() */
	struct clock clock; /* ns since the start of the run */
	struct stop *stop;
	size_t row_values_most;      /* largest number of channels in a block */
	void (*wake)(void *context); /* tells the conductor that something happened */
	void *wake_context;
};

int worker_new(const struct worker_config *config, struct worker **ret_worker, struct err *reterr);
void worker_free(struct worker *worker); /* takes NULL; its thread has ended */

/* Does at most one transaction. Returns when it wants to be called again (INT64_MAX: on a wake). */
int64_t worker_tick(struct worker *worker, int64_t now_ns);

/* The thread's body: ticks and waits until worker_quit(). */
void worker_loop(struct worker *worker);
/* Before the thread starts: it spins for as long before each instant that it waits for. */
void worker_spin(struct worker *worker, int64_t spin_ns);
void worker_quit(struct worker *worker);

/*
 * One job at a time: post, then ask until it is done. A write that the rig
 * does not allow is never sent (rigs/guard.h) and ends the run; attempt: the
 * request is one that the rig's `attempts` allow although it must be refused.
 */
void worker_post(struct worker *worker, const struct link_request *request, int device,
                 bool attempt);
bool worker_done(struct worker *worker, struct link_reply *ret_reply);
/* Gives up waiting: a job not yet begun is dropped, a running one is broken off. */
void worker_drop_job(struct worker *worker);
bool worker_job_free(struct worker *worker);

void worker_set_plan(struct worker *worker, const struct poll_plan *plan);
void worker_silence(struct worker *worker, int device, bool silent);
/* True once no request to the device is under way; the last one's interval (0, 0: none yet). */
bool worker_silent(struct worker *worker, int device, int64_t *ret_sent, int64_t *ret_received);

int worker_watch_add(struct worker *worker, enum watch_kind kind, const struct condition *condition,
                     int64_t not_before_ns);
void worker_watch_get(struct worker *worker, int watch, struct watch *ret_watch);
void worker_watch_remove(struct worker *worker, int watch);

/*
 * On the way to rest nothing is given up: the link is opened again every
 * 50 ms, silent devices are heard again, interlocks no longer fire.
 */
void worker_rest_mode(struct worker *worker, bool on);
/* Closes the connection and makes a new one; worker_fresh() is true once it stands. */
void worker_renew(struct worker *worker);
bool worker_fresh(struct worker *worker);
/*
 * Breaks off a transaction that began before since_ns and has been waiting for
 * longer than that. True while one from before still runs.
 */
bool worker_break_off(struct worker *worker, int64_t since_ns, int64_t now_ns,
                      int64_t longer_than_ns);
/* The link, for use after the worker's thread has ended. */
struct link *worker_link(struct worker *worker);

double worker_latest(struct worker *worker, int channel);
struct worker_counts worker_counts(struct worker *worker);
const char *worker_last_error(struct worker *worker, char *buffer, size_t size);

/* Main's side of the rings. */
struct ring *worker_rows(struct worker *worker);
struct ring *worker_events(struct worker *worker);

#endif
