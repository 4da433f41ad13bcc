/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_CONDUCTOR_STATE_H
#define DRIVETRIAL_CONDUCTOR_STATE_H
/*
 * What the files of the conductor share: conductor.c (the order of the run),
 * steps.c (what each kind of step does), command.c (one write, confirmed),
 * rest.c (the way to rest), test_plans.c. Private to them; all of it belongs
 * to the conductor's thread but for what conductor_lock() guards.
 */
#include "conductor.h"

enum progress { PROGRESS_RUNNING = 0, PROGRESS_DONE, PROGRESS_FAILED };

/* One command on its way to a device. */
struct command_op {
	int channel;
	double value;
	int stage; /* see command.c */
	int tries;
	bool posted;
	int64_t begin_ns, deadline_ns;
	int64_t first_sent_ns; /* of the first try: -1 none */
	int64_t sent_ns, received_ns;
	uint16_t words_before[4];
	bool have_before;
	int exception;
	char why[192]; /* PROGRESS_FAILED */
};

struct frame {
	const struct step *steps;
	size_t count, next;
	int times_left;
};

struct ramp_op {
	bool active;
	int channel;
	double from, to;
	int64_t begin_ns, over_ns, next_ns;
	struct command_op command;
	bool commanding;
};

enum { FRAMES_MOST = 8, RAMPS_MOST = 8, MARK_WATCHES_MOST = 16, CONFIRM_MOST = 8 };

/* A list of steps being carried out. */
struct walk {
	struct frame frames[FRAMES_MOST];
	int depth; /* 0: finished */
	const struct step *step;
	bool begun;
	int stage;
	size_t assign;
	int64_t begin_ns, due_ns;
	int64_t mark_earliest_ns, mark_latest_ns;
	int watch, watch_worker;
	struct command_op command;
	char why[256];
	struct condition failed_condition;
};

struct mark_watch {
	bool used;
	int watch, worker, mark;
};

struct confirm_watch {
	int watch, worker;
	const struct step *step;
};

struct test_plan {
	int suite, test, generation;
	const struct read_block *blocks; /* by id */
	size_t block_count;
	const struct poll_plan *plans; /* one a worker */
};

enum phase {
	PHASE_FIRST_REST = 0,
	PHASE_NEXT,
	PHASE_BEFORE,
	PHASE_STIMULUS,
	PHASE_RESTORE,
	PHASE_REST,
	PHASE_GATE,
	PHASE_LAST_REST,
	PHASE_ENDED,
};

enum rest_stage { REST_STEPS = 0, REST_FRESH, REST_CONFIRM };

struct conductor {
	struct conductor_config config;
	const struct rig *rig;
	struct worker **workers;
	struct test_plan *plans; /* one a test, flat; then the idle one */
	size_t plan_count;
	struct ring events;
	/* the run */
	enum phase phase;
	int suite, test;
	const struct test *now_test;
	const struct test_plan *plan;
	struct walk walk;
	struct ramp_op ramps[RAMPS_MOST];
	struct mark_watch mark_watches[MARK_WATCHES_MOST];
	double *commanded; /* by channel; NaN: not yet */
	bool anything_commanded;
	size_t before_next;
	int before_watch, before_worker;
	int64_t before_begin_ns;
	enum test_end test_end;
	char test_reason[256];
	uint64_t missed_before, lost_before;
	bool gate_failed;
	/* the way to rest */
	enum rest_stage rest_stage;
	int64_t rest_begin_ns, rest_stage_ns;
	bool rest_last;
	bool first_rest;
	size_t unacknowledged;
	char unacknowledged_name[65];
	struct confirm_watch confirms[CONFIRM_MOST];
	size_t confirm_count;
	struct rest_outcome rest;
	/* shared */
	pthread_mutex_t mutex;
	pthread_cond_t cond;
	bool woken, ended;
	int gate; /* 0 none, 1 asked, 2 passed, 3 failed */
	char gate_reason[256];
	struct conductor_now now;
};

/* An event with everything but kind and time absent. */
struct journal_event conductor_event(const struct conductor *conductor, enum journal_kind kind,
                                     int64_t now_ns);
void conductor_tell(struct conductor *conductor, const struct journal_event *event);

/* The worker that reads a channel (of a derived one: of its first input). */
int conductor_worker_of(const struct conductor *conductor, int channel);

/* command.c */
void command_start(struct conductor *conductor, struct command_op *op, int channel, double value,
                   int64_t now_ns);
enum progress command_tick(struct conductor *conductor, struct command_op *op, bool resting,
                           int64_t now_ns, int64_t *due_ns);

/* steps.c */
void walk_start(struct walk *walk, const struct step *steps, size_t count);
/* resting: failures are journalled and passed over. */
enum progress walk_tick(struct conductor *conductor, struct walk *walk, bool resting,
                        int64_t now_ns, int64_t *due_ns);
void walk_stop(struct conductor *conductor, struct walk *walk);
/* Ramps that run beside the steps, and marks that wait for an event. */
enum progress ramps_tick(struct conductor *conductor, int64_t now_ns, int64_t *due_ns, char *why,
                         size_t size);
void mark_watches_tick(struct conductor *conductor, int64_t now_ns);
void mark_watches_clear(struct conductor *conductor);

/* rest.c */
void rest_start(struct conductor *conductor, bool last, int64_t now_ns);
/* PROGRESS_DONE: confirmed; PROGRESS_FAILED: not, and the time is over. */
enum progress rest_tick(struct conductor *conductor, int64_t now_ns, int64_t *due_ns);

/* test_plans.c */
/* What is polled in one test, or between tests (NULL). needed: a byte per channel, for its use. */
int test_plan_make(const struct rig *rig, const struct test *test, unsigned char *needed,
                   struct arena *arena, struct test_plan *plan, struct err *reterr);
int test_plans_make(struct conductor *conductor, struct arena *arena, size_t *ret_row_values_most,
                    struct err *reterr);
const struct test_plan *test_plan_of(const struct conductor *conductor, int suite, int test);
const struct test_plan *idle_plan(const struct conductor *conductor);

#endif
