/* SPDX-License-Identifier: Apache-2.0 */
/*
 * See plan_timeline.h. A worker polls at the slots of a grid: where a round
 * takes longer than the period, the next sample waits for the slot after it, so
 * that 2.1 ms of reads at a period of 2 ms give a sample every 4 ms. "Most"
 * adds what jitter can: the row that comes early is followed by one that comes
 * late.
 *
 * Awaits end when the bench wants. Least times take them as ending at once,
 * most times as ending at their timeout.
 */
#include "plan_timeline.h"

#include <math.h>
#include <string.h>

static int no_memory(struct err *reterr)
{
	return err_set(reterr, ERR_NOMEM, "no memory for the plan");
}

/* ---- how often what is read ------------------------------------------------------- */

/*
 * pause_ns: of the round, the silence after its last reply. The worker asks for
 * the next slot before it has passed, so that it alone costs no slot.
 */
static int64_t on_grid(int64_t round_ns, int64_t pause_ns, int64_t period_ns)
{
	if (period_ns <= 0)
		return round_ns;
	int64_t slots = (round_ns - pause_ns + period_ns - 1) / period_ns;
	int64_t grid = (slots > 1 ? slots : 1) * period_ns;
	return grid > round_ns ? grid : round_ns;
}

/* A group's blocks one after the other. */
static void round_of(const struct bench_timing *timing, const struct poll_group *group,
                     int64_t *usual, int64_t *most, int64_t *pause)
{
	*usual = *most = *pause = 0;
	for (size_t b = 0; b < group->count; b++) {
		const struct link_request *request = &group->blocks[b].request;
		int64_t one, one_most, row, row_most;
		bench_timing_transaction(timing, group->blocks[b].read->device, (int)request->function,
		                         request->count, &one, &one_most);
		bench_timing_row(timing, group->blocks[b].read->device, (int)request->function,
		                 request->count, &row, &row_most);
		*pause = one - row;
		*usual += one;
		*most += one_most;
	}
}

static void take_block(const struct bench_timing *timing, const struct poll_block *block,
                       int64_t interval, int64_t interval_most, struct plan_channel *channels)
{
	int64_t row, row_most;
	bench_timing_row(timing, block->read->device, (int)block->request.function,
	                 block->request.count, &row, &row_most);
	for (size_t c = 0; c < block->read->channel_count; c++) {
		struct plan_channel *channel = &channels[block->read->channels[c]];
		if (channel->read && channel->interval_ns <= interval)
			continue; /* another group reads it more often */
		*channel =
		    (struct plan_channel){true, block->read->link, interval, interval_most, row, row_most};
	}
}

static void take_link(const struct bench_timing *timing, const struct poll_plan *plan,
                      struct plan_link *link, struct plan_channel *channels)
{
	int64_t usual[GROUPS_MOST], most[GROUPS_MOST], pause[GROUPS_MOST], interval[GROUPS_MOST];
	double load = 0;
	for (size_t g = 0; g < plan->group_count; g++) {
		const struct poll_group *group = &plan->groups[g];
		round_of(timing, group, &usual[g], &most[g], &pause[g]);
		link->round_ns += usual[g];
		link->round_most_ns += most[g];
		interval[g] = on_grid(usual[g], pause[g], group->period_ns);
		if (group->count > 0)
			load += (double)usual[g] / (double)interval[g];
	}
	for (size_t g = 0; g < plan->group_count; g++) {
		const struct poll_group *group = &plan->groups[g];
		if (group->count == 0)
			continue;
		/* Several groups share the link: too much load stretches all of them. */
		int64_t busy = load > 1 ? (int64_t)((double)interval[g] * load) : usual[g];
		int64_t others = link->round_most_ns - most[g];
		int64_t reach = on_grid(busy, pause[g], group->period_ns);
		int64_t reach_most =
		    on_grid(load > 1 ? busy + most[g] - usual[g] : most[g], pause[g], group->period_ns) +
		    others + (most[g] - usual[g]);
		if (link->transactions == 0 || reach < link->reach_ns) {
			link->transactions = group->count;
			link->wanted_ns = group->period_ns;
			link->reach_ns = reach;
			link->reach_most_ns = reach_most;
		}
		int64_t recorded = group->decimate > 1 ? group->decimate : 1;
		for (size_t b = 0; b < group->count; b++)
			take_block(timing, &group->blocks[b], reach * recorded, reach_most * recorded,
			           channels);
	}
}

static void take_derived(const struct rig *rig, int index, struct plan_channel *channels)
{
	const struct rig_channel *channel = &rig->channels[index];
	struct plan_channel *derived = &channels[index];
	if (channel->place != PLACE_DERIVED || derived->read)
		return;
	bool all = true;
	for (int i = 0; i < DERIVE_INPUTS_MOST; i++) {
		int input = channel->derivation.inputs[i];
		if (input < 0)
			continue;
		take_derived(rig, input, channels);
		const struct plan_channel *in = &channels[input];
		all = all && in->read;
		derived->link = in->link;
		if (in->interval_ns > derived->interval_ns)
			derived->interval_ns = in->interval_ns;
		if (in->interval_most_ns > derived->interval_most_ns)
			derived->interval_most_ns = in->interval_most_ns;
		if (in->row_ns > derived->row_ns)
			derived->row_ns = in->row_ns;
		if (in->row_most_ns > derived->row_most_ns)
			derived->row_most_ns = in->row_most_ns;
	}
	derived->read = all;
}

/* ---- what happens when -------------------------------------------------------------- */

struct walking {
	const struct bench_timing *timing;
	struct arena *arena;
	struct plan_test *plan;
	double *commanded;
	int64_t at_ns, at_most_ns;
	bool certain;
	struct err *reterr;
};

static void write_ns(const struct walking *walking, const struct assignment *assign, int64_t *usual,
                     int64_t *most)
{
	const struct rig_channel *channel = &walking->timing->rig->channels[assign->channel];
	int registers = channel->place == PLACE_COIL ? 1 : codec_registers(&channel->codec);
	int function = channel->place == PLACE_COIL ? LINK_WRITE_COIL
	               : registers == 1             ? LINK_WRITE_REGISTER
	                                            : LINK_WRITE_REGISTERS;
	bench_timing_row(walking->timing, channel->device, function, registers, usual, most);
}

static int put_mark(struct walking *walking, const struct step *step, int64_t width,
                    int64_t width_most)
{
	size_t count = walking->timing->rig->channel_count;
	struct plan_mark *mark = &walking->plan->mark[step->mark];
	*mark = (struct plan_mark){.set = true,
	                           .certain = walking->certain,
	                           .at_ns = walking->at_ns,
	                           .width_ns = width,
	                           .width_most_ns = width_most,
	                           .step = step,
	                           .before = arena_array(walking->arena, count + 1, sizeof(double))};
	if (!mark->before)
		return no_memory(walking->reterr);
	memcpy(mark->before, walking->commanded, count * sizeof(double));
	return 0;
}

/* All writes of the step, from the first request to the last effect. */
static int walk_set(struct walking *walking, const struct step *step)
{
	int64_t least = INT64_MAX, end = 0, end_most = 0, at = 0, at_most = 0;
	for (size_t i = 0; i < step->assign_count; i++) {
		const struct rig_channel *channel =
		    &walking->timing->rig->channels[step->assigns[i].channel];
		int64_t usual, most;
		write_ns(walking, &step->assigns[i], &usual, &most);
		int64_t earliest = at + channel->effect_least_ns;
		least = earliest < least ? earliest : least;
		at += usual;
		at_most += most;
		end = at + channel->effect_most_ns > end ? at + channel->effect_most_ns : end;
		end_most = at_most + channel->effect_most_ns > end_most ? at_most + channel->effect_most_ns
		                                                        : end_most;
	}
	if (step->mark >= 0 && put_mark(walking, step, end - least, end_most - least) < 0)
		return -1;
	for (size_t i = 0; i < step->assign_count; i++)
		walking->commanded[step->assigns[i].channel] = step->assigns[i].value;
	walking->at_ns += at;
	walking->at_most_ns += at_most;
	return 0;
}

/* The mark of an await or an event: between two rows of what is watched. */
static int mark_event(struct walking *walking, const struct step *step)
{
	const struct plan_channel *channel = &walking->plan->channel[step->condition.channel];
	const struct channel_info *info = &walking->timing->rig->infos[step->condition.channel];
	int64_t more = info->refresh_ns + info->delay_most_ns - info->delay_least_ns;
	if (step->mark < 0)
		return 0;
	return put_mark(walking, step, channel->interval_ns + channel->row_ns + more,
	                channel->interval_most_ns + channel->row_most_ns + more);
}

/* The last request to the device before the silence. */
static int mark_silence(struct walking *walking, const struct step *step)
{
	int64_t row = 0, row_most = 0;
	const struct rig *rig = walking->timing->rig;
	for (size_t c = 0; c < rig->channel_count; c++) {
		const struct plan_channel *channel = &walking->plan->channel[c];
		if (rig->channels[c].device != step->device || !channel->read)
			continue;
		row = channel->row_ns > row ? channel->row_ns : row;
		row_most = channel->row_most_ns > row_most ? channel->row_most_ns : row_most;
	}
	return step->mark < 0 ? 0 : put_mark(walking, step, row, row_most);
}

static int walk_steps(struct walking *walking, const struct step *steps, size_t count)
{
	for (size_t i = 0; i < count; i++) {
		const struct step *step = &steps[i];
		int64_t least, most;
		int result = 0;
		if (step->kind == STEP_SET)
			result = walk_set(walking, step);
		else if (step->kind == STEP_AWAIT || step->kind == STEP_MARK)
			result = mark_event(walking, step);
		else if (step->kind == STEP_SILENCE)
			result = mark_silence(walking, step);
		else if (step->mark >= 0)
			result = put_mark(walking, step, 0, 0);
		if (result < 0)
			return -1;
		if (step->kind == STEP_CYCLE && walk_steps(walking, step->steps, step->step_count) < 0)
			return -1;
		if (step->kind == STEP_RAMP)
			for (size_t a = 0; a < step->assign_count; a++)
				walking->commanded[step->assigns[a].channel] = step->assigns[a].value;
		struct step rest = *step; /* of a cycle one pass is walked already */
		if (step->kind == STEP_CYCLE)
			rest.times--;
		steps_duration(&rest, 1, &least, &most);
		walking->at_ns += least;
		walking->at_most_ns += most;
		walking->certain = walking->certain && step->kind != STEP_AWAIT;
	}
	return 0;
}

static int walk(const struct bench_timing *timing, struct arena *arena, struct plan_test *plan,
                struct err *reterr)
{
	const struct rig *rig = timing->rig;
	const struct test *test = plan->test;
	struct walking walking = {
	    .timing = timing,
	    .arena = arena,
	    .plan = plan,
	    .commanded = arena_array(arena, rig->channel_count + 1, sizeof(double)),
	    .certain = true,
	    .reterr = reterr,
	};
	plan->mark = arena_array(arena, test->marks.count + 1, sizeof *plan->mark);
	if (!walking.commanded || !plan->mark)
		return no_memory(reterr);
	for (size_t c = 0; c < rig->channel_count; c++)
		walking.commanded[c] = (double)NAN;
	for (size_t i = 0; i < rig->safe_state_count; i++)
		for (size_t a = 0; a < rig->safe_state[i].assign_count; a++)
			walking.commanded[rig->safe_state[i].assigns[a].channel] =
			    rig->safe_state[i].assigns[a].value;
	if (walk_steps(&walking, test->stimulus, test->stimulus_count) < 0)
		return -1;
	plan->stimulus_ns = walking.at_ns;
	plan->stimulus_most_ns = walking.at_most_ns;
	if (walk_steps(&walking, test->restore, test->restore_count) < 0)
		return -1;
	int64_t before_rest_most = walking.at_most_ns;
	if (walk_steps(&walking, rig->safe_state, rig->safe_state_count) < 0)
		return -1;
	/* Rest is confirmed: all awaits of the safe state hold once more. */
	int64_t confirm = 0;
	for (size_t i = 0; i < rig->safe_state_count; i++)
		if (rig->safe_state[i].kind == STEP_AWAIT && rig->safe_state[i].condition.for_ns > confirm)
			confirm = rig->safe_state[i].condition.for_ns;
	plan->whole_ns = walking.at_ns + confirm;
	plan->whole_most_ns = before_rest_most + rig->rest_within_ns;
	return 0;
}

int plan_test_make(const struct bench_timing *timing, const struct suite *suite,
                   const struct test *test, struct arena *arena, struct plan_test *ret,
                   struct err *reterr)
{
	const struct rig *rig = timing->rig;
	struct test_plan plan = {0};
	unsigned char *needed = arena_alloc(arena, rig->channel_count + 1);
	*ret = (struct plan_test){
	    .suite = suite,
	    .test = test,
	    .link = arena_array(arena, rig->link_count + 1, sizeof *ret->link),
	    .channel = arena_array(arena, rig->channel_count + 1, sizeof *ret->channel),
	};
	if (!needed || !ret->link || !ret->channel)
		return no_memory(reterr);
	if (test_plan_make(rig, test, needed, arena, &plan, reterr) < 0)
		return -1;
	for (size_t l = 0; l < rig->link_count; l++)
		take_link(timing, &plan.plans[l], &ret->link[l], ret->channel);
	for (size_t c = 0; c < rig->channel_count; c++)
		take_derived(rig, (int)c, ret->channel);
	return walk(timing, arena, ret, reterr);
}

int plan_reach_alone(const struct bench_timing *timing, const struct test *test,
                     const int *channels, size_t count, int link, struct arena *arena,
                     int64_t *ret_ns, struct err *reterr)
{
	const struct rig *rig = timing->rig;
	struct sample_group group = {.every_ns = 0,
	                             .channels = arena_array(arena, count + 1, sizeof(int)),
	                             .channel_count = count};
	struct test alone = *test;
	struct test_plan plan = {0};
	unsigned char *needed = arena_alloc(arena, rig->channel_count + 1);
	int64_t most, pause;
	if (!group.channels || !needed)
		return no_memory(reterr);
	memcpy(group.channels, channels, count * sizeof(int));
	alone.groups = &group;
	alone.group_count = 1;
	if (test_plan_make(rig, &alone, needed, arena, &plan, reterr) < 0)
		return -1;
	round_of(timing, &plan.plans[link].groups[0], ret_ns, &most, &pause);
	return 0;
}
