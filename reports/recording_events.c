/* SPDX-License-Identifier: Apache-2.0 */
/*
 * What each event of a journal means for the recording: one function a kind,
 * in a table. An event of a test that the suites no longer have is passed
 * over; one that lacks what its kind must say is refused with its line.
 */
#include "recording_events.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

static const char CUT_TEST[] = "the recording ends inside this test";
static const char CUT_REST[] = "the recording ends before rest was confirmed";
static const char CUT_RUN[] = "the recording ends before the run did";

int reading_refuse(const struct reading *reading, struct err *reterr, const char *what)
{
	char path[256];
	(void)snprintf(path, sizeof path, "%.230s/journal.jsonl", reading->path);
	return err_set_at(reterr, ERR_FILE, path, reading->number, 0, "%s", what);
}

static int no_memory(struct err *reterr)
{
	return err_set(reterr, ERR_NOMEM, "memory ran out while the recording was read");
}

static const char *get_text(const json_t *line, const char *key)
{
	return json_string_value(json_object_get(line, key));
}

static void copy_text(char *buffer, size_t size, const char *text)
{
	(void)snprintf(buffer, size, "%s", text ? text : "");
}

static int64_t get_integer(const json_t *line, const char *key, int64_t otherwise)
{
	const json_t *value = json_object_get(line, key);
	return json_is_integer(value) ? (int64_t)json_integer_value(value) : otherwise;
}

static double get_number(const json_t *line, const char *key)
{
	const json_t *value = json_object_get(line, key);
	return json_is_number(value) ? json_number_value(value) : (double)NAN;
}

static bool get_interval(const json_t *line, int64_t *ret_earliest, int64_t *ret_latest)
{
	const json_t *earliest = json_object_get(line, "earliest");
	const json_t *latest = json_object_get(line, "latest");
	if (!json_is_integer(earliest) || !json_is_integer(latest))
		return false;
	*ret_earliest = (int64_t)json_integer_value(earliest);
	*ret_latest = (int64_t)json_integer_value(latest);
	return *ret_earliest <= *ret_latest;
}

/* Room for one more item of an array in the arena; false: no memory. */
static bool grow(struct arena *arena, void **items, size_t size, size_t count, size_t *room)
{
	if (count < *room)
		return true;
	size_t more = *room ? *room * 2 : 8;
	void *bigger = arena_array(arena, more, size);
	if (!bigger)
		return false;
	if (count)
		memcpy(bigger, *items, count * size);
	*items = bigger;
	*room = more;
	return true;
}

#define GROW(reading, items, count, room)                                                          \
	grow((reading)->arena, (void **)&(items), sizeof *(items), (count), (room))

struct event {
	const json_t *line;
	enum journal_kind kind;
	int64_t time_ns;
	/* Of the test that it names, where the suites have it. */
	const struct suite *suite;
	const struct test *test;
	struct recorded_test *recorded; /* NULL before its test_begin */
	struct test_state *state;
};

/* ---- the first line ------------------------------------------------------ */

static int head_suite(struct reading *reading, const json_t *from, struct recorded_suite *suite,
                      struct err *reterr)
{
	const json_t *overridden = json_object_get(from, "overridden");
	const json_t *selected = json_object_get(from, "selected");
	const char *name = get_text(from, "name");
	if (!name)
		return reading_refuse(reading, reterr, "a suite of the first line has no name");
	suite->name = arena_strdup(reading->arena, name);
	suite->overrides =
	    arena_array(reading->arena, json_object_size(overridden) + 1, sizeof *suite->overrides);
	suite->selected =
	    arena_array(reading->arena, json_array_size(selected) + 1, sizeof *suite->selected);
	if (!suite->name || !suite->overrides || !suite->selected)
		return no_memory(reterr);
	suite->partial = selected != NULL;
	const char *key;
	json_t *value;
	json_object_foreach((json_t *)(uintptr_t)overridden, key, value)
	{
		struct override *one = &suite->overrides[suite->override_count++];
		const char *text = json_string_value(value);
		one->name = arena_strdup(reading->arena, key);
		one->value = arena_strdup(reading->arena, text ? text : "");
		if (!one->name || !one->value)
			return no_memory(reterr);
	}
	for (size_t i = 0; i < json_array_size(selected); i++) {
		const char *text = json_string_value(json_array_get(selected, i));
		const char *copy = arena_strdup(reading->arena, text ? text : "");
		if (!copy)
			return no_memory(reterr);
		suite->selected[suite->selected_count++] = copy;
	}
	return 0;
}

int reading_head(struct reading *reading, const json_t *line, struct recording_head *ret_head,
                 struct err *reterr)
{
	struct recording_head head = {0};
	const char *event = get_text(line, "event"), *rig = get_text(line, "rig");
	const json_t *suites = json_object_get(line, "suites");
	if (!event || strcmp(event, journal_kind_name(JOURNAL_RUN_BEGIN)) != 0 || !rig ||
	    !json_is_array(suites))
		return reading_refuse(reading, reterr, "it does not begin as the journal of a run does");
	if (get_integer(line, "format", 0) != 1)
		return reading_refuse(reading, reterr,
		                      "it is of a format that this version of the program does not know");
	head.rig = arena_strdup(reading->arena, rig);
	head.suites = arena_array(reading->arena, json_array_size(suites) + 1, sizeof *head.suites);
	if (!head.rig || !head.suites)
		return no_memory(reterr);
	for (size_t i = 0; i < json_array_size(suites); i++)
		if (head_suite(reading, json_array_get(suites, i), &head.suites[head.suite_count++],
		               reterr) < 0)
			return -1;
	*ret_head = head;
	return 0;
}

int reading_begin(struct reading *reading, const json_t *line, struct err *reterr)
{
	struct run_facts *facts = &reading->recording->facts;
	const char *mode = get_text(line, "mode"), *defect = get_text(line, "defect");
	const char *seed = get_text(line, "seed");
	facts->rig = reading->rig;
	facts->rehearsal = mode && strcmp(mode, "rehearse") == 0;
	copy_text(facts->tool_version, sizeof facts->tool_version, get_text(line, "tool_version"));
	copy_text(facts->started_utc, sizeof facts->started_utc, get_text(line, "started"));
	copy_text(facts->host, sizeof facts->host, get_text(line, "host"));
	facts->defect = defect ? arena_strdup(reading->arena, defect) : NULL;
	facts->seed = seed ? strtoull(seed, NULL, 10) : 0;
	facts->partial = json_is_true(json_object_get(line, "partial"));
	return defect && !facts->defect ? no_memory(reterr) : 0;
}

/* ---- of the run ---------------------------------------------------------- */

static int on_nothing(struct reading *reading, struct event *event, struct err *reterr)
{
	(void)reading;
	(void)event;
	(void)reterr;
	return 0;
}

static int on_second_begin(struct reading *reading, struct event *event, struct err *reterr)
{
	(void)event;
	return reading_refuse(reading, reterr, "a second run begins in the same journal");
}

static int on_identity(struct reading *reading, struct event *event, struct err *reterr)
{
	struct run_facts *facts = &reading->recording->facts;
	const char *device = get_text(event->line, "device"), *key = get_text(event->line, "key");
	const char *text = get_text(event->line, "text");
	if (!device || !key)
		return reading_refuse(reading, reterr, "an identity without a device or key");
	if (!GROW(reading, facts->identities, facts->identity_count, &reading->identity_room))
		return no_memory(reterr);
	struct identity_read *one = &facts->identities[facts->identity_count++];
	one->device = arena_strdup(reading->arena, device);
	one->key = arena_strdup(reading->arena, key);
	one->text = arena_strdup(reading->arena, text ? text : "");
	return one->device && one->key && one->text ? 0 : no_memory(reterr);
}

static int on_link_counts(struct reading *reading, struct event *event, struct err *reterr)
{
	struct run_facts *facts = &reading->recording->facts;
	const char *link = get_text(event->line, "link");
	if (!link)
		return reading_refuse(reading, reterr, "counts of no link");
	if (!GROW(reading, facts->links, facts->link_count, &reading->link_room))
		return no_memory(reterr);
	facts->links[facts->link_count++] = (struct link_counts){
	    .link = arena_strdup(reading->arena, link),
	    .requests = (uint64_t)get_integer(event->line, "requests", 0),
	    .timeouts = (uint64_t)get_integer(event->line, "timeouts", 0),
	    .garbled = (uint64_t)get_integer(event->line, "garbled", 0),
	    .exceptions = (uint64_t)get_integer(event->line, "exceptions", 0),
	    .reconnects = (uint64_t)get_integer(event->line, "reconnects", 0),
	};
	return facts->links[facts->link_count - 1].link ? 0 : no_memory(reterr);
}

static int on_abort(struct reading *reading, struct event *event, struct err *reterr)
{
	struct run_facts *facts = &reading->recording->facts;
	(void)reterr;
	if (!facts->aborted)
		copy_text(facts->abort_reason, sizeof facts->abort_reason, get_text(event->line, "reason"));
	facts->aborted = true;
	return 0;
}

static int on_rest_begin(struct reading *reading, struct event *event, struct err *reterr)
{
	struct run_facts *facts = &reading->recording->facts;
	(void)event;
	(void)reterr;
	facts->rest_was_needed = true;
	facts->rest_confirmed = false;
	copy_text(facts->rest_reason, sizeof facts->rest_reason, CUT_REST);
	return 0;
}

static int on_rest(struct reading *reading, struct event *event, struct err *reterr)
{
	struct run_facts *facts = &reading->recording->facts;
	(void)reterr;
	facts->rest_was_needed = true;
	facts->rest_confirmed = json_is_true(json_object_get(event->line, "confirmed"));
	copy_text(facts->rest_reason, sizeof facts->rest_reason, get_text(event->line, "text"));
	return 0;
}

static int on_run_end(struct reading *reading, struct event *event, struct err *reterr)
{
	struct run_facts *facts = &reading->recording->facts;
	(void)reterr;
	facts->duration_ns = event->time_ns;
	copy_text(facts->realtime, sizeof facts->realtime, get_text(event->line, "realtime"));
	reading->run_ended = true;
	return 0;
}

/* ---- of a test ----------------------------------------------------------- */

static int on_test_begin(struct reading *reading, struct event *event, struct err *reterr)
{
	if (event->recorded)
		return reading_refuse(reading, reterr, "a test begins for a second time");
	struct recorded_test *recorded = arena_alloc(reading->arena, sizeof *recorded);
	size_t marks = event->test->marks.count;
	if (!recorded ||
	    !(recorded->marks = arena_array(reading->arena, marks + 1, sizeof *recorded->marks)))
		return no_memory(reterr);
	recorded->name = event->test->name;
	recorded->end = TEST_ABORTED;
	recorded->condition.channel = -1;
	recorded->begin_ns = recorded->end_ns = event->time_ns;
	recorded->mark_count = marks;
	for (size_t i = 0; i < marks; i++)
		recorded->marks[i].name = event->test->marks.names[i];
	copy_text(recorded->reason, sizeof recorded->reason, CUT_TEST);
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
			return no_memory(reterr);
		reading->map_room = room;
	}
	const char *copy = arena_strdup(reading->arena, file);
	if (!copy)
		return no_memory(reterr);
	(void)snprintf(path, sizeof path, "%.1000s/samples/%s", reading->path, file);
	struct samples_map *map = &recording->maps[recording->map_count];
	if (samples_map_open(path, map, reterr) < 0)
		return -1;
	reading->files[recording->map_count++] = copy;
	*ret_map = map;
	return 0;
}

static int on_block(struct reading *reading, struct event *event, struct err *reterr)
{
	struct recorded_test *recorded = event->recorded;
	struct samples_map *map;
	char guess[96];
	const char *file = get_text(event->line, "file");
	if (!file)
		file = guess_file(reading, event->test->name, (int)get_integer(event->line, "block", 0),
		                  guess, sizeof guess);
	if (!GROW(reading, recorded->blocks, recorded->block_count, &event->state->block_room))
		return no_memory(reterr);
	if (open_map(reading, file, &map, reterr) < 0)
		return -1;
	struct recorded_block *block = &recorded->blocks[recorded->block_count++];
	*block = (struct recorded_block){
	    .channel_count = map->channel_count, .rows = map->rows, .row0 = map->row0};
	block->channels = arena_array(reading->arena, map->channel_count + 1, sizeof *block->channels);
	if (!block->channels)
		return no_memory(reterr);
	for (size_t i = 0; i < map->channel_count; i++) {
		block->channels[i] = rig_channel_find(reading->rig, map->names[i], strlen(map->names[i]));
		if (block->channels[i] < 0)
			return reading_refuse(reading, reterr,
			                      "its samples have a channel that the rig does not have");
	}
	return 0;
}

static int on_stimulus(struct reading *reading, struct event *event, struct err *reterr)
{
	struct run_facts *facts = &reading->recording->facts;
	(void)reterr;
	event->recorded->begin_ns = event->recorded->end_ns = event->time_ns;
	event->state->in_stimulus = true;
	/* The bench moves again: an earlier rest says nothing about the end. */
	facts->rest_was_needed = true;
	facts->rest_confirmed = false;
	copy_text(facts->rest_reason, sizeof facts->rest_reason, CUT_REST);
	return 0;
}

static int on_step(struct reading *reading, struct event *event, struct err *reterr)
{
	(void)reading;
	(void)reterr;
	if (event->recorded && event->state->in_stimulus)
		event->state->last_line = (int)get_integer(event->line, "line", 0);
	return 0;
}

static int on_command(struct reading *reading, struct event *event, struct err *reterr)
{
	struct recorded_test *recorded = event->recorded;
	const char *channel = get_text(event->line, "channel"), *end = get_text(event->line, "end");
	struct command command = {.value = get_number(event->line, "value")};
	reading->recording->facts.rest_was_needed = true;
	if (!channel || !end || !get_interval(event->line, &command.earliest_ns, &command.latest_ns))
		return reading_refuse(reading, reterr, "a command without channel, times or end");
	command.channel = rig_channel_find(reading->rig, channel, strlen(channel));
	if (!recorded || !event->state->in_stimulus || command.channel < 0 || isnan(command.value) ||
	    journal_status_find(JOURNAL_COMMAND, end) != 0)
		return 0;
	if (!GROW(reading, recorded->commands, recorded->command_count, &event->state->command_room))
		return no_memory(reterr);
	recorded->commands[recorded->command_count++] = command;
	return 0;
}

static int on_mark(struct reading *reading, struct event *event, struct err *reterr)
{
	const char *name = get_text(event->line, "mark");
	int64_t earliest, latest;
	if (!name || !get_interval(event->line, &earliest, &latest))
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
		return no_memory(reterr);
	struct outcome *one = &recorded->outcomes[recorded->outcome_count++];
	*one = *outcome;
	one->name = arena_strdup(reading->arena, outcome->name);
	return one->name ? 0 : no_memory(reterr);
}

static int on_attempt(struct reading *reading, struct event *event, struct err *reterr)
{
	const char *word = get_text(event->line, "outcome");
	struct outcome outcome = {
	    .name = get_text(event->line, "attempt"),
	    .exception = (int)get_integer(event->line, "exception", 0),
	    .expected_exception = (int)get_integer(event->line, "expected_exception", 0),
	};
	int status = word ? journal_status_find(JOURNAL_ATTEMPT, word) : -1;
	if (!outcome.name || status < 0 ||
	    !get_interval(event->line, &outcome.sent_ns, &outcome.received_ns))
		return reading_refuse(reading, reterr, "an attempt without name, outcome or times");
	outcome.status = (enum outcome_status)status;
	return add_outcome(reading, event, &outcome, reterr);
}

/* The condition as the event tells it. */
static bool told_condition(const struct reading *reading, const json_t *from,
                           struct condition *condition)
{
	static const char *const words[] = {"is", "above", "below", "between"};
	const char *channel = get_text(from, "channel");
	if (!channel)
		return false;
	condition->channel = rig_channel_find(reading->rig, channel, strlen(channel));
	condition->for_ns = get_integer(from, "for", 0);
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
	const char *name = get_text(event->line, "channel");
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
static int on_condition(struct reading *reading, struct event *event, struct err *reterr)
{
	struct recorded_test *recorded = event->recorded;
	if (!recorded)
		return 0; /* of the way to rest, which passes it over */
	int line = (int)get_integer(event->line, "line", 0);
	bool of_rig = event->kind == JOURNAL_PRECONDITION || event->test->bench;
	if (!get_interval(event->line, &recorded->condition_begin_ns, &recorded->condition_end_ns))
		return reading_refuse(reading, reterr, "a condition without times");
	recorded->end = event->kind == JOURNAL_PRECONDITION ? TEST_PRECONDITION : TEST_AWAIT_EXPIRED;
	copy_text(recorded->reason, sizeof recorded->reason, get_text(event->line, "text"));
	recorded->step_at = (struct position){
	    .file = of_rig ? reading->rig->file : event->suite->file, .line = line, .column = 1};
	if (!told_condition(reading, json_object_get(event->line, "condition"), &recorded->condition) &&
	    !find_condition(reading, event, line, &recorded->condition))
		recorded->condition = (struct condition){.channel = -1};
	return 0;
}

static int on_stimulus_end(struct reading *reading, struct event *event, struct err *reterr)
{
	(void)reading;
	(void)reterr;
	event->recorded->end_ns = event->time_ns;
	event->state->in_stimulus = false;
	return 0;
}

static int on_test_end(struct reading *reading, struct event *event, struct err *reterr)
{
	struct recorded_test *recorded = event->recorded;
	const char *word = get_text(event->line, "end"), *reason = get_text(event->line, "reason");
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
		copy_text(recorded->reason, sizeof recorded->reason, reason);
	else if (!had_condition || recorded->end == TEST_COMPLETED)
		recorded->reason[0] = '\0';
	recorded->missed_slots = (size_t)get_integer(event->line, "missed_slots", 0);
	recorded->lost_replies = (size_t)get_integer(event->line, "lost_replies", 0);
	if (recorded->end == TEST_ABORTED && event->state->last_line > 0)
		recorded->step_at =
		    (struct position){.file = event->test->bench ? reading->rig->file : event->suite->file,
		                      .line = event->state->last_line,
		                      .column = 1};
	return 0;
}

/* ---- the table ----------------------------------------------------------- */

enum needs { NEEDS_NOTHING = 0, MAY_HAVE_TEST, NEEDS_TEST, NEEDS_BEGUN_TEST };

static const struct {
	int (*handle)(struct reading *, struct event *, struct err *);
	enum needs needs;
} HANDLERS[JOURNAL_KINDS] = {
    [JOURNAL_RUN_BEGIN] = {on_second_begin, NEEDS_NOTHING},
    [JOURNAL_IDENTITY] = {on_identity, NEEDS_NOTHING},
    [JOURNAL_TEST_BEGIN] = {on_test_begin, NEEDS_TEST},
    [JOURNAL_BLOCK] = {on_block, NEEDS_BEGUN_TEST},
    [JOURNAL_STIMULUS] = {on_stimulus, NEEDS_BEGUN_TEST},
    [JOURNAL_STEP] = {on_step, MAY_HAVE_TEST},
    [JOURNAL_COMMAND] = {on_command, MAY_HAVE_TEST},
    [JOURNAL_MARK] = {on_mark, NEEDS_BEGUN_TEST},
    [JOURNAL_ATTEMPT] = {on_attempt, NEEDS_BEGUN_TEST},
    [JOURNAL_AWAIT_EXPIRED] = {on_condition, MAY_HAVE_TEST},
    [JOURNAL_PRECONDITION] = {on_condition, NEEDS_BEGUN_TEST},
    [JOURNAL_STIMULUS_END] = {on_stimulus_end, NEEDS_BEGUN_TEST},
    [JOURNAL_TEST_END] = {on_test_end, NEEDS_BEGUN_TEST},
    [JOURNAL_LINK] = {on_nothing, NEEDS_NOTHING},
    [JOURNAL_INTERLOCK] = {on_nothing, NEEDS_NOTHING},
    [JOURNAL_ABORT] = {on_abort, NEEDS_NOTHING},
    [JOURNAL_REST_BEGIN] = {on_rest_begin, NEEDS_NOTHING},
    [JOURNAL_REST] = {on_rest, NEEDS_NOTHING},
    [JOURNAL_LINK_COUNTS] = {on_link_counts, NEEDS_NOTHING},
    [JOURNAL_HEARTBEAT] = {on_nothing, NEEDS_NOTHING},
    [JOURNAL_RUN_END] = {on_run_end, NEEDS_NOTHING},
    [JOURNAL_NOTE] = {on_nothing, NEEDS_NOTHING},
};

static bool is_test(const struct reading *reading, size_t suite, size_t test,
                    const char *suite_name, const char *name)
{
	char buffer[160];
	return suite < reading->suite_count && test < reading->suites[suite]->test_count &&
	       strcmp(reading->suites[suite]->tests[test].name, name) == 0 &&
	       strcmp(journal_suite_name(reading->suites, suite, buffer, sizeof buffer), suite_name) ==
	           0;
}

/* Looks where the last one was first: events of a test come together. */
static bool find_test(struct reading *reading, const char *suite_name, const char *name)
{
	if (is_test(reading, reading->last_suite, reading->last_test, suite_name, name))
		return true;
	for (size_t s = 0; s < reading->suite_count; s++)
		for (size_t t = 0; t < reading->suites[s]->test_count; t++)
			if (is_test(reading, s, t, suite_name, name)) {
				reading->last_suite = s;
				reading->last_test = t;
				return true;
			}
	return false;
}

int reading_event(struct reading *reading, const json_t *line, struct err *reterr)
{
	const char *word = get_text(line, "event");
	int kind = word ? journal_kind_find(word) : -1;
	if (kind < 0)
		return reading_refuse(reading, reterr, "the line is no event that this program knows");
	if (!json_is_integer(json_object_get(line, "time")))
		return reading_refuse(reading, reterr, "the event has no time");
	struct event event = {
	    .line = line, .kind = (enum journal_kind)kind, .time_ns = get_integer(line, "time", 0)};
	if (event.time_ns > reading->last_ns)
		reading->last_ns = event.time_ns;
	enum needs needs = HANDLERS[kind].needs;
	const char *suite = get_text(line, "suite"), *test = get_text(line, "test");
	if (needs >= NEEDS_TEST && (!suite || !test))
		return reading_refuse(reading, reterr, "the event names no test");
	if (needs != NEEDS_NOTHING && suite && test && find_test(reading, suite, test)) {
		event.suite = reading->suites[reading->last_suite];
		event.test = &event.suite->tests[reading->last_test];
		event.recorded = reading->recording->tests[reading->last_suite][reading->last_test];
		event.state = &reading->states[reading->last_suite][reading->last_test];
	} else if (needs >= NEEDS_TEST) {
		return 0; /* of a test that the suites no longer have */
	}
	if (needs == NEEDS_BEGUN_TEST && !event.recorded)
		return reading_refuse(reading, reterr, "an event of a test that has not begun");
	return HANDLERS[kind].handle(reading, &event, reterr);
}

/* Attempts of the stimulus that the run did not come to. */
static int add_attempts_not_made(struct reading *reading, struct event *event,
                                 const struct step *steps, size_t count, struct err *reterr)
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

int reading_end(struct reading *reading, struct err *reterr)
{
	struct run_facts *facts = &reading->recording->facts;
	for (size_t s = 0; s < reading->suite_count; s++)
		for (size_t t = 0; t < reading->suites[s]->test_count; t++) {
			const struct test *test = &reading->suites[s]->tests[t];
			struct event event = {.test = test,
			                      .recorded = reading->recording->tests[s][t],
			                      .state = &reading->states[s][t]};
			if (!event.recorded)
				continue;
			if (!event.state->ended && event.state->in_stimulus)
				event.recorded->end_ns = reading->last_ns;
			if (add_attempts_not_made(reading, &event, test->stimulus, test->stimulus_count,
			                          reterr) < 0)
				return -1;
		}
	if (!reading->run_ended) {
		facts->duration_ns = reading->last_ns;
		if (!facts->aborted)
			copy_text(facts->abort_reason, sizeof facts->abort_reason, CUT_RUN);
		facts->aborted = true;
	}
	return 0;
}
