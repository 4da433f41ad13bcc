/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The order of a run; see conductor.h. One state machine with few phases was
 * chosen over nested calls in a thread of its own: in virtual time the same
 * code must be left and entered again at every instant.
 *
 * Thread rule: the tick belongs to one thread. Under the mutex: woken, ended,
 * gate, now. The rings have one pusher (the tick) and one popper (main).
 */
#include "conductor.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/prctl.h>
#include <time.h>

#include "conductor_state.h"

static const int64_t BEFORE_NS = 500 * NS_PER_MS; /* a precondition without `wait` */

struct journal_event conductor_event(const struct conductor *conductor, enum journal_kind kind,
                                     int64_t now_ns)
{
	return (struct journal_event){.kind = kind,
	                              .time_ns = now_ns,
	                              .suite = conductor->now_test ? conductor->suite : -1,
	                              .test = conductor->now_test ? conductor->test : -1,
	                              .device = -1,
	                              .link = -1,
	                              .channel = -1,
	                              .value = (double)NAN};
}

void conductor_tell(struct conductor *conductor, const struct journal_event *event)
{
	if (!ring_push(&conductor->events, event, sizeof *event))
		(void)stop_raise(conductor->config.stop,
		                 "events come faster than they can be written to the disk");
}

int conductor_worker_of(const struct conductor *conductor, int channel)
{
	return conductor->rig->devices[rig_channel_device(conductor->rig, channel)].link;
}

static void wake_from_worker(void *context)
{
	conductor_wake(context);
}

/* A condition can only be followed where one link reads all of its inputs. */
static int check_one_link(const struct rig *rig, const struct condition *condition,
                          struct position at, struct err *reterr)
{
	unsigned char set[4096] = {0};
	if (condition->channel < 0 || rig->channel_count > sizeof set)
		return 0;
	rig_channel_needs(rig, condition->channel, set);
	int link = -1;
	for (size_t i = 0; i < rig->channel_count; i++) {
		if (!set[i] || rig->channels[i].device < 0)
			continue;
		int this_link = rig->devices[rig->channels[i].device].link;
		if (link >= 0 && link != this_link)
			return err_set_at(reterr, ERR_FILE, at.file ? at.file->path : "", at.line, at.column,
			                  "the condition on %s needs channels of two links; use one whose "
			                  "inputs are read over one link",
			                  rig->infos[condition->channel].name);
		link = this_link;
	}
	return 0;
}

static int check_steps(const struct rig *rig, const struct step *steps, size_t count,
                       struct err *reterr)
{
	for (size_t i = 0; i < count; i++) {
		const struct step *step = &steps[i];
		if ((step->kind == STEP_AWAIT || step->kind == STEP_MARK) &&
		    check_one_link(rig, &step->condition, step->at, reterr) < 0)
			return -1;
		if (step->kind == STEP_CYCLE && check_steps(rig, step->steps, step->step_count, reterr) < 0)
			return -1;
	}
	return 0;
}

static int check_conditions(const struct conductor *conductor, struct err *reterr)
{
	const struct rig *rig = conductor->rig;
	for (size_t i = 0; i < rig->interlock_count; i++)
		if (check_one_link(rig, &rig->interlocks[i].condition, rig->interlocks[i].at, reterr) < 0)
			return -1;
	for (size_t i = 0; i < rig->before_count; i++)
		if (check_one_link(rig, &rig->before[i].condition, rig->before[i].at, reterr) < 0)
			return -1;
	if (check_steps(rig, rig->safe_state, rig->safe_state_count, reterr) < 0)
		return -1;
	for (size_t s = 0; s < conductor->config.suite_count; s++)
		for (size_t t = 0; t < conductor->config.suites[s]->test_count; t++) {
			const struct test *test = &conductor->config.suites[s]->tests[t];
			if (check_steps(rig, test->stimulus, test->stimulus_count, reterr) < 0 ||
			    check_steps(rig, test->restore, test->restore_count, reterr) < 0)
				return -1;
		}
	return 0;
}

static int make_workers(struct conductor *conductor, size_t row_values_most, struct err *reterr)
{
	const struct rig *rig = conductor->rig;
	for (size_t i = 0; i < rig->link_count; i++) {
		struct worker_config config = {
		    .rig = rig,
		    .link_index = (int)i,
		    .link = conductor->config.links[i],
		    .clock = conductor->config.clock,
		    .stop = conductor->config.stop,
		    .row_values_most = row_values_most,
		    .wake = wake_from_worker,
		    .wake_context = conductor,
		};
		if (worker_new(&config, &conductor->workers[i], reterr) < 0)
			return -1;
		conductor->config.links[i] = NULL;
	}
	for (size_t i = 0; i < rig->interlock_count; i++) {
		const struct condition *condition = &rig->interlocks[i].condition;
		struct worker *worker =
		    conductor->workers[conductor_worker_of(conductor, condition->channel)];
		if (worker_watch_add(worker, WATCH_INTERLOCK, condition, 0) < 0)
			return err_set(reterr, ERR_FILE, "more than %d interlocks on one link", WATCHES_MOST);
	}
	return 0;
}

int conductor_new(const struct conductor_config *config, struct conductor **ret_conductor,
                  struct err *reterr)
{
	struct conductor *conductor = calloc(1, sizeof *conductor);
	if (!conductor)
		return err_set(reterr, ERR_NOMEM, "no memory for the conductor");
	conductor->config = *config;
	conductor->rig = config->rig;
	conductor->suite = 0;
	conductor->test = -1;
	conductor->now = (struct conductor_now){.suite = -1, .test = -1};
	conductor->walk.watch = -1;
	conductor->before_watch = -1;
	(void)pthread_mutex_init(&conductor->mutex, NULL);
	(void)pthread_cond_init(&conductor->cond, NULL);
	size_t most;
	conductor->workers = calloc(config->rig->link_count, sizeof(struct worker *));
	conductor->commanded = calloc(config->rig->channel_count, sizeof *conductor->commanded);
	if (!conductor->workers || !conductor->commanded) {
		(void)err_set(reterr, ERR_NOMEM, "no memory for the conductor");
		goto fail;
	}
	for (size_t i = 0; i < config->rig->channel_count; i++)
		conductor->commanded[i] = (double)NAN;
	if (check_conditions(conductor, reterr) < 0 ||
	    ring_init(&conductor->events, sizeof(struct journal_event), 8192, reterr) < 0 ||
	    test_plans_make(conductor, config->arena, &most, reterr) < 0 ||
	    make_workers(conductor, most, reterr) < 0)
		goto fail;
	*ret_conductor = conductor;
	return 0;
fail:
	conductor_free(conductor);
	return -1;
}

void conductor_free(struct conductor *conductor)
{
	if (!conductor)
		return;
	for (size_t i = 0; conductor->workers && i < conductor->rig->link_count; i++)
		worker_free(conductor->workers[i]);
	free(conductor->workers);
	free(conductor->commanded);
	ring_release(&conductor->events);
	(void)pthread_cond_destroy(&conductor->cond);
	(void)pthread_mutex_destroy(&conductor->mutex);
	free(conductor);
}

/* ---- tests ---------------------------------------------------------------- */

static void now_is(struct conductor *conductor, int64_t now_ns)
{
	(void)pthread_mutex_lock(&conductor->mutex);
	conductor->now.suite = conductor->now_test ? conductor->suite : -1;
	conductor->now.test = conductor->now_test ? conductor->test : -1;
	conductor->now.step = NULL;
	conductor->now.test_begin_ns = now_ns;
	(void)pthread_mutex_unlock(&conductor->mutex);
}

static void count_links(const struct conductor *conductor, uint64_t *missed, uint64_t *lost)
{
	*missed = *lost = 0;
	for (size_t i = 0; i < conductor->rig->link_count; i++) {
		struct worker_counts counts = worker_counts(conductor->workers[i]);
		*missed += counts.missed_slots;
		*lost += counts.lost_replies;
	}
}

static const struct test *peek_next(const struct conductor *conductor, int *suite, int *test)
{
	int s = conductor->suite, t = conductor->test + 1;
	for (; s < (int)conductor->config.suite_count; s++, t = 0)
		for (; t < (int)conductor->config.suites[s]->test_count; t++)
			if (conductor->config.suites[s]->tests[t].selected) {
				*suite = s;
				*test = t;
				return &conductor->config.suites[s]->tests[t];
			}
	return NULL;
}

static void tell_test_end(struct conductor *conductor, int64_t now_ns)
{
	struct journal_event event = conductor_event(conductor, JOURNAL_TEST_END, now_ns);
	uint64_t missed, lost;
	count_links(conductor, &missed, &lost);
	event.status = (int)conductor->test_end;
	event.number = (int)(missed - conductor->missed_before);
	event.expected = (int)(lost - conductor->lost_before);
	(void)snprintf(event.text, sizeof event.text, "%s", conductor->test_reason);
	conductor_tell(conductor, &event);
	conductor->now_test = NULL;
	now_is(conductor, now_ns);
}

static void end_as(struct conductor *conductor, enum test_end end, const char *reason)
{
	if (conductor->test_end != TEST_COMPLETED)
		return;
	conductor->test_end = end;
	(void)snprintf(conductor->test_reason, sizeof conductor->test_reason, "%.255s", reason);
}

static void begin_test(struct conductor *conductor, const struct test *test, int64_t now_ns)
{
	bool chain_broken = test->continues && conductor->test_end != TEST_COMPLETED;
	conductor->now_test = test;
	conductor->plan = test_plan_of(conductor, conductor->suite, conductor->test);
	conductor->test_reason[0] = '\0';
	count_links(conductor, &conductor->missed_before, &conductor->lost_before);
	now_is(conductor, now_ns);
	struct journal_event event = conductor_event(conductor, JOURNAL_TEST_BEGIN, now_ns);
	conductor_tell(conductor, &event);
	if (chain_broken) {
		conductor->test_end = TEST_NOT_STARTED;
		(void)snprintf(conductor->test_reason, sizeof conductor->test_reason,
		               "it continues a test that did not complete");
		tell_test_end(conductor, now_ns);
		return; /* still PHASE_NEXT */
	}
	conductor->test_end = TEST_COMPLETED;
	for (size_t i = 0; i < conductor->rig->link_count; i++) {
		worker_set_plan(conductor->workers[i], &conductor->plan->plans[i]);
		worker_rest_mode(conductor->workers[i], false);
	}
	conductor->before_next = 0;
	conductor->before_watch = -1;
	conductor->phase = PHASE_BEFORE;
}

static void begin_stimulus(struct conductor *conductor, int64_t now_ns)
{
	struct journal_event event = conductor_event(conductor, JOURNAL_STIMULUS, now_ns);
	conductor_tell(conductor, &event);
	walk_start(&conductor->walk, conductor->now_test->stimulus,
	           conductor->now_test->stimulus_count);
	conductor->phase = PHASE_STIMULUS;
}

static void precondition_failed(struct conductor *conductor, const struct precondition *before,
                                const struct watch *watch, int64_t now_ns)
{
	const struct channel_info *info = &conductor->rig->infos[before->condition.channel];
	struct journal_event event = conductor_event(conductor, JOURNAL_PRECONDITION, now_ns);
	event.channel = before->condition.channel;
	event.condition = &before->condition;
	event.line = before->at.line;
	event.earliest_ns = conductor->before_begin_ns;
	event.latest_ns = now_ns;
	event.value = watch->value;
	const char *name = channel_value_name(info, watch->value);
	if (watch->rows == 0)
		(void)snprintf(event.text, sizeof event.text, "before: %s was not read", info->name);
	else
		(void)snprintf(event.text, sizeof event.text, "before: %s is %.6g %s%s%s%s", info->name,
		               watch->value, info->unit->name, name ? " (" : "", name ? name : "",
		               name ? ")" : "");
	conductor_tell(conductor, &event);
	end_as(conductor, TEST_PRECONDITION, event.text);
}

/* True where the stimulus may begin, or the test has ended. */
static void before_tick(struct conductor *conductor, int64_t now_ns, int64_t *due_ns)
{
	const struct rig *rig = conductor->rig;
	while (!conductor->now_test->continues && conductor->before_next < rig->before_count) {
		const struct precondition *before = &rig->before[conductor->before_next];
		if (conductor->before_watch < 0) {
			conductor->before_worker = conductor_worker_of(conductor, before->condition.channel);
			conductor->before_watch = worker_watch_add(conductor->workers[conductor->before_worker],
			                                           WATCH_AWAIT, &before->condition, now_ns);
			conductor->before_begin_ns = now_ns;
		}
		struct worker *worker = conductor->workers[conductor->before_worker];
		struct watch watch = {.value = (double)NAN};
		if (conductor->before_watch >= 0)
			worker_watch_get(worker, conductor->before_watch, &watch);
		int64_t until = conductor->before_begin_ns + before->condition.for_ns +
		                (before->wait_ns > 0 ? before->wait_ns : BEFORE_NS);
		if (!watch.fired && now_ns < until) {
			*due_ns = until;
			return;
		}
		worker_watch_remove(worker, conductor->before_watch);
		conductor->before_watch = -1;
		if (!watch.fired) {
			precondition_failed(conductor, before, &watch, now_ns);
			conductor->phase = PHASE_REST;
			rest_start(conductor, false, now_ns);
			return;
		}
		conductor->before_next++;
	}
	begin_stimulus(conductor, now_ns);
}

static void begin_restore(struct conductor *conductor, int64_t now_ns)
{
	struct journal_event event = conductor_event(conductor, JOURNAL_STIMULUS_END, now_ns);
	conductor_tell(conductor, &event);
	walk_stop(conductor, &conductor->walk);
	memset(conductor->ramps, 0, sizeof conductor->ramps);
	walk_start(&conductor->walk, conductor->now_test->restore, conductor->now_test->restore_count);
	conductor->phase = PHASE_RESTORE;
}

static void stimulus_tick(struct conductor *conductor, int64_t now_ns, int64_t *due_ns)
{
	char why[256] = "";
	mark_watches_tick(conductor, now_ns);
	enum progress progress = ramps_tick(conductor, now_ns, due_ns, why, sizeof why);
	if (progress == PROGRESS_FAILED) {
		end_as(conductor, TEST_ABORTED, why);
		begin_restore(conductor, now_ns);
		return;
	}
	progress = walk_tick(conductor, &conductor->walk, false, now_ns, due_ns);
	if (progress == PROGRESS_RUNNING)
		return;
	if (progress == PROGRESS_FAILED) {
		const struct walk *walk = &conductor->walk;
		bool expired = walk->step && walk->step->kind == STEP_AWAIT;
		end_as(conductor, expired ? TEST_AWAIT_EXPIRED : TEST_ABORTED, walk->why);
	}
	mark_watches_tick(conductor, now_ns);
	begin_restore(conductor, now_ns);
}

static void restore_tick(struct conductor *conductor, int64_t now_ns, int64_t *due_ns)
{
	enum progress progress = walk_tick(conductor, &conductor->walk, false, now_ns, due_ns);
	if (progress == PROGRESS_RUNNING)
		return;
	if (progress == PROGRESS_FAILED) {
		char why[256];
		(void)snprintf(why, sizeof why, "restore: %.240s", conductor->walk.why);
		end_as(conductor, TEST_ABORTED, why);
	}
	mark_watches_clear(conductor);
	int suite, test;
	const struct test *next = peek_next(conductor, &suite, &test);
	if (next && next->continues && suite == conductor->suite && test == conductor->test + 1 &&
	    conductor->test_end == TEST_COMPLETED) {
		tell_test_end(conductor, now_ns);
		conductor->phase = PHASE_NEXT;
		return;
	}
	conductor->phase = PHASE_REST;
	rest_start(conductor, false, now_ns);
}

/* ---- gates, aborts, the end ------------------------------------------------ */

static void ask_gate(struct conductor *conductor)
{
	(void)pthread_mutex_lock(&conductor->mutex);
	conductor->gate = 1;
	(void)pthread_mutex_unlock(&conductor->mutex);
	conductor->phase = PHASE_GATE;
}

static void begin_last_rest(struct conductor *conductor, int64_t now_ns)
{
	conductor->phase = PHASE_LAST_REST;
	rest_start(conductor, true, now_ns);
}

static void gate_tick(struct conductor *conductor, int64_t now_ns, int64_t *due_ns)
{
	(void)pthread_mutex_lock(&conductor->mutex);
	int gate = conductor->gate;
	char reason[256];
	(void)snprintf(reason, sizeof reason, "%s", conductor->gate_reason);
	if (gate >= 2)
		conductor->gate = 0;
	(void)pthread_mutex_unlock(&conductor->mutex);
	if (gate < 2) {
		*due_ns = now_ns + 5 * NS_PER_MS;
		return;
	}
	if (gate == 2) {
		conductor->phase = PHASE_NEXT;
		return;
	}
	conductor->gate_failed = true;
	struct journal_event event = conductor_event(conductor, JOURNAL_NOTE, now_ns);
	(void)snprintf(event.text, sizeof event.text, "the other tests are not run: %.300s", reason);
	conductor_tell(conductor, &event);
	begin_last_rest(conductor, now_ns);
}

static void abort_run(struct conductor *conductor, int64_t now_ns)
{
	char reason[256];
	stop_reason(conductor->config.stop, reason, sizeof reason);
	struct journal_event event = conductor_event(conductor, JOURNAL_ABORT, now_ns);
	(void)snprintf(event.text, sizeof event.text, "%s", reason);
	conductor_tell(conductor, &event);
	if (conductor->before_watch >= 0)
		worker_watch_remove(conductor->workers[conductor->before_worker], conductor->before_watch);
	conductor->before_watch = -1;
	bool in_test = conductor->now_test != NULL;
	if (in_test) {
		conductor->test_end = TEST_ABORTED;
		(void)snprintf(conductor->test_reason, sizeof conductor->test_reason, "%.255s", reason);
	}
	begin_last_rest(conductor, now_ns);
	if (in_test)
		tell_test_end(conductor, now_ns);
}

static void end_run(struct conductor *conductor)
{
	conductor->phase = PHASE_ENDED;
	(void)pthread_mutex_lock(&conductor->mutex);
	conductor->ended = true;
	(void)pthread_mutex_unlock(&conductor->mutex);
}

static void next_tick(struct conductor *conductor, int64_t now_ns)
{
	int suite, test;
	const struct test *next = peek_next(conductor, &suite, &test);
	if (!next) {
		begin_last_rest(conductor, now_ns);
		return;
	}
	conductor->suite = suite;
	conductor->test = test;
	begin_test(conductor, next, now_ns);
}

static void rest_phase_tick(struct conductor *conductor, int64_t now_ns, int64_t *due_ns)
{
	enum progress progress = rest_tick(conductor, now_ns, due_ns);
	if (progress == PROGRESS_RUNNING)
		return;
	if (conductor->phase == PHASE_LAST_REST) {
		end_run(conductor);
		return;
	}
	if (progress == PROGRESS_FAILED) {
		(void)stop_raise(conductor->config.stop, "rest is not confirmed: %s",
		                 conductor->rest.reason);
		return;
	}
	if (conductor->phase == PHASE_FIRST_REST) {
		conductor->phase = PHASE_NEXT;
		return;
	}
	bool bench = conductor->now_test->bench;
	tell_test_end(conductor, now_ns);
	if (bench)
		ask_gate(conductor);
	else
		conductor->phase = PHASE_NEXT;
}

int64_t conductor_tick(struct conductor *conductor, int64_t now_ns)
{
	int64_t due_ns = INT64_MAX;
	for (int turns = 0; turns < 100; turns++) {
		if (stop_raised(conductor->config.stop) && conductor->phase < PHASE_LAST_REST)
			abort_run(conductor, now_ns);
		enum phase phase = conductor->phase;
		due_ns = INT64_MAX;
		switch (phase) {
		case PHASE_FIRST_REST:
			if (!conductor->first_rest) {
				conductor->first_rest = true;
				rest_start(conductor, false, now_ns);
			}
			rest_phase_tick(conductor, now_ns, &due_ns);
			break;
		case PHASE_NEXT:
			next_tick(conductor, now_ns);
			due_ns = now_ns;
			break;
		case PHASE_BEFORE:
			before_tick(conductor, now_ns, &due_ns);
			break;
		case PHASE_STIMULUS:
			stimulus_tick(conductor, now_ns, &due_ns);
			break;
		case PHASE_RESTORE:
			restore_tick(conductor, now_ns, &due_ns);
			break;
		case PHASE_REST:
		case PHASE_LAST_REST:
			rest_phase_tick(conductor, now_ns, &due_ns);
			break;
		case PHASE_GATE:
			gate_tick(conductor, now_ns, &due_ns);
			break;
		case PHASE_ENDED:
			return INT64_MAX;
		}
		if (conductor->phase == phase && phase != PHASE_NEXT &&
		    !(stop_raised(conductor->config.stop) && phase < PHASE_LAST_REST))
			return due_ns;
	}
	return now_ns;
}

void conductor_loop(struct conductor *conductor)
{
	(void)prctl(PR_SET_TIMERSLACK, 1UL);
	while (!conductor_ended(conductor)) {
		int64_t now = clock_now(&conductor->config.clock);
		int64_t due = conductor_tick(conductor, now);
		(void)pthread_mutex_lock(&conductor->mutex);
		while (!conductor->woken && !conductor->ended) {
			now = clock_now(&conductor->config.clock);
			if (due <= now)
				break;
			int64_t pause = due - now > 100 * NS_PER_MS ? 100 * NS_PER_MS : due - now;
			struct timespec at;
			(void)clock_gettime(CLOCK_MONOTONIC, &at);
			int64_t ns = at.tv_nsec + pause;
			at.tv_sec += ns / NS_PER_S;
			at.tv_nsec = ns % NS_PER_S;
			(void)pthread_cond_clockwait(&conductor->cond, &conductor->mutex, CLOCK_MONOTONIC, &at);
			if (pause == 100 * NS_PER_MS)
				break;
		}
		conductor->woken = false;
		(void)pthread_mutex_unlock(&conductor->mutex);
	}
}

bool conductor_ended(struct conductor *conductor)
{
	(void)pthread_mutex_lock(&conductor->mutex);
	bool ended = conductor->ended;
	(void)pthread_mutex_unlock(&conductor->mutex);
	return ended;
}

bool conductor_woken(struct conductor *conductor)
{
	(void)pthread_mutex_lock(&conductor->mutex);
	bool woken = conductor->woken;
	conductor->woken = false;
	(void)pthread_mutex_unlock(&conductor->mutex);
	return woken;
}

void conductor_wake(struct conductor *conductor)
{
	(void)pthread_mutex_lock(&conductor->mutex);
	conductor->woken = true;
	(void)pthread_cond_signal(&conductor->cond);
	(void)pthread_mutex_unlock(&conductor->mutex);
}

/* ---- main's side ----------------------------------------------------------- */

size_t conductor_worker_count(const struct conductor *conductor)
{
	return conductor->rig->link_count;
}

struct worker *conductor_worker(struct conductor *conductor, size_t index)
{
	return conductor->workers[index];
}

struct ring *conductor_events(struct conductor *conductor)
{
	return &conductor->events;
}

const struct read_block *conductor_block(const struct conductor *conductor, int generation,
                                         int block, int *ret_suite, int *ret_test)
{
	if (generation < 0 || (size_t)generation + 1 >= conductor->plan_count)
		return NULL;
	const struct test_plan *plan = &conductor->plans[generation];
	*ret_suite = plan->suite;
	*ret_test = plan->test;
	return block >= 0 && (size_t)block < plan->block_count ? &plan->blocks[block] : NULL;
}

int conductor_block_count(const struct conductor *conductor, int suite, int test)
{
	const struct test_plan *plan = test_plan_of(conductor, suite, test);
	return plan ? (int)plan->block_count : 0;
}

int conductor_generation(const struct conductor *conductor, int suite, int test)
{
	const struct test_plan *plan = test_plan_of(conductor, suite, test);
	return plan ? plan->generation : -1;
}

bool conductor_gate_asked(struct conductor *conductor, int *ret_suite, int *ret_test)
{
	(void)pthread_mutex_lock(&conductor->mutex);
	bool asked = conductor->gate == 1;
	(void)pthread_mutex_unlock(&conductor->mutex);
	/* While it waits, the conductor's thread does not change these two. */
	*ret_suite = conductor->suite;
	*ret_test = conductor->test;
	return asked;
}

void conductor_gate_answer(struct conductor *conductor, bool pass, const char *reason)
{
	(void)pthread_mutex_lock(&conductor->mutex);
	if (conductor->gate == 1) {
		conductor->gate = pass ? 2 : 3;
		(void)snprintf(conductor->gate_reason, sizeof conductor->gate_reason, "%s", reason);
	}
	(void)pthread_mutex_unlock(&conductor->mutex);
	conductor_wake(conductor);
}

struct conductor_now conductor_now(struct conductor *conductor)
{
	(void)pthread_mutex_lock(&conductor->mutex);
	struct conductor_now now = conductor->now;
	(void)pthread_mutex_unlock(&conductor->mutex);
	return now;
}

struct rest_outcome conductor_rest(const struct conductor *conductor)
{
	struct rest_outcome rest = conductor->rest;
	rest.needed = conductor->anything_commanded;
	return rest;
}
