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

const char READING_CUT_REST[] = "the recording ends before rest was confirmed";
static const char CUT_RUN[] = "the recording ends before the run did";

int reading_refuse(const struct reading *reading, struct err *reterr, const char *what)
{
	char path[256];
	(void)snprintf(path, sizeof path, "%.230s/journal.jsonl", reading->path);
	return err_set_at(reterr, ERR_FILE, path, reading->number, 0, "%s", what);
}

int reading_no_memory(struct err *reterr)
{
	return err_set(reterr, ERR_NOMEM, "memory ran out while the recording was read");
}

const char *reading_text(const json_t *line, const char *key)
{
	return json_string_value(json_object_get(line, key));
}

void reading_copy(char *buffer, size_t size, const char *text)
{
	(void)snprintf(buffer, size, "%s", text ? text : "");
}

int64_t reading_integer(const json_t *line, const char *key, int64_t otherwise)
{
	const json_t *value = json_object_get(line, key);
	return json_is_integer(value) ? (int64_t)json_integer_value(value) : otherwise;
}

double reading_number(const json_t *line, const char *key)
{
	const json_t *value = json_object_get(line, key);
	return json_is_number(value) ? json_number_value(value) : (double)NAN;
}

bool reading_interval(const json_t *line, int64_t *ret_earliest, int64_t *ret_latest)
{
	const json_t *earliest = json_object_get(line, "earliest");
	const json_t *latest = json_object_get(line, "latest");
	if (!json_is_integer(earliest) || !json_is_integer(latest))
		return false;
	*ret_earliest = (int64_t)json_integer_value(earliest);
	*ret_latest = (int64_t)json_integer_value(latest);
	return *ret_earliest <= *ret_latest;
}

void *reading_grow(struct arena *arena, const void *items, size_t size, size_t count, size_t *room)
{
	if (count < *room)
		return (void *)(uintptr_t)items;
	size_t more = *room ? *room * 2 : 8;
	void *bigger = arena_array(arena, more, size);
	if (!bigger)
		return NULL;
	if (count)
		memcpy(bigger, items, count * size);
	*room = more;
	return bigger;
}

/* ---- the first line ------------------------------------------------------ */

static int head_suite(struct reading *reading, const json_t *from, struct recorded_suite *suite,
                      struct err *reterr)
{
	const json_t *overridden = json_object_get(from, "overridden");
	const json_t *selected = json_object_get(from, "selected");
	const char *name = reading_text(from, "name");
	if (!name)
		return reading_refuse(reading, reterr, "a suite of the first line has no name");
	suite->name = arena_strdup(reading->arena, name);
	suite->overrides =
	    arena_array(reading->arena, json_object_size(overridden) + 1, sizeof *suite->overrides);
	suite->selected =
	    arena_array(reading->arena, json_array_size(selected) + 1, sizeof *suite->selected);
	if (!suite->name || !suite->overrides || !suite->selected)
		return reading_no_memory(reterr);
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
			return reading_no_memory(reterr);
	}
	for (size_t i = 0; i < json_array_size(selected); i++) {
		const char *text = json_string_value(json_array_get(selected, i));
		const char *copy = arena_strdup(reading->arena, text ? text : "");
		if (!copy)
			return reading_no_memory(reterr);
		suite->selected[suite->selected_count++] = copy;
	}
	return 0;
}

int reading_head(struct reading *reading, const json_t *line, struct recording_head *ret_head,
                 struct err *reterr)
{
	struct recording_head head = {0};
	const char *event = reading_text(line, "event"), *rig = reading_text(line, "rig");
	const json_t *suites = json_object_get(line, "suites");
	if (!event || strcmp(event, journal_kind_name(JOURNAL_RUN_BEGIN)) != 0 || !rig ||
	    !json_is_array(suites))
		return reading_refuse(reading, reterr, "it does not begin as the journal of a run does");
	if (reading_integer(line, "format", 0) != 1)
		return reading_refuse(reading, reterr,
		                      "it is of a format that this version of the program does not know");
	head.rig = arena_strdup(reading->arena, rig);
	head.suites = arena_array(reading->arena, json_array_size(suites) + 1, sizeof *head.suites);
	if (!head.rig || !head.suites)
		return reading_no_memory(reterr);
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
	const char *mode = reading_text(line, "mode"), *defect = reading_text(line, "defect");
	const char *seed = reading_text(line, "seed");
	facts->rig = reading->rig;
	facts->rehearsal = mode && strcmp(mode, "rehearse") == 0;
	reading_copy(facts->tool_version, sizeof facts->tool_version,
	             reading_text(line, "tool_version"));
	reading_copy(facts->started_utc, sizeof facts->started_utc, reading_text(line, "started"));
	reading_copy(facts->host, sizeof facts->host, reading_text(line, "host"));
	facts->defect = defect ? arena_strdup(reading->arena, defect) : NULL;
	facts->seed = seed ? strtoull(seed, NULL, 10) : 0;
	facts->partial = json_is_true(json_object_get(line, "partial"));
	return defect && !facts->defect ? reading_no_memory(reterr) : 0;
}

/* ---- of the run ---------------------------------------------------------- */

static int on_nothing(struct reading *reading, struct event *event, struct err *reterr)
{
	(void)reading;
	(void)event;
	(void)reterr;
	return 0;
}

/* Keeps what a reader of the report should know; equal events are counted. */
static int keep_event(struct reading *reading, const struct event *event, enum run_event_kind kind,
                      const char *where, const char *text, struct err *reterr)
{
	struct run_facts *facts = &reading->recording->facts;
	where = where ? where : "";
	text = text ? text : "";
	for (size_t i = 0; i < facts->event_count; i++) {
		struct run_event *one = &facts->events[i];
		if (one->kind != kind || strcmp(one->where, where) != 0 || strcmp(one->text, text) != 0)
			continue;
		one->count++;
		one->last_ns = event->time_ns;
		return 0;
	}
	if (facts->event_count == RUN_EVENTS_MOST) {
		facts->events_left_out++;
		return 0;
	}
	if (!GROW(reading, facts->events, facts->event_count, &reading->event_room))
		return reading_no_memory(reterr);
	struct run_event *one = &facts->events[facts->event_count++];
	*one = (struct run_event){.kind = kind,
	                          .where = arena_strdup(reading->arena, where),
	                          .text = arena_strdup(reading->arena, text),
	                          .first_ns = event->time_ns,
	                          .last_ns = event->time_ns,
	                          .count = 1};
	return one->where && one->text ? 0 : reading_no_memory(reterr);
}

static int on_link(struct reading *reading, struct event *event, struct err *reterr)
{
	return keep_event(reading, event, RUN_EVENT_LINK, reading_text(event->line, "link"),
	                  reading_text(event->line, "text"), reterr);
}

static int on_interlock(struct reading *reading, struct event *event, struct err *reterr)
{
	return keep_event(reading, event, RUN_EVENT_INTERLOCK, reading_text(event->line, "channel"),
	                  reading_text(event->line, "text"), reterr);
}

static int on_note(struct reading *reading, struct event *event, struct err *reterr)
{
	return keep_event(reading, event, RUN_EVENT_NOTE, NULL, reading_text(event->line, "text"),
	                  reterr);
}

static int on_second_begin(struct reading *reading, struct event *event, struct err *reterr)
{
	(void)event;
	return reading_refuse(reading, reterr, "a second run begins in the same journal");
}

static int on_identity(struct reading *reading, struct event *event, struct err *reterr)
{
	struct run_facts *facts = &reading->recording->facts;
	const char *device = reading_text(event->line, "device"),
	           *key = reading_text(event->line, "key");
	const char *text = reading_text(event->line, "text");
	if (!device || !key)
		return reading_refuse(reading, reterr, "an identity without a device or key");
	if (!GROW(reading, facts->identities, facts->identity_count, &reading->identity_room))
		return reading_no_memory(reterr);
	struct identity_read *one = &facts->identities[facts->identity_count++];
	one->device = arena_strdup(reading->arena, device);
	one->key = arena_strdup(reading->arena, key);
	one->text = arena_strdup(reading->arena, text ? text : "");
	return one->device && one->key && one->text ? 0 : reading_no_memory(reterr);
}

static int on_link_counts(struct reading *reading, struct event *event, struct err *reterr)
{
	struct run_facts *facts = &reading->recording->facts;
	const char *link = reading_text(event->line, "link");
	if (!link)
		return reading_refuse(reading, reterr, "counts of no link");
	if (!GROW(reading, facts->links, facts->link_count, &reading->link_room))
		return reading_no_memory(reterr);
	facts->links[facts->link_count++] = (struct link_counts){
	    .link = arena_strdup(reading->arena, link),
	    .requests = (uint64_t)reading_integer(event->line, "requests", 0),
	    .timeouts = (uint64_t)reading_integer(event->line, "timeouts", 0),
	    .garbled = (uint64_t)reading_integer(event->line, "garbled", 0),
	    .exceptions = (uint64_t)reading_integer(event->line, "exceptions", 0),
	    .reconnects = (uint64_t)reading_integer(event->line, "reconnects", 0),
	};
	return facts->links[facts->link_count - 1].link ? 0 : reading_no_memory(reterr);
}

static int on_abort(struct reading *reading, struct event *event, struct err *reterr)
{
	struct run_facts *facts = &reading->recording->facts;
	(void)reterr;
	if (!facts->aborted)
		reading_copy(facts->abort_reason, sizeof facts->abort_reason,
		             reading_text(event->line, "reason"));
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
	reading_copy(facts->rest_reason, sizeof facts->rest_reason, READING_CUT_REST);
	return 0;
}

static int on_rest(struct reading *reading, struct event *event, struct err *reterr)
{
	struct run_facts *facts = &reading->recording->facts;
	facts->rest_was_needed = true;
	facts->rest_confirmed = json_is_true(json_object_get(event->line, "confirmed"));
	reading_copy(facts->rest_reason, sizeof facts->rest_reason, reading_text(event->line, "text"));
	if (!facts->rest_confirmed)
		return keep_event(reading, event, RUN_EVENT_REST, NULL, reading_text(event->line, "text"),
		                  reterr);
	return 0;
}

static int on_run_end(struct reading *reading, struct event *event, struct err *reterr)
{
	struct run_facts *facts = &reading->recording->facts;
	(void)reterr;
	facts->duration_ns = event->time_ns;
	reading_copy(facts->realtime, sizeof facts->realtime, reading_text(event->line, "realtime"));
	reading->run_ended = true;
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
    [JOURNAL_LINK] = {on_link, NEEDS_NOTHING},
    [JOURNAL_INTERLOCK] = {on_interlock, NEEDS_NOTHING},
    [JOURNAL_ABORT] = {on_abort, NEEDS_NOTHING},
    [JOURNAL_REST_BEGIN] = {on_rest_begin, NEEDS_NOTHING},
    [JOURNAL_REST] = {on_rest, NEEDS_NOTHING},
    [JOURNAL_LINK_COUNTS] = {on_link_counts, NEEDS_NOTHING},
    [JOURNAL_HEARTBEAT] = {on_nothing, NEEDS_NOTHING},
    [JOURNAL_RUN_END] = {on_run_end, NEEDS_NOTHING},
    [JOURNAL_NOTE] = {on_note, NEEDS_NOTHING},
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
	const char *word = reading_text(line, "event");
	int kind = word ? journal_kind_find(word) : -1;
	if (kind < 0)
		return reading_refuse(reading, reterr, "the line is no event that this program knows");
	if (!json_is_integer(json_object_get(line, "time")))
		return reading_refuse(reading, reterr, "the event has no time");
	struct event event = {
	    .line = line, .kind = (enum journal_kind)kind, .time_ns = reading_integer(line, "time", 0)};
	if (event.time_ns > reading->last_ns)
		reading->last_ns = event.time_ns;
	enum needs needs = HANDLERS[kind].needs;
	const char *suite = reading_text(line, "suite"), *test = reading_text(line, "test");
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
			reading_copy(facts->abort_reason, sizeof facts->abort_reason, CUT_RUN);
		facts->aborted = true;
	}
	return 0;
}
