/* SPDX-License-Identifier: Apache-2.0 */
/*
 * What each kind of step does, as begin and tick in one table; a walk goes
 * through a list of them, cycles with a small stack. On the way to rest the
 * same steps run, but a failure is journalled and passed over: an unreachable
 * device or an expired await never stops the steps after it.
 */
#include <stdio.h>
#include <string.h>

#include "conductor_state.h"

static const int64_t RAMP_PERIOD_NS = 10 * NS_PER_MS;

struct step_act {
	void (*begin)(struct conductor *conductor, struct walk *walk, int64_t now_ns);
	enum progress (*tick)(struct conductor *conductor, struct walk *walk, bool resting,
	                      int64_t now_ns, int64_t *due_ns);
};

static void soonest(int64_t *due_ns, int64_t at_ns)
{
	if (at_ns < *due_ns)
		*due_ns = at_ns;
}

/* What the way to rest does belongs to no test: its commands and waits are not the stimulus. */
static struct journal_event step_event(const struct conductor *conductor, enum journal_kind kind,
                                       bool resting, int64_t now_ns)
{
	struct journal_event event = conductor_event(conductor, kind, now_ns);
	if (resting)
		event.suite = event.test = -1;
	return event;
}

static void tell_command(struct conductor *conductor, const struct command_op *op,
                         enum progress progress, bool resting, int64_t now_ns)
{
	struct journal_event event = step_event(conductor, JOURNAL_COMMAND, resting, now_ns);
	const struct rig_channel *channel = &conductor->rig->channels[op->channel];
	event.channel = op->channel;
	event.device = channel->device;
	event.value = op->value;
	event.earliest_ns = op->sent_ns + channel->effect_least_ns;
	event.latest_ns = op->received_ns + channel->effect_most_ns;
	event.status = progress == PROGRESS_DONE ? LINK_OK
	               : op->exception           ? LINK_EXCEPTION
	                                         : LINK_TIMEOUT;
	event.number = op->exception;
	if (progress != PROGRESS_DONE)
		(void)snprintf(event.text, sizeof event.text, "%s", op->why);
	conductor_tell(conductor, &event);
}

/* ---- set ---------------------------------------------------------------- */

static void begin_assign(struct conductor *conductor, struct walk *walk, int64_t now_ns)
{
	const struct assignment *assign = &walk->step->assigns[walk->assign];
	command_start(conductor, &walk->command, assign->channel, assign->value, now_ns);
}

static void set_begin(struct conductor *conductor, struct walk *walk, int64_t now_ns)
{
	walk->assign = 0;
	walk->mark_earliest_ns = INT64_MAX;
	walk->mark_latest_ns = INT64_MIN;
	begin_assign(conductor, walk, now_ns);
}

/* A step of its own for a ramp of the same channel ends it. */
static void stop_ramp_of(struct conductor *conductor, int channel)
{
	for (int i = 0; i < RAMPS_MOST; i++)
		if (conductor->ramps[i].active && conductor->ramps[i].channel == channel &&
		    !conductor->ramps[i].commanding)
			conductor->ramps[i].active = false;
}

static enum progress set_tick(struct conductor *conductor, struct walk *walk, bool resting,
                              int64_t now_ns, int64_t *due_ns)
{
	for (;;) {
		struct command_op *op = &walk->command;
		const struct rig_channel *channel = &conductor->rig->channels[op->channel];
		const struct rig_link *link =
		    &conductor->rig->links[conductor->rig->devices[channel->device].link];
		if (resting && op->deadline_ns > op->begin_ns + 3 * link->reply_timeout_ns)
			op->deadline_ns = op->begin_ns + 3 * link->reply_timeout_ns;
		enum progress progress = command_tick(conductor, op, resting, now_ns, due_ns);
		if (progress == PROGRESS_RUNNING)
			return PROGRESS_RUNNING;
		tell_command(conductor, op, progress, resting, now_ns);
		if (progress == PROGRESS_FAILED) {
			if (!resting) {
				(void)snprintf(walk->why, sizeof walk->why, "%s", op->why);
				return PROGRESS_FAILED;
			}
			conductor->unacknowledged++;
			(void)snprintf(conductor->unacknowledged_name, sizeof conductor->unacknowledged_name,
			               "%s", channel->info.name);
		} else {
			conductor->commanded[op->channel] = op->value;
			stop_ramp_of(conductor, op->channel);
			int64_t earliest = op->sent_ns + channel->effect_least_ns;
			int64_t latest = op->received_ns + channel->effect_most_ns;
			if (earliest < walk->mark_earliest_ns)
				walk->mark_earliest_ns = earliest;
			if (latest > walk->mark_latest_ns)
				walk->mark_latest_ns = latest;
		}
		if (++walk->assign == walk->step->assign_count)
			return PROGRESS_DONE;
		begin_assign(conductor, walk, now_ns);
	}
}

/* ---- ramp ---------------------------------------------------------------- */

static struct ramp_op *ramp_of(struct conductor *conductor, int channel)
{
	for (int i = 0; i < RAMPS_MOST; i++)
		if (conductor->ramps[i].active && conductor->ramps[i].channel == channel)
			return &conductor->ramps[i];
	return NULL;
}

static void ramp_begin(struct conductor *conductor, struct walk *walk, int64_t now_ns)
{
	const struct assignment *assign = &walk->step->assigns[0];
	double from = conductor->commanded[assign->channel];
	struct ramp_op *ramp = ramp_of(conductor, assign->channel);
	for (int i = 0; i < RAMPS_MOST && !ramp; i++)
		if (!conductor->ramps[i].active)
			ramp = &conductor->ramps[i];
	if (!ramp)
		return; /* ramp_tick says so */
	*ramp = (struct ramp_op){.active = true,
	                         .channel = assign->channel,
	                         .from = isnan(from) ? 0 : from,
	                         .to = assign->value,
	                         .begin_ns = now_ns,
	                         .over_ns = walk->step->duration_ns,
	                         .next_ns = now_ns};
}

static enum progress ramp_tick(struct conductor *conductor, struct walk *walk, bool resting,
                               int64_t now_ns, int64_t *due_ns)
{
	(void)resting;
	const struct ramp_op *ramp = ramp_of(conductor, walk->step->assigns[0].channel);
	if (walk->begin_ns == now_ns && !ramp) {
		(void)snprintf(walk->why, sizeof walk->why, "more than %d ramps at a time", RAMPS_MOST);
		return PROGRESS_FAILED;
	}
	if (!walk->step->wait || !ramp)
		return PROGRESS_DONE;
	soonest(due_ns, now_ns + NS_PER_MS);
	return PROGRESS_RUNNING;
}

static double ramp_value(const struct ramp_op *ramp, int64_t now_ns)
{
	if (now_ns >= ramp->begin_ns + ramp->over_ns)
		return ramp->to;
	double share = (double)(now_ns - ramp->begin_ns) / (double)ramp->over_ns;
	return ramp->from + share * (ramp->to - ramp->from);
}

static enum progress one_ramp(struct conductor *conductor, struct ramp_op *ramp, int64_t now_ns,
                              int64_t *due_ns)
{
	if (!ramp->commanding) {
		if (now_ns < ramp->next_ns) {
			soonest(due_ns, ramp->next_ns);
			return PROGRESS_RUNNING;
		}
		command_start(conductor, &ramp->command, ramp->channel, ramp_value(ramp, now_ns), now_ns);
		ramp->commanding = true;
	}
	enum progress progress = command_tick(conductor, &ramp->command, false, now_ns, due_ns);
	if (progress == PROGRESS_RUNNING)
		return PROGRESS_RUNNING;
	ramp->commanding = false;
	tell_command(conductor, &ramp->command, progress, false, now_ns);
	if (progress == PROGRESS_FAILED)
		return PROGRESS_FAILED;
	conductor->commanded[ramp->channel] = ramp->command.value;
	if (ramp->command.value == ramp->to) {
		ramp->active = false;
		return PROGRESS_DONE;
	}
	while (ramp->next_ns <= now_ns)
		ramp->next_ns += RAMP_PERIOD_NS;
	if (ramp->next_ns > ramp->begin_ns + ramp->over_ns)
		ramp->next_ns = ramp->begin_ns + ramp->over_ns;
	soonest(due_ns, ramp->next_ns);
	return PROGRESS_RUNNING;
}

enum progress ramps_tick(struct conductor *conductor, int64_t now_ns, int64_t *due_ns, char *why,
                         size_t size)
{
	for (int i = 0; i < RAMPS_MOST; i++) {
		struct ramp_op *ramp = &conductor->ramps[i];
		if (ramp->active && one_ramp(conductor, ramp, now_ns, due_ns) == PROGRESS_FAILED) {
			(void)snprintf(why, size, "%s", ramp->command.why);
			return PROGRESS_FAILED;
		}
	}
	return PROGRESS_DONE;
}

/* ---- hold, await, silence, attempt, mark --------------------------------- */

static void hold_begin(struct conductor *conductor, struct walk *walk, int64_t now_ns)
{
	(void)conductor;
	walk->due_ns = now_ns + walk->step->duration_ns;
}

static enum progress hold_tick(struct conductor *conductor, struct walk *walk, bool resting,
                               int64_t now_ns, int64_t *due_ns)
{
	(void)conductor;
	(void)resting;
	if (now_ns >= walk->due_ns)
		return PROGRESS_DONE;
	soonest(due_ns, walk->due_ns);
	return PROGRESS_RUNNING;
}

static void await_begin(struct conductor *conductor, struct walk *walk, int64_t now_ns)
{
	const struct condition *condition = &walk->step->condition;
	walk->watch_worker = conductor_worker_of(conductor, condition->channel);
	walk->watch =
	    worker_watch_add(conductor->workers[walk->watch_worker], WATCH_AWAIT, condition, now_ns);
	walk->due_ns = now_ns + walk->step->timeout_ns;
}

static void tell_expired(struct conductor *conductor, const struct walk *walk, bool resting,
                         int64_t now_ns)
{
	struct journal_event event = step_event(conductor, JOURNAL_AWAIT_EXPIRED, resting, now_ns);
	event.channel = walk->step->condition.channel;
	event.condition = &walk->step->condition;
	event.line = walk->step->at.line;
	event.earliest_ns = walk->begin_ns;
	event.latest_ns = now_ns;
	(void)snprintf(event.text, sizeof event.text, "%.380s", walk->why);
	conductor_tell(conductor, &event);
}

static enum progress await_tick(struct conductor *conductor, struct walk *walk, bool resting,
                                int64_t now_ns, int64_t *due_ns)
{
	struct worker *worker = conductor->workers[walk->watch_worker];
	char buffer[160];
	if (walk->watch < 0) {
		(void)snprintf(walk->why, sizeof walk->why, "too many conditions are watched at once");
		return PROGRESS_FAILED;
	}
	struct watch watch;
	worker_watch_get(worker, walk->watch, &watch);
	if (watch.fired) {
		worker_watch_remove(worker, walk->watch);
		walk->watch = -1;
		walk->mark_earliest_ns = watch.became_earliest_ns;
		walk->mark_latest_ns = watch.became_latest_ns;
		return PROGRESS_DONE;
	}
	if (now_ns < walk->due_ns) {
		soonest(due_ns, walk->due_ns);
		return PROGRESS_RUNNING;
	}
	worker_watch_remove(worker, walk->watch);
	walk->watch = -1;
	walk->failed_condition = walk->step->condition;
	const struct channel_info *info = &conductor->rig->infos[walk->step->condition.channel];
	(void)snprintf(walk->why, sizeof walk->why, "%.150s: not within %.4g s",
	               step_text(walk->step, conductor->rig, buffer, sizeof buffer),
	               (double)walk->step->timeout_ns / 1e9);
	size_t length = strlen(walk->why);
	if (watch.rows == 0)
		(void)snprintf(walk->why + length, sizeof walk->why - length, "; %s was not read",
		               info->name);
	else
		(void)snprintf(walk->why + length, sizeof walk->why - length, "; %s was last %.6g %s",
		               info->name, watch.value, info->unit->name);
	tell_expired(conductor, walk, resting, now_ns);
	return PROGRESS_FAILED;
}

static void silence_begin(struct conductor *conductor, struct walk *walk, int64_t now_ns)
{
	(void)now_ns;
	int link = conductor->rig->devices[walk->step->device].link;
	worker_silence(conductor->workers[link], walk->step->device, true);
	walk->stage = 0;
}

static enum progress silence_tick(struct conductor *conductor, struct walk *walk, bool resting,
                                  int64_t now_ns, int64_t *due_ns)
{
	(void)resting;
	int device = walk->step->device;
	struct worker *worker = conductor->workers[conductor->rig->devices[device].link];
	if (walk->stage == 0) {
		int64_t sent, received;
		if (!worker_silent(worker, device, &sent, &received)) {
			soonest(due_ns, now_ns + NS_PER_MS);
			return PROGRESS_RUNNING;
		}
		walk->mark_earliest_ns = sent;
		walk->mark_latest_ns = received;
		walk->due_ns = received + walk->step->duration_ns;
		walk->stage = 1;
		struct journal_event event = conductor_event(conductor, JOURNAL_NOTE, now_ns);
		event.device = device;
		(void)snprintf(event.text, sizeof event.text,
		               "silence towards %s; its interlocks are suspended",
		               conductor->rig->devices[device].name);
		conductor_tell(conductor, &event);
	}
	if (now_ns < walk->due_ns) {
		soonest(due_ns, walk->due_ns);
		return PROGRESS_RUNNING;
	}
	worker_silence(worker, device, false);
	return PROGRESS_DONE;
}

static bool may_move(const struct rig *rig, const struct attempt *attempt)
{
	for (size_t i = 0; i < rig->attempt_count; i++) {
		const struct allowed_attempt *allowed = &rig->attempts[i];
		bool same = attempt->channel >= 0
		                ? allowed->channel == attempt->channel
		                : allowed->channel < 0 && allowed->device == attempt->device;
		if (same && allowed->moving)
			return true;
	}
	return false;
}

/* The value that the safe state leaves on a command; NaN where it sets none. */
static double safe_value(const struct rig *rig, int channel)
{
	double value = (double)NAN;
	for (size_t i = 0; i < rig->safe_state_count; i++)
		for (size_t a = 0; a < rig->safe_state[i].assign_count; a++)
			if (rig->safe_state[i].assigns[a].channel == channel)
				value = rig->safe_state[i].assigns[a].value;
	return value;
}

/*
 * At standstill with torque off: the awaits of the safe state hold on what was
 * read last, and no command stands that the safe state would take back.
 */
static bool is_calm(struct conductor *conductor, char *why, size_t size)
{
	const struct rig *rig = conductor->rig;
	char text[128];
	for (size_t i = 0; i < rig->safe_state_count; i++) {
		const struct step *step = &rig->safe_state[i];
		if (step->kind != STEP_AWAIT)
			continue;
		struct worker *worker =
		    conductor->workers[conductor_worker_of(conductor, step->condition.channel)];
		double value = worker_latest(worker, step->condition.channel);
		if (!condition_holds(&step->condition, value)) {
			(void)snprintf(why, size, "%s does not hold (last value %.6g)",
			               step_text(step, rig, text, sizeof text), value);
			return false;
		}
	}
	for (size_t c = 0; c < rig->channel_count; c++) {
		double safe = safe_value(rig, (int)c);
		if (!isnan(safe) && !isnan(conductor->commanded[c]) && conductor->commanded[c] != safe) {
			(void)snprintf(why, size, "%s stands at %.6g", rig->infos[c].name,
			               conductor->commanded[c]);
			return false;
		}
	}
	return true;
}

static void attempt_begin(struct conductor *conductor, struct walk *walk, int64_t now_ns)
{
	(void)conductor;
	walk->stage = 0;
	walk->due_ns = now_ns + 2 * NS_PER_S;
}

static enum progress attempt_tick(struct conductor *conductor, struct walk *walk, bool resting,
                                  int64_t now_ns, int64_t *due_ns)
{
	(void)resting;
	const struct attempt *attempt = &walk->step->attempt;
	const struct rig *rig = conductor->rig;
	int device = attempt->channel >= 0 ? rig->channels[attempt->channel].device : attempt->device;
	struct worker *worker = conductor->workers[rig->devices[device].link];
	soonest(due_ns, now_ns + NS_PER_MS);
	if (walk->stage == 0) {
		struct link_request request;
		struct err err = {0};
		if (!worker_job_free(worker))
			return PROGRESS_RUNNING;
		if (!attempt_allowed(rig, attempt) || attempt_request(rig, attempt, &request, &err) < 0) {
			(void)snprintf(walk->why, sizeof walk->why, "attempt %s: %.200s", attempt->name,
			               err.message[0] ? err.message : "the rig does not allow it");
			return PROGRESS_FAILED;
		}
		char why[160];
		if (!may_move(rig, attempt) && !is_calm(conductor, why, sizeof why)) {
			(void)snprintf(walk->why, sizeof walk->why,
			               "attempt %.64s is allowed at rest only (attempts: moving: no): %.120s",
			               attempt->name, why);
			return PROGRESS_FAILED;
		}
		conductor->anything_commanded = true;
		worker_post(worker, &request, device, true);
		walk->stage = 1;
		return PROGRESS_RUNNING;
	}
	struct link_reply reply;
	if (!worker_done(worker, &reply)) {
		if (now_ns < walk->due_ns)
			return PROGRESS_RUNNING;
		worker_drop_job(worker);
		reply = (struct link_reply){
		    .status = LINK_TIMEOUT, .sent_ns = walk->begin_ns, .received_ns = now_ns};
	}
	struct journal_event event = conductor_event(conductor, JOURNAL_ATTEMPT, now_ns);
	event.device = device;
	event.channel = attempt->channel;
	event.status = reply.status == LINK_OK          ? OUTCOME_ACCEPTED
	               : reply.status == LINK_EXCEPTION ? OUTCOME_EXCEPTION
	                                                : OUTCOME_NO_REPLY;
	event.number = reply.status == LINK_EXCEPTION ? reply.exception : 0;
	event.expected = attempt->expected_exception;
	event.earliest_ns = reply.sent_ns;
	event.latest_ns = reply.received_ns;
	(void)snprintf(event.name, sizeof event.name, "%s", attempt->name);
	conductor_tell(conductor, &event);
	walk->mark_earliest_ns = reply.sent_ns;
	walk->mark_latest_ns = reply.received_ns;
	return PROGRESS_DONE;
}

static void mark_begin(struct conductor *conductor, struct walk *walk, int64_t now_ns)
{
	(void)now_ns;
	(void)conductor;
	walk->stage = 0;
}

static enum progress mark_tick(struct conductor *conductor, struct walk *walk, bool resting,
                               int64_t now_ns, int64_t *due_ns)
{
	(void)resting;
	(void)due_ns;
	for (int i = 0; i < MARK_WATCHES_MOST; i++) {
		struct mark_watch *mark = &conductor->mark_watches[i];
		if (mark->used)
			continue;
		mark->worker = conductor_worker_of(conductor, walk->step->condition.channel);
		mark->watch = worker_watch_add(conductor->workers[mark->worker], WATCH_AWAIT,
		                               &walk->step->condition, now_ns);
		mark->mark = walk->step->mark;
		mark->used = mark->watch >= 0;
		if (mark->used)
			return PROGRESS_DONE;
		break;
	}
	(void)snprintf(walk->why, sizeof walk->why, "too many marks wait for an event");
	return PROGRESS_FAILED;
}

static void tell_mark(struct conductor *conductor, int mark, int64_t earliest_ns, int64_t latest_ns,
                      int64_t now_ns)
{
	struct journal_event event = conductor_event(conductor, JOURNAL_MARK, now_ns);
	event.earliest_ns = earliest_ns;
	event.latest_ns = latest_ns;
	(void)snprintf(event.name, sizeof event.name, "%s", conductor->now_test->marks.names[mark]);
	conductor_tell(conductor, &event);
}

void mark_watches_tick(struct conductor *conductor, int64_t now_ns)
{
	for (int i = 0; i < MARK_WATCHES_MOST; i++) {
		struct mark_watch *mark = &conductor->mark_watches[i];
		if (!mark->used)
			continue;
		struct watch watch;
		worker_watch_get(conductor->workers[mark->worker], mark->watch, &watch);
		if (!watch.fired)
			continue;
		worker_watch_remove(conductor->workers[mark->worker], mark->watch);
		mark->used = false;
		tell_mark(conductor, mark->mark, watch.became_earliest_ns, watch.became_latest_ns, now_ns);
	}
}

void mark_watches_clear(struct conductor *conductor)
{
	for (int i = 0; i < MARK_WATCHES_MOST; i++) {
		struct mark_watch *mark = &conductor->mark_watches[i];
		if (mark->used)
			worker_watch_remove(conductor->workers[mark->worker], mark->watch);
		mark->used = false;
	}
}

static const struct step_act ACTS[] = {
    [STEP_SET] = {set_begin, set_tick},
    [STEP_RAMP] = {ramp_begin, ramp_tick},
    [STEP_HOLD] = {hold_begin, hold_tick},
    [STEP_AWAIT] = {await_begin, await_tick},
    [STEP_SILENCE] = {silence_begin, silence_tick},
    [STEP_ATTEMPT] = {attempt_begin, attempt_tick},
    [STEP_MARK] = {mark_begin, mark_tick},
};

/* ---- the walk ------------------------------------------------------------ */

void walk_start(struct walk *walk, const struct step *steps, size_t count)
{
	*walk = (struct walk){.watch = -1};
	if (count == 0)
		return;
	walk->frames[0] = (struct frame){.steps = steps, .count = count, .times_left = 1};
	walk->depth = 1;
}

/* The next step that is no cycle; false where the walk is finished. */
static bool next_step(struct walk *walk)
{
	while (walk->depth > 0) {
		struct frame *frame = &walk->frames[walk->depth - 1];
		if (frame->next == frame->count) {
			if (--frame->times_left > 0)
				frame->next = 0;
			else
				walk->depth--;
			continue;
		}
		const struct step *step = &frame->steps[frame->next++];
		if (step->kind != STEP_CYCLE) {
			walk->step = step;
			walk->begun = false;
			return true;
		}
		if (walk->depth < FRAMES_MOST && step->step_count > 0)
			walk->frames[walk->depth++] = (struct frame){
			    .steps = step->steps, .count = step->step_count, .times_left = step->times};
	}
	walk->step = NULL;
	return false;
}

static void begin_step(struct conductor *conductor, struct walk *walk, bool resting, int64_t now_ns)
{
	walk->begun = true;
	walk->begin_ns = now_ns;
	walk->mark_earliest_ns = walk->mark_latest_ns = now_ns;
	walk->why[0] = '\0';
	struct journal_event event = step_event(conductor, JOURNAL_STEP, resting, now_ns);
	event.line = walk->step->at.line;
	(void)step_text(walk->step, conductor->rig, event.text, sizeof event.text);
	conductor_tell(conductor, &event);
	(void)pthread_mutex_lock(&conductor->mutex);
	conductor->now.step = walk->step;
	(void)pthread_mutex_unlock(&conductor->mutex);
	ACTS[walk->step->kind].begin(conductor, walk, now_ns);
}

enum progress walk_tick(struct conductor *conductor, struct walk *walk, bool resting,
                        int64_t now_ns, int64_t *due_ns)
{
	/* Many steps may end at one instant; a bound keeps a tick short. */
	for (int turns = 0; turns < 64; turns++) {
		if (!walk->step && !next_step(walk))
			return PROGRESS_DONE;
		if (!walk->begun)
			begin_step(conductor, walk, resting, now_ns);
		enum progress progress =
		    ACTS[walk->step->kind].tick(conductor, walk, resting, now_ns, due_ns);
		if (progress == PROGRESS_RUNNING)
			return PROGRESS_RUNNING;
		if (progress == PROGRESS_FAILED && !resting)
			return PROGRESS_FAILED;
		if (progress == PROGRESS_DONE && walk->step->mark >= 0 && walk->step->kind != STEP_MARK &&
		    !resting)
			tell_mark(conductor, walk->step->mark, walk->mark_earliest_ns, walk->mark_latest_ns,
			          now_ns);
		walk->step = NULL;
	}
	*due_ns = now_ns;
	return PROGRESS_RUNNING;
}

void walk_stop(struct conductor *conductor, struct walk *walk)
{
	if (walk->watch >= 0)
		worker_watch_remove(conductor->workers[walk->watch_worker], walk->watch);
	if (walk->step && walk->begun && walk->step->kind == STEP_SILENCE)
		worker_silence(conductor->workers[conductor->rig->devices[walk->step->device].link],
		               walk->step->device, false);
	for (size_t i = 0; i < conductor->rig->link_count; i++)
		worker_drop_job(conductor->workers[i]);
	*walk = (struct walk){.watch = -1};
}
