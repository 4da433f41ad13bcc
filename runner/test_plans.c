/* SPDX-License-Identifier: Apache-2.0 */
/*
 * What is polled in each test and between tests, made before anything moves.
 *
 * Every sample group of a test becomes reads of its own at its own period;
 * whatever else must be seen (interlocks, awaits, life counters) joins the
 * fastest group. A test without a group (the bench tests) polls every 5 ms,
 * and so does the time between tests.
 */
#include <string.h>

#include "conductor_state.h"

static const int64_t IDLE_PERIOD_NS = 5 * NS_PER_MS;

struct draft {
	const struct rig *rig;
	struct arena *arena;
	struct err *reterr;
	struct read_block *blocks; /* of all groups */
	int *block_groups;
	size_t count, room;
};

static int no_memory(struct err *reterr)
{
	return err_set(reterr, ERR_NOMEM, "no memory for the read plans");
}

static int add_group(struct draft *draft, const unsigned char *needed, int group)
{
	struct read_plan plan;
	if (plan_reads(draft->rig, needed, draft->arena, &plan, draft->reterr) < 0)
		return -1;
	if (draft->count + plan.count > draft->room) {
		size_t room = (draft->count + plan.count) * 2;
		struct read_block *blocks = arena_array(draft->arena, room, sizeof *blocks);
		int *groups = arena_array(draft->arena, room, sizeof *groups);
		if (!blocks || !groups)
			return no_memory(draft->reterr);
		if (draft->count > 0) {
			memcpy(blocks, draft->blocks, draft->count * sizeof *blocks);
			memcpy(groups, draft->block_groups, draft->count * sizeof *groups);
		}
		draft->blocks = blocks;
		draft->block_groups = groups;
		draft->room = room;
	}
	for (size_t i = 0; i < plan.count; i++) {
		draft->blocks[draft->count] = plan.blocks[i];
		draft->blocks[draft->count].id = (int)draft->count;
		draft->block_groups[draft->count++] = group;
	}
	return 0;
}

/* The blocks of one group on one link, ready to be sent. */
static int fill_group(struct draft *draft, int link, int group, int64_t period_ns,
                      struct poll_group *ret_group)
{
	size_t count = 0;
	for (size_t i = 0; i < draft->count; i++)
		count += draft->blocks[i].link == link && draft->block_groups[i] == group;
	struct poll_block *blocks = arena_array(draft->arena, count, sizeof *blocks);
	if (!blocks)
		return no_memory(draft->reterr);
	size_t at = 0;
	for (size_t i = 0; i < draft->count; i++) {
		if (draft->blocks[i].link != link || draft->block_groups[i] != group)
			continue;
		blocks[at].read = &draft->blocks[i];
		block_request(draft->rig, &draft->blocks[i], &blocks[at].request);
		at++;
	}
	*ret_group = (struct poll_group){.period_ns = period_ns, .blocks = blocks, .count = count};
	return 0;
}

static int fill_plan(struct draft *draft, const int64_t *periods, const int64_t *decimates,
                     size_t groups, struct test_plan *plan)
{
	const struct rig *rig = draft->rig;
	struct poll_plan *plans = arena_array(draft->arena, rig->link_count, sizeof *plans);
	if (!plans)
		return no_memory(draft->reterr);
	for (size_t link = 0; link < rig->link_count; link++) {
		plans[link].generation = plan->generation;
		plans[link].group_count = groups;
		for (size_t g = 0; g < groups; g++) {
			if (fill_group(draft, (int)link, (int)g, periods[g], &plans[link].groups[g]) < 0)
				return -1;
			plans[link].groups[g].decimate = decimates[g];
		}
	}
	plan->blocks = draft->blocks;
	plan->block_count = draft->count;
	plan->plans = plans;
	return 0;
}

/* needed: what the test needs in all, a byte per channel. */
static int plan_test(struct draft *draft, const struct test *test, unsigned char *needed,
                     struct test_plan *plan)
{
	const struct rig *rig = draft->rig;
	int64_t periods[GROUPS_MOST] = {IDLE_PERIOD_NS}, decimates[GROUPS_MOST] = {0};
	size_t groups = test && test->group_count > 0 ? test->group_count : 1, fastest = 0;
	unsigned char *sets[GROUPS_MOST];
	if (groups > GROUPS_MOST)
		return err_set_at(draft->reterr, ERR_FILE, test->at.file->path, test->at.line,
		                  test->at.column, "more than %d sample groups", GROUPS_MOST);
	for (size_t g = 0; g < groups; g++) {
		sets[g] = arena_alloc(draft->arena, rig->channel_count);
		if (!sets[g])
			return no_memory(draft->reterr);
		if (!test || test->group_count == 0)
			continue;
		periods[g] = test->groups[g].every_ns;
		decimates[g] = test->groups[g].decimate;
		/* Of equally fast ones that which is recorded most: life counters are judged from there. */
		if (periods[g] < periods[fastest] ||
		    (periods[g] == periods[fastest] && decimates[g] < decimates[fastest]))
			fastest = g;
		for (size_t i = 0; i < test->groups[g].channel_count; i++)
			rig_channel_needs(rig, test->groups[g].channels[i], sets[g]);
	}
	for (size_t c = 0; c < rig->channel_count; c++) {
		bool has = false;
		for (size_t g = 0; g < groups; g++)
			has = has || sets[g][c];
		if (needed[c] && !has)
			sets[fastest][c] = 1;
	}
	for (size_t g = 0; g < groups; g++)
		if (add_group(draft, sets[g], (int)g) < 0)
			return -1;
	return fill_plan(draft, periods, decimates, groups, plan);
}

int test_plan_make(const struct rig *rig, const struct test *test, unsigned char *needed,
                   struct arena *arena, struct test_plan *plan, struct err *reterr)
{
	struct draft draft = {.rig = rig, .arena = arena, .reterr = reterr};
	memset(needed, 0, rig->channel_count);
	idle_channels(rig, needed);
	if (test)
		test_channels(rig, test, needed);
	return plan_test(&draft, test, needed, plan);
}

int test_plans_make(struct conductor *conductor, struct arena *arena, size_t *ret_row_values_most,
                    struct err *reterr)
{
	const struct rig *rig = conductor->rig;
	size_t count = 1;
	for (size_t s = 0; s < conductor->config.suite_count; s++)
		count += conductor->config.suites[s]->test_count;
	struct test_plan *plans = arena_array(arena, count, sizeof *plans);
	unsigned char *needed = arena_alloc(arena, rig->channel_count);
	if (!plans || !needed)
		return no_memory(reterr);
	size_t at = 0, most = 1;
	for (size_t s = 0; s <= conductor->config.suite_count; s++) {
		bool idle = s == conductor->config.suite_count;
		size_t tests = idle ? 1 : conductor->config.suites[s]->test_count;
		for (size_t t = 0; t < tests; t++) {
			const struct test *test = idle ? NULL : &conductor->config.suites[s]->tests[t];
			plans[at] = (struct test_plan){
			    .suite = (int)s, .test = (int)t, .generation = idle ? -1 : (int)at};
			if (test_plan_make(rig, test, needed, arena, &plans[at], reterr) < 0)
				return -1;
			for (size_t b = 0; b < plans[at].block_count; b++)
				if (plans[at].blocks[b].channel_count > most)
					most = plans[at].blocks[b].channel_count;
			at++;
		}
	}
	conductor->plans = plans;
	conductor->plan_count = count;
	*ret_row_values_most = most;
	return 0;
}

const struct test_plan *test_plan_of(const struct conductor *conductor, int suite, int test)
{
	for (size_t i = 0; i + 1 < conductor->plan_count; i++)
		if (conductor->plans[i].suite == suite && conductor->plans[i].test == test)
			return &conductor->plans[i];
	return NULL;
}

const struct test_plan *idle_plan(const struct conductor *conductor)
{
	return &conductor->plans[conductor->plan_count - 1];
}
