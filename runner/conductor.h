/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_CONDUCTOR_H
#define DRIVETRIAL_CONDUCTOR_H
/*
 * The conductor: takes the bench through the tests and back to rest.
 *
 * A state machine, conductor_tick(now) -> due, above one worker a link. It
 * judges nothing and touches no file: what happens goes as journal events
 * into a ring for main, rows go into the workers' rings. The order of a run:
 *
 *   safe state -> [before -> stimulus -> restore -> safe state] per test -> end
 *
 * and from anywhere, once `stop` is raised, straight to the safe state. Bench
 * tests (watchdogs, direction) are gates: after each the conductor waits, at
 * rest, for main's verdict, and goes on only where it is a pass.
 */
#include "worker.h"

struct conductor;

struct conductor_config {
	const struct rig *rig;
	struct suite *const *suites;
	size_t suite_count;
	struct link **links; /* one a link of the rig; become the workers' */
	struct clock clock;  /* ns since the start of the run */
	struct stop *stop;
	struct arena *arena; /* plans are made in it, before anything moves */
};

/* Everything that the run needs is allocated here. On failure the links stay the caller's. */
int conductor_new(const struct conductor_config *config, struct conductor **ret_conductor,
                  struct err *reterr);
void conductor_free(struct conductor *conductor); /* takes NULL; threads have ended */

int64_t conductor_tick(struct conductor *conductor, int64_t now_ns);
/* The thread's body: ticks until the run has ended. */
void conductor_loop(struct conductor *conductor);
bool conductor_ended(struct conductor *conductor);
/* Whether something woke it since it was last asked; for the loop in virtual time. */
bool conductor_woken(struct conductor *conductor);
/* Wakes the conductor's thread (after stop_raise). Any thread. */
void conductor_wake(struct conductor *conductor);

size_t conductor_worker_count(const struct conductor *conductor);
struct worker *conductor_worker(struct conductor *conductor, size_t index);

/* Main's side. */
struct ring *conductor_events(struct conductor *conductor);
/* The block of a row; NULL where the row belongs to no test. */
const struct read_block *conductor_block(const struct conductor *conductor, int generation,
                                         int block, int *ret_suite, int *ret_test);
/* How many blocks the plan of a test has. */
int conductor_block_count(const struct conductor *conductor, int suite, int test);
int conductor_generation(const struct conductor *conductor, int suite, int test);
/* True while the conductor waits for a verdict; answer once per asking. */
bool conductor_gate_asked(struct conductor *conductor, int *ret_suite, int *ret_test);
void conductor_gate_answer(struct conductor *conductor, bool pass, const char *reason);

struct conductor_now {
	int suite, test; /* -1: none */
	const struct step *step;
	int64_t test_begin_ns;
	bool resting;
};
/* For the progress line. */
struct conductor_now conductor_now(struct conductor *conductor);

struct rest_outcome {
	bool needed, confirmed;
	char reason[256];
};
/* After the end. */
struct rest_outcome conductor_rest(const struct conductor *conductor);

#endif
