/* SPDX-License-Identifier: Apache-2.0 */
/*
 * `plan`: what a run would do and whether its limits can be decided, from the
 * files alone. It opens no link and takes no lock, so it may be asked while a
 * run goes on.
 */
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include <jansson.h>

#include "options.h"
#include "plan_show.h"
#include "session.h"
#include "verbs.h"

static const struct option_row ROWS[] = {
    {"rig", true, "the rig file (needed)"},
    {"timing", true, "FILE: times of links as `survey --record FILE` measured them"},
    {"known", true, "FILE: results.json of an earlier run; limits are judged at its values"},
    {"json", false, "as JSON"},
    {"set", true, "NAME=VALUE: replaces a value of the suite; may be given often"},
    {"only", true, "TEST or a pattern with *: these tests only; may be given often"},
    {"tag", true, "TAG: the tests with this tag only; may be given often"},
    {"part", true, "I/N: the I-th of N parts of about equal duration"},
    {"help", false, "this text"},
};

enum { ROW_COUNT = sizeof ROWS / sizeof ROWS[0] };

struct plan_options {
	struct run_options *run;
	const char *timing, *known;
	bool json, help;
};

static int take(void *context, const struct option_row *row, const char *value, struct err *reterr)
{
	struct plan_options *options = context;
	const char *name = row ? row->name : NULL;
	if (!name)
		return run_option_take(options->run, NULL, value, reterr);
	if (strcmp(name, "timing") == 0)
		options->timing = value;
	else if (strcmp(name, "known") == 0)
		options->known = value;
	else if (strcmp(name, "json") == 0)
		options->json = true;
	else if (strcmp(name, "help") == 0)
		options->help = true;
	else
		return run_option_take(options->run, name, value, reterr);
	return 0;
}

static int show_help(void)
{
	struct text out;
	text_init(&out, 0);
	text_puts(
	    &out,
	    "drivetrial plan --rig RIG SUITE... says what a run would do, how long it takes, how\n"
	    "often each link can be sampled, and for each limit whether it can be decided. It\n"
	    "touches nothing. Exit 0 where every limit is decidable, else 2.\n\n"
	    "  decidable    the interval of the metric will lie inside the limit, or outside\n"
	    "  open         it hangs on where the samples fall\n"
	    "  undecidable  the interval will cross the limit, or the metric will be unknown\n\n"
	    "Without --known a limit counts as decidable if conformity can surely be shown for\n"
	    "half of what it allows. Noise is foreseen only as far as --known shows it.\n\n");
	options_describe(ROWS, ROW_COUNT, &out);
	text_puts(&out, "\n  drivetrial plan --rig rigs/model-spm.yaml suites/release.yaml\n"
	                "  drivetrial plan --rig rigs/bench.yaml --timing bench.timing.json --known "
	                "runs/before/results.json suites/release.yaml\n");
	bool written = fputs(text_string(&out), stdout) >= 0 && fflush(stdout) == 0;
	text_release(&out);
	return written ? 0 : EXIT_NO_OUTPUT;
}

/* ---- values of an earlier run --------------------------------------------------------- */

static const json_t *named(const json_t *array, const char *name)
{
	size_t i;
	json_t *item;
	json_array_foreach(array, i, item)
	{
		const char *is = json_string_value(json_object_get(item, "name"));
		if (is && strcmp(is, name) == 0)
			return item;
	}
	return NULL;
}

static double metric_number(const json_t *check, const char *metric, const char *key)
{
	const json_t *found = named(json_object_get(check, "metrics"), metric);
	const json_t *value = json_object_get(found, key);
	return json_is_number(value) ? json_number_value(value) : (double)NAN;
}

static void take_known(const json_t *known, struct forecast_case *c)
{
	const json_t *suite = named(json_object_get(known, "suites"), c->plan->suite->name);
	const json_t *test = named(json_object_get(suite, "tests"), c->plan->test->name);
	const json_t *check = named(json_object_get(test, "checks"), c->use->name);
	const char *metric = c->use->kind->metrics[c->limit->metric].name;
	c->known = metric_number(check, metric, "value");
	c->known_u = metric_number(check, metric, "uncertainty");
	c->known_rise = metric_number(check, "rise_time", "value");
	c->known_spread = metric_number(check, "spread", "value");
}

/* ---- the plan ------------------------------------------------------------------------- */

static void count_answer(struct plan *plan, enum answer answer)
{
	plan->decidable += answer == ANSWER_DECIDABLE;
	plan->open += answer == ANSWER_OPEN;
	plan->undecidable += answer == ANSWER_UNDECIDABLE;
	plan->none += answer == ANSWER_NONE;
}

static int plan_limits(struct plan *plan, struct plan_row *row, const json_t *known,
                       struct arena *arena, struct err *reterr)
{
	const struct test *test = row->plan.test;
	size_t count = 0;
	for (size_t c = 0; c < test->check_count; c++)
		count += test->checks[c].limit_count;
	row->limits = arena_array(arena, count + 1, sizeof *row->limits);
	if (!row->limits)
		return err_set(reterr, ERR_NOMEM, "no memory for the plan");
	for (size_t c = 0; c < test->check_count; c++)
		for (size_t l = 0; l < test->checks[c].limit_count; l++) {
			struct plan_limit *limit = &row->limits[row->limit_count++];
			struct forecast_case one = {.timing = plan->timing,
			                            .plan = &row->plan,
			                            .use = &test->checks[c],
			                            .limit = &test->checks[c].limits[l],
			                            .known = (double)NAN,
			                            .known_u = (double)NAN,
			                            .known_rise = (double)NAN,
			                            .known_spread = (double)NAN};
			if (known)
				take_known(known, &one);
			*limit = (struct plan_limit){.use = one.use, .limit = one.limit, .known = one.known};
			forecast_answer(&one, &limit->answered);
			count_answer(plan, limit->answered.answer);
			if ((limit->answered.answer == ANSWER_OPEN ||
			     limit->answered.answer == ANSWER_UNDECIDABLE) &&
			    plan_remedy(&one, limit, arena, reterr) < 0)
				return -1;
		}
	return 0;
}

static int plan_tests(const struct session *session, const json_t *known, struct arena *arena,
                      struct plan *plan, struct err *reterr)
{
	size_t count = 0;
	int64_t least, most;
	for (size_t s = 0; s < session->suite_count; s++)
		count += session->suites[s]->test_count;
	plan->rows = arena_array(arena, count + 1, sizeof *plan->rows);
	if (!plan->rows)
		return err_set(reterr, ERR_NOMEM, "no memory for the plan");
	/* A run begins with the safe state. */
	steps_duration(session->rig->safe_state, session->rig->safe_state_count, &least, &most);
	plan->whole_ns = least;
	plan->whole_most_ns = most;
	for (size_t s = 0; s < session->suite_count; s++)
		for (size_t t = 0; t < session->suites[s]->test_count; t++) {
			const struct test *test = &session->suites[s]->tests[t];
			struct plan_row *row = &plan->rows[plan->count];
			if (!test->selected)
				continue;
			plan->count++;
			if (plan_test_make(plan->timing, session->suites[s], test, arena, &row->plan, reterr) <
			        0 ||
			    plan_limits(plan, row, known, arena, reterr) < 0)
				return -1;
			row->plan.begin_ns = plan->whole_ns;
			plan->whole_ns += row->plan.whole_ns;
			plan->whole_most_ns += row->plan.whole_most_ns;
		}
	return 0;
}

static int print(const struct plan *plan, bool json)
{
	struct text out;
	struct err err = {0};
	int code = plan->open + plan->undecidable > 0 ? EXIT_UNDECIDED : 0;
	text_init(&out, 0);
	if (!json)
		plan_show(plan, &out);
	else if (plan_json(plan, &out, &err) < 0)
		code = session_exit_of(&err);
	if (out.cut || fputs(text_string(&out), stdout) < 0 || fflush(stdout) != 0)
		code = EXIT_NO_OUTPUT;
	text_release(&out);
	return code;
}

static int make(struct session *session, const struct plan_options *options)
{
	struct err err = {0};
	struct bench_timing timing;
	struct plan plan = {.timing = &timing, .known_path = options->known};
	json_t *known = NULL;
	json_error_t fault;
	int code;
	if (bench_timing_assume(session->rig, &session->arena, &timing, &err) < 0 ||
	    (options->timing && bench_timing_load(options->timing, &timing, &err) < 0))
		return session_exit_of(&err);
	if (options->known) {
		known = json_load_file(options->known, JSON_REJECT_DUPLICATES, &fault);
		if (!known || !json_is_array(json_object_get(known, "suites"))) {
			json_decref(known);
			(void)err_set_at(&err, ERR_FILE, options->known, 0, 0,
			                 "this is no results.json of a run");
			return session_exit_of(&err);
		}
	}
	if (plan_tests(session, known, &session->arena, &plan, &err) < 0)
		code = session_exit_of(&err);
	else
		code = print(&plan, options->json);
	json_decref(known);
	return code;
}

static int carry_out(const struct plan_options *options)
{
	struct session *session = malloc(sizeof *session);
	if (!session)
		return EXIT_INTERNAL;
	options->run->rehearse = true; /* nothing moves: no questions, no cautions */
	session_init(session, options->run);
	int code = session_load(session);
	if (code == 0)
		code = make(session, options);
	session_release(session);
	free(session);
	return code;
}

int verb_plan(int argc, char **argv)
{
	struct plan_options options = {.run = calloc(1, sizeof *options.run)};
	struct err err = {0};
	int code;
	if (!options.run)
		return EXIT_INTERNAL;
	if (options_parse(argc, argv, ROWS, ROW_COUNT, take, &options, &err) < 0) {
		code = session_exit_of(&err);
	} else if (options.help) {
		code = show_help();
	} else if (!options.run->rig_path || options.run->suite_count == 0) {
		(void)err_set(&err, ERR_USAGE, "plan: %s; see 'drivetrial plan --help'",
		              options.run->rig_path ? "no suite is given" : "--rig is missing");
		code = session_exit_of(&err);
	} else {
		code = carry_out(&options);
	}
	run_options_free(options.run);
	return code;
}
