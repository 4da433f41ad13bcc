/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_WORKER_STATE_H
#define DRIVETRIAL_WORKER_STATE_H
/*
 * What the files of the worker share: worker.c (transactions, one after the
 * other), worker_polls.c (what is polled next), worker_rows.c (rows, watches,
 * what ends a run), worker_desk.c (the thread, and the conductor's side).
 * Private to them.
 *
 * Fields under "tick only" belong to worker_tick(); fields under "shared" are
 * touched with the mutex held, and it is never held while the link blocks.
 */
#include <semaphore.h>

#include "worker.h"

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

static inline void worker_lock(struct worker *worker)
{
	(void)pthread_mutex_lock(&worker->mutex);
}

static inline void worker_unlock(struct worker *worker)
{
	(void)pthread_mutex_unlock(&worker->mutex);
}

/* Into the journal, and kept as the last error of the link. */
void worker_tell(struct worker *worker, int64_t now_ns, const char *text);

/* worker_rows.c */

/* The value of a channel as read last; of a derived one computed. Mutex held. */
double worker_channel_now(const struct worker *worker, int channel);
/* A row of a finished poll: to the watches, and to main. */
void worker_row_out(struct worker *worker, const struct flight *flight, bool good);
/* Stops the run where a polled device is silent or frozen. */
void worker_watch_devices(struct worker *worker, int64_t now_ns);

/* worker_polls.c */

void worker_adopt_plan(struct worker *worker, int64_t now_ns);
/* The next block that is due, or NULL and when to ask again. */
const struct poll_block *worker_next_poll(struct worker *worker, int64_t now_ns, int64_t *due,
                                          bool *ret_recorded);

#endif
