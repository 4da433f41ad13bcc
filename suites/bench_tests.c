/* SPDX-License-Identifier: Apache-2.0 */
/*
 * What a bench must prove before a suite may use it, as test cases like any
 * other: that every watchdog trips (a killed runner must not leave a turning
 * motor), and that command and instruments agree in sign at a low speed (a
 * crossed sign turns a brake into a motor).
 *
 * The steps come from the rig. The checks are written as the lines of a suite
 * file and read by the suite's own loader, so that the proof stands on the
 * same code and the same words as every other verdict; filling the parameters
 * of a check by hand was rejected, since they are private to the check.
 */
#include <math.h>
#include <stdio.h>
#include <string.h>

#include "loading.h"

#define EVERY_NS          (10 * NS_PER_MS)
#define TRIPPED_HOLD_NS   (300 * NS_PER_MS) /* the trip is looked at for so long */
#define CLEARED_NS        (2 * NS_PER_S)    /* a cleared watchdog shows within it */
#define DIRECTION_HOLD_NS (900 * NS_PER_MS)

struct bench {
	const struct rig *rig;
	struct arena *arena;
	struct err *reterr;
	struct test *tests;
	size_t count;
};

static int out_of_memory(struct bench *b)
{
	return err_set(b->reterr, ERR_NOMEM, "memory ran out while preparing the bench tests");
}

static int sample_of(struct bench *b, struct test *test, const int *channels, size_t count)
{
	test->groups = arena_alloc(b->arena, sizeof *test->groups);
	int *copy = arena_array(b->arena, count + 1, sizeof *copy);
	if (!test->groups || !copy)
		return out_of_memory(b);
	memcpy(copy, channels, count * sizeof *copy);
	test->groups[0] =
	    (struct sample_group){.every_ns = EVERY_NS, .channels = copy, .channel_count = count};
	test->group_count = 1;
	return 0;
}

/* Reads `checks` as a suite file would have them. */
static int checks_of(struct bench *b, struct test *test, const char *lines)
{
	struct faults *faults = arena_alloc(b->arena, sizeof *faults);
	unsigned char *sampled = arena_alloc(b->arena, b->rig->channel_count + 1);
	const struct yaml_file *file;
	struct yaml_node *root = NULL;
	if (!lines || !faults || !sampled)
		return out_of_memory(b);
	if (yaml_load_bytes(test->name, lines, strlen(lines), b->arena, faults, &file, &root,
	                    b->reterr) < 0)
		return -1;
	for (size_t i = 0; i < test->groups[0].channel_count; i++)
		sampled[test->groups[0].channels[i]] = 1;
	struct loading l = {.rig = b->rig,
	                    .arena = b->arena,
	                    .faults = faults,
	                    .reterr = b->reterr,
	                    .test = test,
	                    .sampled = sampled,
	                    .sample_known = true,
	                    .stimulus_known = true,
	                    .rule = DECISION_GUARDED};
	l.binder = (struct binder){.arena = b->arena,
	                           .faults = faults,
	                           .resolve = checks_resolve,
	                           .substitute = values_substitute,
	                           .context = &l};
	if (root)
		checks_load(&l, root);
	if (l.out_of_memory)
		return out_of_memory(b);
	if (faults->count > 0)
		return err_set(b->reterr, ERR_FILE, "%s cannot be made from the rig: %s", test->name,
		               faults->items[0].message);
	return 0;
}

static struct step plain_step(enum step_kind kind, struct position at)
{
	struct step step = {.kind = kind, .at = at, .mark = -1, .wait = true, .device = -1};
	step.condition.channel = -1;
	step.attempt.channel = step.attempt.device = -1;
	return step;
}

static struct step *append(struct step *to, const struct step *steps, size_t count)
{
	if (count > 0)
		memcpy(to, steps, count * sizeof *steps);
	return to + count;
}

/*
 * What tells that a watchdog is clear again. The opposite of "above" and the
 * like is plain; of "is", the rig's own `before` knows what a healthy value
 * looks like, else anything below it (a fault code, a bit) is taken.
 */
static struct condition cleared(const struct rig *rig, const struct condition *tripped)
{
	const struct rig_channel *c = &rig->channels[tripped->channel];
	struct condition clear = {.channel = tripped->channel};
	for (size_t i = 0; i < rig->before_count; i++)
		if (rig->before[i].condition.channel == tripped->channel)
			return rig->before[i].condition;
	double half = c->info.resolution > 0 ? c->info.resolution / 2 : fabs(tripped->a) * 1e-6;
	switch (tripped->kind) {
	case CONDITION_ABOVE:
		clear.kind = CONDITION_BELOW;
		clear.a = tripped->a + half;
		return clear;
	case CONDITION_BELOW:
		clear.kind = CONDITION_ABOVE;
		clear.a = tripped->a - half;
		return clear;
	case CONDITION_IS:
	case CONDITION_BETWEEN:
		break;
	}
	clear.kind = tripped->a > 0 ? CONDITION_BELOW : CONDITION_ABOVE;
	clear.a = tripped->a > 0 ? tripped->a - half : tripped->b + half;
	return clear;
}

/* The bounds within which the channel stays while the watchdog is tripped. */
static const char *tripped_bounds(struct bench *b, const struct condition *tripped)
{
	const struct rig_channel *c = &b->rig->channels[tripped->channel];
	bool bit = c->place != PLACE_DERIVED && c->codec.type == CODEC_BIT;
	/* Three quarters of a step on either side hold one code and no other. */
	double most = c->info.resolution > 0 ? 0.75 * c->info.resolution : fabs(tripped->a) * 1e-6;
	switch (tripped->kind) {
	case CONDITION_ABOVE:
		return arena_printf(b->arena, "above: %.17g", tripped->a);
	case CONDITION_BELOW:
		return arena_printf(b->arena, "below: %.17g", tripped->a);
	case CONDITION_BETWEEN:
		return arena_printf(b->arena, "between: [%.17g, %.17g]", tripped->a, tripped->b);
	case CONDITION_IS:
		break;
	}
	if (bit)
		return tripped->a > 0.5 ? "above: 1" : "below: 0";
	return arena_printf(b->arena, "between: [%.17g, %.17g]", tripped->a - most, tripped->a + most);
}

static int watchdog_steps(struct bench *b, struct test *test, int device)
{
	const struct rig_device *d = &b->rig->devices[device];
	const struct rig_watchdog *dog = &d->watchdog;
	enum { OWN_STEPS = 5 };
	struct step *steps =
	    arena_array(b->arena, dog->arm_count + dog->clear_count + OWN_STEPS, sizeof *steps);
	if (!steps)
		return out_of_memory(b);
	test->stimulus = steps;
	steps = append(steps, dog->arm, dog->arm_count);
	struct step hold = plain_step(STEP_HOLD, d->at);
	hold.duration_ns = dog->timeout_ns;
	*steps++ = hold;
	struct step silence = plain_step(STEP_SILENCE, d->at);
	silence.device = device;
	silence.duration_ns = dog->timeout_ns + dog->timeout_ns / 2;
	silence.mark = mark_names_enter(&test->marks, "silent");
	*steps++ = silence;
	struct step await = plain_step(STEP_AWAIT, d->at);
	await.condition = dog->tripped;
	await.timeout_ns = 2 * dog->timeout_ns + 500 * NS_PER_MS;
	await.mark = mark_names_enter(&test->marks, "tripped");
	*steps++ = await;
	hold.duration_ns = TRIPPED_HOLD_NS;
	*steps++ = hold;
	steps = append(steps, dog->clear, dog->clear_count);
	await.mark = -1;
	await.condition = cleared(b->rig, &dog->tripped);
	await.timeout_ns = CLEARED_NS;
	*steps++ = await;
	test->stimulus_count = (size_t)(steps - test->stimulus);
	test->restore = dog->clear;
	test->restore_count = dog->clear_count;
	return 0;
}

static int watchdog_test(struct bench *b, int device)
{
	const struct rig_device *d = &b->rig->devices[device];
	const struct rig_watchdog *dog = &d->watchdog;
	char time[40];
	struct test *test = &b->tests[b->count++];
	*test = (struct test){.at = d->at, .bench = true, .selected = true};
	test->name = test->base = arena_printf(b->arena, "bench/watchdog:%s", d->name);
	test->title = arena_printf(
	    b->arena, "The watchdog of %s trips when nothing is sent to it for %s", d->name,
	    duration_text(dog->timeout_ns + dog->timeout_ns / 2, time, sizeof time));
	if (!test->name || !test->title)
		return out_of_memory(b);
	if (sample_of(b, test, &dog->tripped.channel, 1) < 0 || watchdog_steps(b, test, device) < 0)
		return -1;
	const char *bounds = tripped_bounds(b, &dog->tripped);
	return checks_of(b, test,
	                 arena_printf(b->arena,
	                              "- stays_within:\n"
	                              "    channel: %s\n"
	                              "    window: {from: tripped, for: 250 ms}\n"
	                              "    %s\n"
	                              "    ignore_shorter_than: 120 ms\n"
	                              "    limits: {inside: {is: yes}}\n",
	                              b->rig->infos[dog->tripped.channel].name, bounds ? bounds : ""));
}

/* The command of a direction proof: at once, or as fast as its slew allows. */
static struct step command_step(struct bench *b, const struct rig_direction *direction,
                                double value, struct assignment *assign)
{
	const struct rig_channel *c = &b->rig->channels[direction->command];
	struct step step = plain_step(STEP_SET, direction->at);
	*assign = (struct assignment){direction->command, value, direction->at};
	step.assigns = assign;
	step.assign_count = 1;
	if (c->slew > 0) {
		step.kind = STEP_RAMP;
		step.duration_ns = (int64_t)(1.1e9 * fabs(direction->at_value) / c->slew) + NS_PER_MS;
	}
	return step;
}

static int direction_steps(struct bench *b, struct test *test,
                           const struct rig_direction *direction)
{
	const struct rig_channel *c = &b->rig->channels[direction->command];
	struct step *steps = arena_array(b->arena, direction->prepare_count + 2, sizeof *steps);
	struct step *after = arena_array(b->arena, direction->restore_count + 1, sizeof *after);
	struct assignment *assigns = arena_array(b->arena, 2, sizeof *assigns);
	if (!steps || !after || !assigns)
		return out_of_memory(b);
	test->stimulus = steps;
	steps = append(steps, direction->prepare, direction->prepare_count);
	*steps = command_step(b, direction, direction->at_value, &assigns[0]);
	steps++->mark = mark_names_enter(&test->marks, "commanded");
	struct step hold = plain_step(STEP_HOLD, direction->at);
	hold.duration_ns = DIRECTION_HOLD_NS;
	*steps++ = hold;
	test->stimulus_count = (size_t)(steps - test->stimulus);
	test->restore = after;
	if (c->least <= 0 && c->most >= 0)
		*after++ = command_step(b, direction, 0, &assigns[1]);
	after = append(after, direction->restore, direction->restore_count);
	test->restore_count = (size_t)(after - test->restore);
	return 0;
}

static int direction_test(struct bench *b, size_t index)
{
	const struct rig *rig = b->rig;
	const struct rig_direction *direction = &rig->directions[index];
	const char *command = rig->infos[direction->command].name;
	struct test *test = &b->tests[b->count++];
	*test = (struct test){.at = direction->at, .bench = true, .selected = true};
	test->name = rig->direction_count == 1
	                 ? "bench/direction"
	                 : arena_printf(b->arena, "bench/direction-%zu", index + 1);
	test->base = test->name;
	struct text list;
	text_init(&list, 4000);
	for (size_t i = 0; i < direction->agree_count; i++)
		text_printf(&list, "%s%s", i ? ", " : "", rig->infos[direction->agree[i]].name);
	const char *agree = arena_strdup(b->arena, text_string(&list));
	text_release(&list);
	char value[96];
	test->title = arena_printf(
	    b->arena, "%s go the way of %s at %s", agree ? agree : "", command,
	    channel_value_text(rig, direction->command, direction->at_value, value, sizeof value));
	if (!test->name || !agree || !test->title)
		return out_of_memory(b);
	if (sample_of(b, test, direction->agree, direction->agree_count) < 0 ||
	    direction_steps(b, test, direction) < 0)
		return -1;
	return checks_of(b, test,
	                 arena_printf(b->arena,
	                              "- same_sign:\n"
	                              "    command: %s\n"
	                              "    channels: [%s]\n"
	                              "    window: {from: commanded, after: 400 ms, for: 450 ms}\n"
	                              "    limits: {agree: {is: yes}}\n",
	                              command, agree));
}

int bench_tests_make(const struct rig *rig, struct arena *arena, struct test **ret_tests,
                     size_t *ret_count, struct err *reterr)
{
	struct bench b = {.rig = rig, .arena = arena, .reterr = reterr};
	b.tests = arena_array(arena, rig->device_count + rig->direction_count + 1, sizeof *b.tests);
	if (!b.tests)
		return out_of_memory(&b);
	for (size_t i = 0; i < rig->device_count; i++)
		if (rig->devices[i].watchdog.given && watchdog_test(&b, (int)i) < 0)
			return -1;
	for (size_t i = 0; i < rig->direction_count; i++)
		if (rig->directions[i].given && direction_test(&b, i) < 0)
			return -1;
	*ret_tests = b.tests;
	*ret_count = b.count;
	return 0;
}
