/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The way to rest: the rig's safe_state steps, passed over failures, then the
 * confirmation, again and again until it is there or the rig's time is over.
 *
 * Confirmed means: every await of the safe state whose device is not under
 * test holds (again), on rows read after the last command; at the end of a
 * run over fresh connections. Where the rig has no such await, those of the
 * device under test are taken and the reason says so. A device that does not
 * acknowledge its commands is named in the reason even when the shaft is
 * measured at rest.
 */
#include <stdio.h>
#include <string.h>

#include "conductor_state.h"

static void start_round(struct conductor *conductor, int64_t now_ns)
{
	conductor->rest_stage = REST_STEPS;
	conductor->unacknowledged = 0;
	walk_start(&conductor->walk, conductor->rig->safe_state, conductor->rig->safe_state_count);
	(void)now_ns;
}

void rest_start(struct conductor *conductor, bool last, int64_t now_ns)
{
	struct journal_event event = conductor_event(conductor, JOURNAL_REST_BEGIN, now_ns);
	conductor_tell(conductor, &event);
	walk_stop(conductor, &conductor->walk);
	mark_watches_clear(conductor);
	memset(conductor->ramps, 0, sizeof conductor->ramps);
	for (size_t i = 0; i < conductor->rig->link_count; i++) {
		worker_rest_mode(conductor->workers[i], true);
		worker_set_plan(conductor->workers[i], &idle_plan(conductor)->plans[i]);
	}
	conductor->rest_begin_ns = now_ns;
	conductor->rest_last = last;
	conductor->confirm_count = 0;
	conductor->rest = (struct rest_outcome){.needed = true};
	(void)pthread_mutex_lock(&conductor->mutex);
	conductor->now.resting = true;
	(void)pthread_mutex_unlock(&conductor->mutex);
	start_round(conductor, now_ns);
}

static bool is_independent(const struct conductor *conductor, const struct step *step)
{
	int device = rig_channel_device(conductor->rig, step->condition.channel);
	return device >= 0 && !conductor->rig->devices[device].under_test &&
	       conductor->rig->infos[step->condition.channel].evidence == EVIDENCE_INDEPENDENT;
}

/* The awaits that confirm; *ret_independent: whether another device says so. */
static size_t confirming_steps(const struct conductor *conductor, const struct step **steps,
                               bool *ret_independent)
{
	const struct rig *rig = conductor->rig;
	size_t count = 0;
	for (int pass = 0; pass < 2 && count == 0; pass++) {
		*ret_independent = pass == 0;
		for (size_t i = 0; i < rig->safe_state_count && count < CONFIRM_MOST; i++)
			if (rig->safe_state[i].kind == STEP_AWAIT &&
			    (pass == 1 || is_independent(conductor, &rig->safe_state[i])))
				steps[count++] = &rig->safe_state[i];
	}
	return count;
}

static void drop_confirms(struct conductor *conductor)
{
	for (size_t i = 0; i < conductor->confirm_count; i++)
		worker_watch_remove(conductor->workers[conductor->confirms[i].worker],
		                    conductor->confirms[i].watch);
	conductor->confirm_count = 0;
}

static void renew_links(struct conductor *conductor)
{
	const struct step *steps[CONFIRM_MOST];
	bool independent;
	size_t count = confirming_steps(conductor, steps, &independent);
	for (size_t i = 0; i < count; i++)
		worker_renew(
		    conductor->workers[conductor_worker_of(conductor, steps[i]->condition.channel)]);
}

static bool links_fresh(struct conductor *conductor)
{
	const struct step *steps[CONFIRM_MOST];
	bool independent;
	size_t count = confirming_steps(conductor, steps, &independent);
	for (size_t i = 0; i < count; i++)
		if (!worker_fresh(
		        conductor->workers[conductor_worker_of(conductor, steps[i]->condition.channel)]))
			return false;
	return true;
}

static void start_confirming(struct conductor *conductor, int64_t now_ns)
{
	const struct step *steps[CONFIRM_MOST];
	bool independent;
	size_t count = confirming_steps(conductor, steps, &independent);
	conductor->rest_stage = REST_CONFIRM;
	conductor->rest_stage_ns = now_ns;
	for (size_t i = 0; i < count; i++) {
		int worker = conductor_worker_of(conductor, steps[i]->condition.channel);
		conductor->confirms[i] = (struct confirm_watch){
		    .worker = worker,
		    .step = steps[i],
		    .watch = worker_watch_add(conductor->workers[worker], WATCH_AWAIT, &steps[i]->condition,
		                              now_ns)};
	}
	conductor->confirm_count = count;
}

static void say(struct conductor *conductor, const char *format, const char *what)
{
	(void)snprintf(conductor->rest.reason, sizeof conductor->rest.reason, format, what);
}

/* All the confirming awaits hold: the sentence for the reports. */
static void confirmed(struct conductor *conductor)
{
	const struct step *steps[CONFIRM_MOST];
	bool independent;
	(void)confirming_steps(conductor, steps, &independent);
	char text[128], also[192] = "";
	if (conductor->unacknowledged > 0)
		(void)snprintf(also, sizeof also, "; but %zu command%s not acknowledged, the last was %s",
		               conductor->unacknowledged,
		               conductor->unacknowledged == 1 ? " was" : "s were",
		               conductor->unacknowledged_name);
	conductor->rest.confirmed = true;
	(void)snprintf(conductor->rest.reason, sizeof conductor->rest.reason, "%s holds%s%s%s",
	               step_text(steps[0], conductor->rig, text, sizeof text),
	               conductor->rest_last ? ", read over a fresh connection" : "",
	               independent ? "" : " (self-reported by the device under test)", also);
}

static bool try_confirm(struct conductor *conductor)
{
	for (size_t i = 0; i < conductor->confirm_count; i++) {
		const struct confirm_watch *confirm = &conductor->confirms[i];
		if (confirm->watch < 0)
			return false;
		struct watch watch;
		worker_watch_get(conductor->workers[confirm->worker], confirm->watch, &watch);
		if (!watch.fired) {
			char text[128];
			(void)snprintf(conductor->rest.reason, sizeof conductor->rest.reason,
			               "%s does not hold; last value %.6g",
			               step_text(confirm->step, conductor->rig, text, sizeof text),
			               watch.value);
			return false;
		}
	}
	return conductor->confirm_count > 0;
}

static int64_t confirm_within(const struct conductor *conductor)
{
	int64_t longest = 0;
	for (size_t i = 0; i < conductor->confirm_count; i++)
		if (conductor->confirms[i].step->condition.for_ns > longest)
			longest = conductor->confirms[i].step->condition.for_ns;
	return longest + NS_PER_S;
}

static enum progress finish_rest(struct conductor *conductor, enum progress progress,
                                 int64_t now_ns)
{
	drop_confirms(conductor);
	struct journal_event event = conductor_event(conductor, JOURNAL_REST, now_ns);
	event.status = progress == PROGRESS_DONE;
	event.expected = conductor->rest_last;
	(void)snprintf(event.text, sizeof event.text, "%s", conductor->rest.reason);
	conductor_tell(conductor, &event);
	(void)pthread_mutex_lock(&conductor->mutex);
	conductor->now.resting = false;
	(void)pthread_mutex_unlock(&conductor->mutex);
	return progress;
}

/* Another round, or the end where the time is over. */
static enum progress again(struct conductor *conductor, int64_t now_ns, int64_t *due_ns)
{
	drop_confirms(conductor);
	if (now_ns - conductor->rest_begin_ns >= conductor->rig->rest_within_ns)
		return finish_rest(conductor, PROGRESS_FAILED, now_ns);
	start_round(conductor, now_ns);
	*due_ns = now_ns;
	return PROGRESS_RUNNING;
}

/*
 * A reply that was awaited when the run was stopped must not hold up the safe
 * state for its whole timeout.
 */
static void free_links(struct conductor *conductor, int64_t now_ns, int64_t *due_ns)
{
	for (size_t i = 0; conductor->rest_last && i < conductor->rig->link_count; i++)
		if (worker_break_off(conductor->workers[i], conductor->rest_begin_ns, now_ns,
		                     20 * NS_PER_MS) &&
		    now_ns + 5 * NS_PER_MS < *due_ns)
			*due_ns = now_ns + 5 * NS_PER_MS;
}

enum progress rest_tick(struct conductor *conductor, int64_t now_ns, int64_t *due_ns)
{
	free_links(conductor, now_ns, due_ns);
	if (conductor->rest_stage == REST_STEPS) {
		if (walk_tick(conductor, &conductor->walk, true, now_ns, due_ns) == PROGRESS_RUNNING) {
			/* A step may wait long (an await of 5 s); the rig's time bounds the whole. */
			if (now_ns - conductor->rest_begin_ns < conductor->rig->rest_within_ns)
				return PROGRESS_RUNNING;
			say(conductor, "the steps of the safe state took too long%s", "");
			walk_stop(conductor, &conductor->walk);
		}
		if (conductor->rest_last)
			renew_links(conductor);
		conductor->rest_stage = REST_FRESH;
		conductor->rest_stage_ns = now_ns;
	}
	if (conductor->rest_stage == REST_FRESH) {
		if (conductor->rest_last && !links_fresh(conductor)) {
			if (now_ns - conductor->rest_stage_ns < 2 * NS_PER_S) {
				*due_ns = now_ns + NS_PER_MS;
				return PROGRESS_RUNNING;
			}
			say(conductor, "the device that would confirm it cannot be reached%s", "");
			return again(conductor, now_ns, due_ns);
		}
		start_confirming(conductor, now_ns);
	}
	if (conductor->confirm_count == 0) {
		say(conductor, "the rig's safe_state has no await%s", "");
		return finish_rest(conductor, PROGRESS_FAILED, now_ns);
	}
	if (try_confirm(conductor)) {
		confirmed(conductor);
		return finish_rest(conductor, PROGRESS_DONE, now_ns);
	}
	int64_t until = conductor->rest_stage_ns + confirm_within(conductor);
	if (now_ns < until) {
		*due_ns = until < *due_ns ? until : *due_ns;
		return PROGRESS_RUNNING;
	}
	return again(conductor, now_ns, due_ns);
}
