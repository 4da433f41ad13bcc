/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_SYNTHETIC_H
#define DRIVETRIAL_SYNTHETIC_H
/*
 * A run made by hand, without files, links and judge: what the tests of the
 * outputs are about is what is written, not how it came about. All numbers and
 * names are invented. One suite: a step that passes, one that fails, one that
 * is inconclusive, one whose await expired, one not reached, one not selected.
 */
#include <assert.h>
#include <math.h>
#include <stdio.h>
#include <string.h>

#include "journal.h"
#include "report.h"
#include "samples_file.h"

enum {
	SYN_SPEED = 0,
	SYN_FAULT,
	SYN_TORQUE,
	SYN_COMMAND,
	SYN_CHANNELS,
	SYN_COLUMNS = 2, /* of block 0: speed, fault; torque is block 1 */
	SYN_ROWS = 500,
	SYN_TESTS = 6,
};

static const int64_t SYN_STEP_NS = 2 * NS_PER_MS;

struct syn_params { /* of the invented kind of check */
	int channel, from;
	struct window window;
};

struct syn_row {
	int64_t sent, received;
	double values[SYN_COLUMNS];
};

struct syn_torque_row {
	int64_t sent, received;
	double torque;
};

struct synthetic {
	struct arena arena;
	struct rig rig;
	struct suite suite;
	const struct suite *suites[1];
	struct suite_result suite_result;
	struct run_result run;
	struct yaml_file rig_file, suite_file;
};

static inline void *syn_array(struct synthetic *s, size_t count, size_t size)
{
	void *at = arena_array(&s->arena, count, size);
	assert(at);
	return at;
}

static const struct field SYN_FIELDS[] = {
    {.key = "channel", .kind = FIELD_CHANNEL, .offset = offsetof(struct syn_params, channel)},
    {.key = "from", .kind = FIELD_MARK, .offset = offsetof(struct syn_params, from)},
    {.key = "window", .kind = FIELD_WINDOW, .offset = offsetof(struct syn_params, window)},
};
static const struct field_table SYN_TABLE = {
    .name = "invented", .fields = SYN_FIELDS, .count = FIELD_COUNT(SYN_FIELDS)};
static const struct metric_kind SYN_METRICS[] = {
    {.name = "settling_time", .shape = METRIC_TIME},
    {.name = "final_value", .shape = METRIC_LEVEL},
    {.name = "overshoot", .shape = METRIC_PERCENT},
    {.name = "code_right", .shape = METRIC_YES_NO},
};
static const struct check_kind SYN_KIND = {.name = "invented",
                                           .text = "a check made by hand",
                                           .fields = &SYN_TABLE,
                                           .params_size = sizeof(struct syn_params),
                                           .metrics = SYN_METRICS,
                                           .metric_count = FIELD_COUNT(SYN_METRICS)};

static const double SYN_CODES[] = {0, 3};
static const char *const SYN_CODE_NAMES[] = {"none", "encoder_loss"};

static inline void syn_rig(struct synthetic *s)
{
	static struct rig_link links[2];
	static struct rig_device devices[2];
	static struct rig_channel channels[SYN_CHANNELS];
	static struct channel_info infos[SYN_CHANNELS];
	const struct unit *rpm = unit_find("rpm", 3), *newton_metre = unit_find("Nm", 2);
	links[0].name = "drive_wire";
	links[1].name = "bench_wire";
	devices[0] = (struct rig_device){.name = "controller", .link = 0, .under_test = true};
	devices[1] = (struct rig_device){.name = "transducer", .link = 1};
	infos[SYN_SPEED] = (struct channel_info){.name = "speed",
	                                         .device = "controller",
	                                         .unit = rpm,
	                                         .resolution = 0.2,
	                                         .evidence = EVIDENCE_SELF_REPORTED};
	infos[SYN_FAULT] = (struct channel_info){.name = "fault_code",
	                                         .device = "controller",
	                                         .unit = unit_one(),
	                                         .resolution = 1,
	                                         .named_values = SYN_CODES,
	                                         .value_names = SYN_CODE_NAMES,
	                                         .name_count = 2,
	                                         .evidence = EVIDENCE_SELF_REPORTED};
	infos[SYN_TORQUE] = (struct channel_info){
	    .name = "shaft_torque",
	    .device = "transducer",
	    .unit = newton_metre,
	    .accuracy = {
	        .given = true, .of_reading = 0.002, .absolute = 0.01, .calibrated_until_day = 20450}};
	infos[SYN_COMMAND] =
	    (struct channel_info){.name = "speed_command", .device = "controller", .unit = rpm};
	for (int i = 0; i < SYN_CHANNELS; i++) {
		channels[i].info = infos[i];
		channels[i].device = i == SYN_TORQUE;
		channels[i].command = i == SYN_COMMAND;
	}
	s->rig_file = (struct yaml_file){.path = "rig.yaml"};
	s->suite_file = (struct yaml_file){.path = "suite.yaml"};
	s->rig = (struct rig){.name = "invented-bench",
	                      .note = "a bench made by hand",
	                      .file = &s->rig_file,
	                      .links = links,
	                      .link_count = 2,
	                      .devices = devices,
	                      .device_count = 2,
	                      .channels = channels,
	                      .infos = infos,
	                      .channel_count = SYN_CHANNELS};
}

static inline void syn_test(struct synthetic *s, struct test *test, const char *name,
                            const char *title)
{
	struct step *steps = syn_array(s, 4, sizeof *steps);
	struct assignment *assign = syn_array(s, 1, sizeof *assign);
	struct check_use *check = syn_array(s, 1, sizeof *check);
	struct limit *limits = syn_array(s, 4, sizeof *limits);
	struct syn_params *params = syn_array(s, 1, sizeof *params);
	struct sample_group *group = syn_array(s, 1, sizeof *group);
	const char **requirement = syn_array(s, 1, sizeof *requirement);
	*assign = (struct assignment){.channel = SYN_COMMAND, .value = 1500};
	steps[0] = (struct step){
	    .kind = STEP_SET, .mark = 0, .assigns = assign, .assign_count = 1, .device = -1};
	steps[1] = (struct step){.kind = STEP_HOLD, .mark = -1, .duration_ns = NS_PER_S};
	steps[2] = (struct step){.kind = STEP_AWAIT,
	                         .mark = -1,
	                         .at = {&s->suite_file, 42, 9},
	                         .condition = {SYN_SPEED, CONDITION_BETWEEN, 1490, 1510, 5000},
	                         .timeout_ns = NS_PER_S};
	steps[3] = (struct step){.kind = STEP_ATTEMPT,
	                         .mark = -1,
	                         .attempt = {.name = "too_fast",
	                                     .channel = SYN_COMMAND,
	                                     .value = 9000,
	                                     .device = 0,
	                                     .expected_exception = 3}};
	*params = (struct syn_params){.channel = SYN_SPEED, .from = 0, .window = {-1, 0, 0}};
	limits[0] = (struct limit){.metric = 0, .min = -(double)INFINITY, .max = 0.3};
	limits[1] = (struct limit){.metric = 1, .min = 1490, .max = 1510};
	limits[2] =
	    (struct limit){.metric = 2, .min = -(double)INFINITY, .max = 12, .requirement = "SRS-113"};
	limits[3] = (struct limit){.metric = 3, .min = 1, .max = 1};
	*check = (struct check_use){.kind = &SYN_KIND,
	                            .name = "invented",
	                            .params = params,
	                            .limits = limits,
	                            .limit_count = 4};
	*group = (struct sample_group){.every_ns = SYN_STEP_NS};
	*requirement = "SRS-112";
	*test = (struct test){.name = name,
	                      .base = name,
	                      .title = title,
	                      .at = {&s->suite_file, 12, 5},
	                      .requirements = requirement,
	                      .requirement_count = 1,
	                      .groups = group,
	                      .group_count = 1,
	                      .stimulus = steps,
	                      .stimulus_count = 4,
	                      .checks = check,
	                      .check_count = 1,
	                      .marks = {.names = {"commanded", "never"}, .count = 2},
	                      .selected = true};
}

/* A damped step from 0 to 1500 rpm, a torque behind it, a NaN and two rows of a fault. */
static inline void syn_record(struct synthetic *s, struct recorded_test *recorded,
                              const struct test *test, int64_t begin_ns)
{
	struct syn_row *rows = syn_array(s, SYN_ROWS, sizeof *rows);
	struct syn_torque_row *torque = syn_array(s, SYN_ROWS, sizeof *torque);
	struct recorded_block *blocks = syn_array(s, 2, sizeof *blocks);
	int *channels = syn_array(s, 3, sizeof *channels);
	struct mark *marks = syn_array(s, 2, sizeof *marks);
	struct outcome *outcome = syn_array(s, 1, sizeof *outcome);
	struct command *command = syn_array(s, 1, sizeof *command);
	for (int i = 0; i < SYN_ROWS; i++) {
		int64_t at = begin_ns + i * SYN_STEP_NS;
		double t = fmax(i * 0.002 - 0.1, 0);
		double speed = 1500 * (1 - exp(-20 * t) * (cos(30 * t) + sin(30 * t) / 1.5));
		rows[i] = (struct syn_row){
		    at, at + 900000, {i == 77 ? (double)NAN : speed, i >= 300 && i < 302 ? 3.0 : 0.0}};
		torque[i] = (struct syn_torque_row){at + 100000, at + 700000, 1.2 * exp(-9 * t)};
	}
	channels[0] = SYN_SPEED;
	channels[1] = SYN_FAULT;
	channels[2] = SYN_TORQUE;
	blocks[0] = (struct recorded_block){channels, 2, SYN_ROWS, (unsigned char *)rows};
	blocks[1] = (struct recorded_block){channels + 2, 1, SYN_ROWS, (unsigned char *)torque};
	marks[0] =
	    (struct mark){"commanded", begin_ns + 100 * NS_PER_MS, begin_ns + 101 * NS_PER_MS, true};
	marks[1] = (struct mark){.name = "never"};
	*outcome = (struct outcome){"too_fast", OUTCOME_EXCEPTION, 3, 3, begin_ns + 5, begin_ns + 9};
	*command =
	    (struct command){SYN_COMMAND, 1500, begin_ns + 100 * NS_PER_MS, begin_ns + 101 * NS_PER_MS};
	*recorded = (struct recorded_test){.name = test->name,
	                                   .end = TEST_COMPLETED,
	                                   .condition = {.channel = -1},
	                                   .begin_ns = begin_ns,
	                                   .end_ns = begin_ns + NS_PER_S,
	                                   .blocks = blocks,
	                                   .block_count = 2,
	                                   .marks = marks,
	                                   .mark_count = 2,
	                                   .outcomes = outcome,
	                                   .outcome_count = 1,
	                                   .commands = command,
	                                   .command_count = 1,
	                                   .missed_slots = 2,
	                                   .lost_replies = 1};
}

static inline void syn_series(struct synthetic *s, struct test_result *result)
{
	const struct recorded_test *recorded = result->recorded;
	result->series = syn_array(s, SYN_CHANNELS, sizeof *result->series);
	for (int i = 0; i < SYN_CHANNELS; i++)
		result->series[i].channel = &s->rig.infos[i];
	for (size_t b = 0; b < recorded->block_count; b++)
		for (size_t c = 0; c < recorded->blocks[b].channel_count; c++) {
			struct series *series = &result->series[recorded->blocks[b].channels[c]];
			series->rows = recorded->blocks[b].rows;
			series->row0 = recorded->blocks[b].row0;
			series->stride = 16 + 8 * recorded->blocks[b].channel_count;
			series->latest_at = 8;
			series->value_at = 16 + 8 * c;
			series->block = (int)b;
		}
}

/* Four metrics; the third gets the verdict of the test, with `reason`. */
static inline void syn_judge(struct synthetic *s, struct test_result *result, enum verdict verdict,
                             const char *reason)
{
	const struct test *test = result->test;
	result->verdict = verdict;
	(void)snprintf(result->reason, sizeof result->reason, "%s", reason);
	result->checks = syn_array(s, 1, sizeof *result->checks);
	result->check_count = 1;
	result->checks[0] = (struct check_result){.use = test->checks, .verdict = VERDICT_SKIPPED};
	if (!result->recorded || result->recorded->end != TEST_COMPLETED)
		return;
	struct check_result *check = result->checks;
	check->verdict = verdict;
	check->metric_count = 4;
	check->metrics = syn_array(s, 4, sizeof *check->metrics);
	double overshoot = verdict == VERDICT_FAIL ? 20 : verdict == VERDICT_PASS ? 8.25 : 11.9;
	const struct metric metrics[4] = {
	    {.value = 0.2, .low = 0.195, .high = 0.205, .unit = unit_find("s", 1)},
	    {.value = 1500, .low = 1498, .high = 1502, .unit = s->rig.infos[SYN_SPEED].unit},
	    {.value = overshoot,
	     .low = overshoot - 0.4,
	     .high = overshoot + 0.4,
	     .unit = unit_percent()},
	    {.value = (double)NAN,
	     .low = -(double)INFINITY,
	     .high = (double)INFINITY,
	     .unit = unit_one()},
	};
	int64_t from = result->recorded->marks[0].earliest_ns;
	for (int i = 0; i < 4; i++) {
		struct metric *metric = &check->metrics[i].metric;
		*metric = metrics[i];
		metric->kind = &SYN_METRICS[i];
		metric->coverage = 0.95;
		metric->evidence = i == 1 ? EVIDENCE_INDEPENDENT : EVIDENCE_SELF_REPORTED;
		if (i == 3) /* the last one is measured only, and unknown */
			break;
		check->metrics[i].limits = syn_array(s, 1, sizeof *check->metrics[i].limits);
		check->metrics[i].limit_count = 1;
		struct limit_result *limit = check->metrics[i].limits;
		limit->limit = &test->checks->limits[i];
		limit->verdict = i == 2 ? verdict : VERDICT_PASS;
		(void)snprintf(limit->reason, sizeof limit->reason, "%s",
		               i == 2 ? reason : "it lies inside");
	}
	struct metric *settling = &check->metrics[0].metric, *final = &check->metrics[1].metric;
	settling->points[0] = (struct metric_point){"into the band", from + 200 * NS_PER_MS,
	                                            from + 202 * NS_PER_MS, 1470};
	settling->point_count = 1;
	final->points[0] =
	    (struct metric_point){"mean", from + 500 * NS_PER_MS, from + 800 * NS_PER_MS, 1500};
	final->point_count = 1;
}

/*
 * text: goes into titles, reasons and what devices say; name: a suffix of the
 * names of tests. Both may be anything.
 */
static inline void synthetic_make(struct synthetic *s, const char *name, const char *text)
{
	static const char *const bases[SYN_TESTS] = {"SPD-01", "SPD-02", "SPD-03",
	                                             "SPD-04", "SPD-05", "SPD-06"};
	static const enum verdict verdicts[SYN_TESTS] = {VERDICT_PASS,         VERDICT_FAIL,
	                                                 VERDICT_INCONCLUSIVE, VERDICT_ERROR,
	                                                 VERDICT_ERROR,        VERDICT_SKIPPED};
	memset(s, 0, sizeof *s);
	arena_init(&s->arena, 0);
	syn_rig(s);
	struct test *tests = syn_array(s, SYN_TESTS, sizeof *tests);
	struct suite_value *value = syn_array(s, 1, sizeof *value);
	struct identity_read *identity = syn_array(s, 1, sizeof *identity);
	struct link_counts *links = syn_array(s, 2, sizeof *links);
	*value = (struct suite_value){"half_speed", "1200 rpm", true};
	*identity = (struct identity_read){"controller", "firmware", text};
	links[0] = (struct link_counts){"drive_wire", 4000, 1, 0, 2, 1};
	links[1] = (struct link_counts){"bench_wire", 4000, 0, 0, 0, 0};
	s->suite = (struct suite){.name = "release",
	                          .note = text,
	                          .file = &s->suite_file,
	                          .values = value,
	                          .value_count = 1,
	                          .tests = tests,
	                          .test_count = SYN_TESTS};
	s->suites[0] = &s->suite;
	struct test_result *results = syn_array(s, SYN_TESTS, sizeof *results);
	for (int i = 0; i < SYN_TESTS; i++) {
		char *full = arena_printf(&s->arena, "%s%s", bases[i], name);
		assert(full);
		syn_test(s, &tests[i], full, text);
		results[i].test = &tests[i];
		if (i < 4) {
			struct recorded_test *recorded = syn_array(s, 1, sizeof *recorded);
			syn_record(s, recorded, &tests[i], (1 + 2 * i) * NS_PER_S);
			results[i].recorded = recorded;
			syn_series(s, &results[i]);
			if (i == 3) {
				recorded->end = TEST_AWAIT_EXPIRED;
				recorded->condition = tests[i].stimulus[2].condition;
				recorded->step_at = (struct position){&s->suite_file, 42, 1};
				recorded->condition_begin_ns = recorded->begin_ns + 10;
				recorded->condition_end_ns = recorded->end_ns;
				(void)snprintf(recorded->reason, sizeof recorded->reason, "speed stayed low");
			}
		}
		syn_judge(s, &results[i], verdicts[i], text);
	}
	tests[5].selected = false;
	s->suite_result = (struct suite_result){&s->suite, results, SYN_TESTS, {6, 1, 1, 1, 2, 1}};
	s->run = (struct run_result){.facts = {.rig = &s->rig,
	                                       .tool_version = "0.1.0",
	                                       .started_utc = "2026-12-01T09:38:17",
	                                       .host = "bench-host",
	                                       .rehearsal = true,
	                                       .defect = "slow_speed_loop",
	                                       .seed = UINT64_C(18446744073709551557),
	                                       .duration_ns = 12 * NS_PER_S,
	                                       .rest_confirmed = true,
	                                       .rest_was_needed = true,
	                                       .rest_reason = "speed between -10 and 10 rpm",
	                                       .identities = identity,
	                                       .identity_count = 1,
	                                       .links = links,
	                                       .link_count = 2,
	                                       .partial = true,
	                                       .realtime = "normal scheduling"},
	                             .suites = &s->suite_result,
	                             .suite_count = 1,
	                             .totals = s->suite_result.totals,
	                             .exit_code = 1};
}

static inline void synthetic_release(struct synthetic *s)
{
	arena_release(&s->arena);
}

/* ---- the journal and samples that such a run would have written ------------- */

static inline struct journal_event syn_event(enum journal_kind kind, int64_t time_ns, int test)
{
	return (struct journal_event){.kind = kind,
	                              .time_ns = time_ns,
	                              .suite = test < 0 ? -1 : 0,
	                              .test = test,
	                              .device = -1,
	                              .link = -1,
	                              .channel = -1,
	                              .value = (double)NAN};
}

static inline int syn_write_blocks(const struct synthetic *s, const struct run_folder *folder,
                                   struct journal *journal, int test, struct err *err)
{
	const struct recorded_test *recorded = s->suite_result.tests[test].recorded;
	for (size_t b = 0; b < recorded->block_count; b++) {
		const struct recorded_block *block = &recorded->blocks[b];
		const char *names[SYN_CHANNELS];
		struct samples_writer *writer;
		for (size_t c = 0; c < block->channel_count; c++)
			names[c] = s->rig.infos[block->channels[c]].name;
		if (samples_writer_new(folder, recorded->name, (int)b, names, block->channel_count, &writer,
		                       err) < 0)
			return -1;
		struct journal_event event = syn_event(JOURNAL_BLOCK, recorded->begin_ns - 5, test);
		event.number = (int)b;
		/* Every second one without its file name, as an older writer would. */
		if (test % 2 == 0)
			(void)snprintf(event.name, sizeof event.name, "%s", samples_writer_name(writer));
		int rc = journal_write(journal, &event, err);
		for (size_t row = 0; row < block->rows && rc == 0; row++) {
			int64_t times[2];
			const unsigned char *at = block->row0 + row * (16 + 8 * block->channel_count);
			memcpy(times, at, sizeof times);
			rc = samples_writer_add(writer, times[0], times[1], (const double *)(at + 16), err);
		}
		if (samples_writer_close(writer, err) < 0 || rc < 0)
			return -1;
	}
	return 0;
}

static inline int syn_write_test(const struct synthetic *s, const struct run_folder *folder,
                                 struct journal *journal, int test, struct err *err)
{
	const struct recorded_test *recorded = s->suite_result.tests[test].recorded;
	struct journal_event begin = syn_event(JOURNAL_TEST_BEGIN, recorded->begin_ns - 10, test);
	struct journal_event stimulus = syn_event(JOURNAL_STIMULUS, recorded->begin_ns, test);
	struct journal_event command = syn_event(JOURNAL_COMMAND, recorded->begin_ns + 1, test);
	struct journal_event mark = syn_event(JOURNAL_MARK, recorded->begin_ns + 2, test);
	struct journal_event attempt = syn_event(JOURNAL_ATTEMPT, recorded->begin_ns + 3, test);
	struct journal_event expired = syn_event(JOURNAL_AWAIT_EXPIRED, recorded->end_ns - 1, test);
	struct journal_event over = syn_event(JOURNAL_STIMULUS_END, recorded->end_ns, test);
	struct journal_event end = syn_event(JOURNAL_TEST_END, recorded->end_ns + 5, test);
	int rc = journal_write(journal, &begin, err);
	rc |= syn_write_blocks(s, folder, journal, test, err);
	rc |= journal_write(journal, &stimulus, err);
	command.channel = recorded->commands[0].channel;
	command.value = recorded->commands[0].value;
	command.earliest_ns = recorded->commands[0].earliest_ns;
	command.latest_ns = recorded->commands[0].latest_ns;
	rc |= journal_write(journal, &command, err);
	mark.earliest_ns = recorded->marks[0].earliest_ns;
	mark.latest_ns = recorded->marks[0].latest_ns;
	(void)snprintf(mark.name, sizeof mark.name, "%s", recorded->marks[0].name);
	rc |= journal_write(journal, &mark, err);
	attempt.status = (int)recorded->outcomes[0].status;
	attempt.number = recorded->outcomes[0].exception;
	attempt.expected = recorded->outcomes[0].expected_exception;
	attempt.earliest_ns = recorded->outcomes[0].sent_ns;
	attempt.latest_ns = recorded->outcomes[0].received_ns;
	(void)snprintf(attempt.name, sizeof attempt.name, "%s", recorded->outcomes[0].name);
	rc |= journal_write(journal, &attempt, err);
	if (recorded->end == TEST_AWAIT_EXPIRED) {
		expired.condition = &recorded->condition;
		expired.channel = recorded->condition.channel;
		expired.line = recorded->step_at.line;
		expired.earliest_ns = recorded->condition_begin_ns;
		expired.latest_ns = recorded->condition_end_ns;
		(void)snprintf(expired.text, sizeof expired.text, "%s", recorded->reason);
		rc |= journal_write(journal, &expired, err);
	}
	rc |= journal_write(journal, &over, err);
	end.status = (int)recorded->end;
	end.number = (int)recorded->missed_slots;
	end.expected = (int)recorded->lost_replies;
	return rc | journal_write(journal, &end, err);
}

/* journal.jsonl and samples/ of the whole run. */
static inline int synthetic_record(const struct synthetic *s, const struct run_folder *folder,
                                   struct err *err)
{
	const struct run_facts *facts = &s->run.facts;
	struct journal *journal;
	if (journal_new(folder, &s->rig, s->suites, 1, &journal, err) < 0)
		return -1;
	int rc = journal_begin(journal, facts, err);
	struct journal_event identity = syn_event(JOURNAL_IDENTITY, 1, -1);
	identity.device = 0;
	(void)snprintf(identity.name, sizeof identity.name, "%s", facts->identities[0].key);
	(void)snprintf(identity.text, sizeof identity.text, "%s", facts->identities[0].text);
	rc |= journal_write(journal, &identity, err);
	for (int i = 0; i < 4 && rc == 0; i++)
		rc = syn_write_test(s, folder, journal, i, err);
	struct journal_event rest_begin = syn_event(JOURNAL_REST_BEGIN, 11 * NS_PER_S, -1);
	struct journal_event rest = syn_event(JOURNAL_REST, 11 * NS_PER_S + 5, -1);
	struct journal_event end = syn_event(JOURNAL_RUN_END, facts->duration_ns, -1);
	rc |= journal_write(journal, &rest_begin, err);
	rest.status = 1;
	(void)snprintf(rest.text, sizeof rest.text, "%s", facts->rest_reason);
	rc |= journal_write(journal, &rest, err);
	for (int i = 0; i < 2; i++) {
		struct journal_event counts = syn_event(JOURNAL_LINK_COUNTS, 11 * NS_PER_S + 6, -1);
		counts.link = i;
		counts.counts[0] = facts->links[i].requests;
		counts.counts[1] = facts->links[i].timeouts;
		counts.counts[2] = facts->links[i].garbled;
		counts.counts[3] = facts->links[i].exceptions;
		counts.counts[4] = facts->links[i].reconnects;
		rc |= journal_write(journal, &counts, err);
	}
	(void)snprintf(end.text, sizeof end.text, "%s", facts->realtime);
	rc |= journal_write(journal, &end, err);
	return journal_close(journal, err) | rc;
}

#endif
