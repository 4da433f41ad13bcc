/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Which channels must be read, and when: what a test samples and waits for,
 * what the interlocks watch, what proves life, what confirms rest.
 */
#include "suite.h"

static void add_condition(const struct rig *rig, const struct condition *condition,
                          unsigned char *set)
{
	if (condition->channel >= 0)
		rig_channel_needs(rig, condition->channel, set);
}

static void add_steps(const struct rig *rig, const struct step *steps, size_t count,
                      unsigned char *set)
{
	for (size_t i = 0; i < count; i++) {
		if (steps[i].kind == STEP_AWAIT || steps[i].kind == STEP_MARK)
			add_condition(rig, &steps[i].condition, set);
		if (steps[i].kind == STEP_CYCLE)
			add_steps(rig, steps[i].steps, steps[i].step_count, set);
	}
}

static void add_interlocks(const struct rig *rig, unsigned char *set)
{
	for (size_t i = 0; i < rig->interlock_count; i++)
		add_condition(rig, &rig->interlocks[i].condition, set);
}

/* The life counter of every device that something is read from. */
static void add_lives(const struct rig *rig, unsigned char *set)
{
	for (size_t d = 0; d < rig->device_count; d++) {
		bool read = false;
		for (size_t c = 0; c < rig->channel_count && !read; c++)
			read = set[c] && rig->channels[c].device == (int)d;
		if (read && rig->devices[d].life >= 0)
			rig_channel_needs(rig, rig->devices[d].life, set);
	}
}

void test_channels(const struct rig *rig, const struct test *test, unsigned char *set)
{
	for (size_t g = 0; g < test->group_count; g++)
		for (size_t c = 0; c < test->groups[g].channel_count; c++)
			rig_channel_needs(rig, test->groups[g].channels[c], set);
	add_steps(rig, test->stimulus, test->stimulus_count, set);
	add_steps(rig, test->restore, test->restore_count, set);
	add_interlocks(rig, set);
	add_lives(rig, set);
}

void idle_channels(const struct rig *rig, unsigned char *set)
{
	for (size_t i = 0; i < rig->before_count; i++)
		add_condition(rig, &rig->before[i].condition, set);
	add_steps(rig, rig->safe_state, rig->safe_state_count, set);
	add_interlocks(rig, set);
	add_lives(rig, set);
}
