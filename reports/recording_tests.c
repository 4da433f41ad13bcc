/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Events of one test. A test that the journal does not end was cut: it is
 * begun as aborted, and only its test_end makes it anything else.
 */
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "recording_events.h"

static const char CUT_TEST[] = "the recording ends inside this test";

int on_test_begin(struct reading *reading, struct event *event, struct err *reterr)
{
	if (event->recorded)
		return reading_refuse(reading, reterr, "a test begins for a second time");
	struct recorded_test *recorded = arena_alloc(reading->arena, sizeof *recorded);
	size_t marks = event->test->marks.count;
	if (!recorded ||
	    !(recorded->marks = arena_array(reading->arena, marks + 1, sizeof *recorded->marks)))
		return reading_no_memory(reterr);
	recorded->name = event->test->name;
	recorded->end = TEST_ABORTED;
	recorded->condition.channel = -1;
	recorded->begin_ns = recorded->end_ns = event->time_ns;
	recorded->mark_count = marks;
	for (size_t i = 0; i < marks; i++)
		recorded->marks[i].name = event->test->marks.names[i];
	reading_copy(recorded->reason, sizeof recorded->reason, CUT_TEST);
	reading->recording->tests[reading->last_suite][reading->last_test] = recorded;
	return 0;
}

/* The name that samples_file.c gave, where an older event does not say it: the first not taken. */
static const char *guess_file(const struct reading *reading, const char *test, int block,
                              char *buffer, size_t size)
{
	char stem[41];
	file_name_clean(test, stem, sizeof stem);
	for (int k = 1; k < 1000; k++) {
		bool taken = false;
		if (k == 1)
			(void)snprintf(buffer, size, "%s.%d.npy", stem, block);
		else
			(void)snprintf(buffer, size, "%s-%d.%d.npy", stem, k, block);
		for (size_t i = 0; i < reading->recording->map_count && !taken; i++)
			taken = strcmp(reading->files[i], buffer) == 0;
		if (!taken)
			break;
	}
	return buffer;
}

static int open_map(struct reading *reading, const char *file, struct samples_map **ret_map,
                    struct err *reterr)
{
	struct recording *recording = reading->recording;
	char path[1200], safe[101];
	file_name_clean(file, safe, sizeof safe);
	if (strcmp(safe, file) != 0)
		return reading_refuse(reading, reterr, "the name of a samples file is none of ours");
	if (recording->map_count == reading->map_room) {
		size_t room = reading->map_room ? reading->map_room * 2 : 16;
		struct samples_map *maps = realloc(recording->maps, room * sizeof *maps);
		if (maps)
			recording->maps = maps;
		const char **files = realloc(reading->files, room * sizeof *files);
		if (files)
			reading->files = files;
		if (!maps || !files)
			return reading_no_memory(reterr);
		reading->map_room = room;
	}
	const char *copy = arena_strdup(reading->arena, file);
	if (!copy)
		return reading_no_memory(reterr);
	(void)snprintf(path, sizeof path, "%.1000s/samples/%s", reading->path, file);
	struct samples_map *map = &recording->maps[recording->map_count];
	if (samples_map_open(path, map, reterr) < 0)
		return -1;
	reading->files[recording->map_count++] = copy;
	*ret_map = map;
	return 0;
}

int on_block(struct reading *reading, struct event *event, struct err *reterr)
{
	struct recorded_test *recorded = event->recorded;
	struct samples_map *map;
	char guess[96];
	const char *file = reading_text(event->line, "file");
	if (!file)
		file = guess_file(reading, event->test->name, (int)reading_integer(event->line, "block", 0),
		                  guess, sizeof guess);
	if (!GROW(reading, recorded->blocks, recorded->block_count, &event->state->block_room))
		return reading_no_memory(reterr);
	if (open_map(reading, file, &map, reterr) < 0)
		return -1;
	struct recorded_block *block = &recorded->blocks[recorded->block_count++];
	*block = (struct recorded_block){
	    .channel_count = map->channel_count, .rows = map->rows, .row0 = map->row0};
	block->channels = arena_array(reading->arena, map->channel_count + 1, sizeof *block->channels);
	if (!block->channels)
		return reading_no_memory(reterr);
	for (size_t i = 0; i < map->channel_count; i++) {
		block->channels[i] = rig_channel_find(reading->rig, map->names[i], strlen(map->names[i]));
		if (block->channels[i] < 0)
			return reading_refuse(reading, reterr,
			                      "its samples have a channel that the rig does not have");
	}
	return 0;
}

int on_stimulus(struct reading *reading, struct event *event, struct err *reterr)
{
	struct run_facts *facts = &reading->recording->facts;
	(void)reterr;
	event->recorded->begin_ns = event->recorded->end_ns = event->time_ns;
	event->state->in_stimulus = true;
	/* The bench moves again: an earlier rest says nothing about the end. */
	facts->rest_was_needed = true;
	facts->rest_confirmed = false;
	reading_copy(facts->rest_reason, sizeof facts->rest_reason, READING_CUT_REST);
	return 0;
}

int on_step(struct reading *reading, struct event *event, struct err *reterr)
{
	(void)reading;
	(void)reterr;
	if (event->recorded && event->state->in_stimulus)
		event->state->last_line = (int)reading_integer(event->line, "line", 0);
	return 0;
}

int on_command(struct reading *reading, struct event *event, struct err *reterr)
{
	struct recorded_test *recorded = event->recorded;
	const char *channel = reading_text(event->line, "channel"),
	           *end = reading_text(event->line, "end");
	struct command command = {.value = reading_number(event->line, "value")};
	reading->recording->facts.rest_was_needed = true;
	if (!channel || !end)
		return reading_refuse(reading, reterr, "a command without channel or end");
	command.channel = rig_channel_find(reading->rig, channel, strlen(channel));
	/* What did not take effect, or is of no stimulus, commanded nothing that a check may use. */
	if (!recorded || !event->state->in_stimulus || command.channel < 0 || isnan(command.value) ||
	    journal_status_find(JOURNAL_COMMAND, end) != 0)
		return 0;
	if (!reading_interval(event->line, &command.earliest_ns, &command.latest_ns))
		return reading_refuse(reading, reterr, "a command without its times");
	if (!GROW(reading, recorded->commands, recorded->command_count, &event->state->command_room))
		return reading_no_memory(reterr);
	recorded->commands[recorded->command_count++] = command;
	return 0;
}

int on_mark(struct reading *reading, struct event *event, struct err *reterr)
{
	const char *name = reading_text(event->line, "mark");
	int64_t earliest, latest;
	if (!name || !reading_interval(event->line, &earliest, &latest))
		return reading_refuse(reading, reterr, "a mark without name or times");
	for (size_t i = 0; i < event->recorded->mark_count; i++) {
		struct mark *mark = &event->recorded->marks[i];
		if (strcmp(mark->name, name) != 0 || mark->reached)
			continue;
		mark->reached = true;
		mark->earliest_ns = earliest;
		mark->latest_ns = latest;
	}
	return 0;
}

static int add_outcome(struct reading *reading, struct event *event, const struct outcome *outcome,
                       struct err *reterr)
{
	struct recorded_test *recorded = event->recorded;
	if (!GROW(reading, recorded->outcomes, recorded->outcome_count, &event->state->outcome_room))
		return reading_no_memory(reterr);
	struct outcome *one = &recorded->outcomes[recorded->outcome_count++];
	*one = *outcome;
	one->name = arena_strdup(reading->arena, outcome->name);
	return one->name ? 0 : reading_no_memory(reterr);
}

int on_attempt(struct reading *reading, struct event *event, struct err *reterr)
{
	const char *word = reading_text(event->line, "outcome");
	struct outcome outcome = {
	    .name = reading_text(event->line, "attempt"),
	    .exception = (int)reading_integer(event->line, "exception", 0),
	    .expected_exception = (int)reading_integer(event->line, "expected_exception", 0),
	};
	int status = word ? journal_status_find(JOURNAL_ATTEMPT, word) : -1;
	if (!outcome.name || status < 0 ||
	    !reading_interval(event->line, &outcome.sent_ns, &outcome.received_ns))
		return reading_refuse(reading, reterr, "an attempt without name, outcome or times");
	outcome.status = (enum outcome_status)status;
	return add_outcome(reading, event, &outcome, reterr);
}

/* The condition as the event tells it. */
static bool told_condition(const struct reading *reading, const json_t *from,
                           struct condition *condition)
{
	static const char *const words[] = {"is", "above", "below", "between"};
	const char *channel = reading_text(from, "channel");
	if (!channel)
		return false;
	condition->channel = rig_channel_find(reading->rig, channel, strlen(channel));
	condition->for_ns = reading_integer(from, "for", 0);
	for (int i = 0; i < 4; i++) {
		const json_t *level = json_object_get(from, words[i]);
		if (!level)
			continue;
		condition->kind = (enum condition_kind)i;
		condition->a = json_number_value(i == CONDITION_BETWEEN ? json_array_get(level, 0) : level);
		condition->b = json_number_value(json_array_get(level, 1));
		return condition->channel >= 0;
	}
	return false;
}

static const struct step *await_at(const struct step *steps, size_t count, int line, int channel)
{
	for (size_t i = 0; i < count; i++) {
		if (steps[i].kind == STEP_AWAIT && steps[i].at.line == line &&
		    steps[i].condition.channel == channel)
			return &steps[i];
		if (steps[i].kind == STEP_CYCLE) {
			const struct step *found = await_at(steps[i].steps, steps[i].step_count, line, channel);
			if (found)
				return found;
		}
	}
	return NULL;
}

/* The condition that stands at that line of the files, where the event does not tell it. */
static bool find_condition(const struct reading *reading, const struct event *event, int line,
                           struct condition *condition)
{
	const char *name = reading_text(event->line, "channel");
	int channel = name ? rig_channel_find(reading->rig, name, strlen(name)) : -1;
	if (channel < 0)
		return false;
	if (event->kind == JOURNAL_AWAIT_EXPIRED) {
		const struct step *step =
		    await_at(event->test->stimulus, event->test->stimulus_count, line, channel);
		if (step)
			*condition = step->condition;
		return step != NULL;
	}
	for (size_t i = 0; i < reading->rig->before_count; i++)
		if (reading->rig->before[i].at.line == line &&
		    reading->rig->before[i].condition.channel == channel) {
			*condition = reading->rig->before[i].condition;
			return true;
		}
	return false;
}

/* await_expired and precondition. */
int on_condition(struct reading *reading, struct event *event, struct err *reterr)
{
	struct recorded_test *recorded = event->recorded;
	if (!recorded)
		return 0; /* of the way to rest, which passes it over */
	int line = (int)reading_integer(event->line, "line", 0);
	bool of_rig = event->kind == JOURNAL_PRECONDITION || event->test->bench;
	if (!reading_interval(event->line, &recorded->condition_begin_ns, &recorded->condition_end_ns))
		return reading_refuse(reading, reterr, "a condition without times");
	recorded->end = event->kind == JOURNAL_PRECONDITION ? TEST_PRECONDITION : TEST_AWAIT_EXPIRED;
	reading_copy(recorded->reason, sizeof recorded->reason, reading_text(event->line, "text"));
	recorded->step_at = (struct position){
	    .file = of_rig ? reading->rig->file : event->suite->file, .line = line, .column = 1};
	if (!told_condition(reading, json_object_get(event->line, "condition"), &recorded->condition) &&
	    !find_condition(reading, event, line, &recorded->condition))
		recorded->condition = (struct condition){.channel = -1};
	return 0;
}

int on_stimulus_end(struct reading *reading, struct event *event, struct err *reterr)
{
	(void)reading;
	(void)reterr;
	event->recorded->end_ns = event->time_ns;
	event->state->in_stimulus = false;
	return 0;
}

int on_test_end(struct reading *reading, struct event *event, struct err *reterr)
{
	struct recorded_test *recorded = event->recorded;
	const char *word = reading_text(event->line, "end"),
	           *reason = reading_text(event->line, "reason");
	int end = word ? journal_status_find(JOURNAL_TEST_END, word) : -1;
	if (end < 0)
		return reading_refuse(reading, reterr, "a test ends in a way that is not known");
	if (event->state->in_stimulus)
		recorded->end_ns = event->time_ns;
	event->state->in_stimulus = false;
	event->state->ended = true;
	bool had_condition = recorded->end == TEST_AWAIT_EXPIRED || recorded->end == TEST_PRECONDITION;
	recorded->end = (enum test_end)end;
	if (reason && *reason)
		reading_copy(recorded->reason, sizeof recorded->reason, reason);
	else if (!had_condition || recorded->end == TEST_COMPLETED)
		recorded->reason[0] = '\0';
	recorded->missed_slots = (size_t)reading_integer(event->line, "missed_slots", 0);
	recorded->lost_replies = (size_t)reading_integer(event->line, "lost_replies", 0);
	if (recorded->end == TEST_ABORTED && event->state->last_line > 0)
		recorded->step_at =
		    (struct position){.file = event->test->bench ? reading->rig->file : event->suite->file,
		                      .line = event->state->last_line,
		                      .column = 1};
	return 0;
}

/* Attempts of the stimulus that the run did not come to. */
int add_attempts_not_made(struct reading *reading, struct event *event, const struct step *steps,
                          size_t count, struct err *reterr)
{
	for (size_t i = 0; i < count; i++) {
		if (steps[i].kind == STEP_CYCLE &&
		    add_attempts_not_made(reading, event, steps[i].steps, steps[i].step_count, reterr) < 0)
			return -1;
		if (steps[i].kind != STEP_ATTEMPT || !steps[i].attempt.name)
			continue;
		bool made = false;
		for (size_t j = 0; j < event->recorded->outcome_count && !made; j++)
			made = strcmp(event->recorded->outcomes[j].name, steps[i].attempt.name) == 0;
		struct outcome outcome = {.name = steps[i].attempt.name,
		                          .status = OUTCOME_NOT_MADE,
		                          .expected_exception = steps[i].attempt.expected_exception};
		if (!made && add_outcome(reading, event, &outcome, reterr) < 0)
			return -1;
	}
	return 0;
}
