/* SPDX-License-Identifier: Apache-2.0 */
/*
 * `tests`: each is read once per case of its sweep, with the values of the
 * case in place, so that a case that breaks a limit of the rig is refused by
 * itself, at the value that breaks it. Reading once and patching numbers
 * afterwards was rejected: a value may stand anywhere.
 */
#include <string.h>

#include "loading.h"

struct test_file {
	const char *name;
	bool continues;
	int decision, judge_repeats;
	double coverage, confidence;
};

static const char *const DECISIONS[] = {"guarded", "simple", NULL};
static const char *const JUDGES[] = {"each", "tolerance_interval", "worst_case", NULL};

static const struct field TEST_FIELDS[] = {
    {.key = "test",
     .kind = FIELD_NAME,
     .flags = FIELD_REQUIRED,
     .offset = offsetof(struct test_file, name),
     .text = "name of the test, unique in the suite"},
    {.key = "title",
     .kind = FIELD_OWN,
     .text = "one line for people; $name is replaced by its value"},
    {.key = "requirement",
     .kind = FIELD_OWN,
     .text = "the requirement that it shows, or a list of them"},
    {.key = "tags", .kind = FIELD_OWN, .text = "names for --tag, one or a list"},
    {.key = "continues",
     .kind = FIELD_YES_NO,
     .fallback = "no",
     .offset = offsetof(struct test_file, continues),
     .text = "goes on from where the test before it ended, without the safe state between them"},
    {.key = "sweep",
     .kind = FIELD_OWN,
     .text = "values by name: one test case per point of their cross product, used as $name"},
    {.key = "repeat",
     .kind = FIELD_OWN,
     .least = 1,
     .most = 1000,
     .text = "how many times it is run"},
    {.key = "judge_repeats",
     .kind = FIELD_CHOICE,
     .choices = JUDGES,
     .fallback = "each",
     .offset = offsetof(struct test_file, judge_repeats),
     .text = "each by itself, or all as one population: by a tolerance interval, or by the worst"},
    {.key = "coverage",
     .kind = FIELD_QUANTITY,
     .dimension = &DIM_NUMBER,
     .flags = FIELD_POSITIVE,
     .least = 0,
     .most = 0.999,
     .fallback = "90 %",
     .offset = offsetof(struct test_file, coverage),
     .text = "tolerance_interval: the share of all that the drive will do that must conform"},
    {.key = "confidence",
     .kind = FIELD_QUANTITY,
     .dimension = &DIM_NUMBER,
     .flags = FIELD_POSITIVE,
     .least = 0,
     .most = 0.999,
     .fallback = "95 %",
     .offset = offsetof(struct test_file, confidence),
     .text = "tolerance_interval: how sure that is to be"},
    {.key = "sample",
     .kind = FIELD_OWN,
     .text = "what is read while it runs, in place of the suite's `sample`"},
    {.key = "decision",
     .kind = FIELD_CHOICE,
     .choices = DECISIONS,
     .offset = offsetof(struct test_file, decision),
     .text = "guarded or simple; without it that of the suite"},
    {.key = "stimulus",
     .kind = FIELD_OWN,
     .flags = FIELD_REQUIRED,
     .text = "steps: what is commanded"},
    {.key = "checks", .kind = FIELD_OWN, .flags = FIELD_REQUIRED, .text = "what is judged"},
    {.key = "restore", .kind = FIELD_OWN, .text = "steps that always run after the stimulus"},
};

static const struct field_table TEST_TABLE = {"test", "One test of the suite.", TEST_FIELDS,
                                              FIELD_COUNT(TEST_FIELDS)};

enum {
	STIMULUS_STEPS = 1u << STEP_SET | 1u << STEP_RAMP | 1u << STEP_HOLD | 1u << STEP_AWAIT |
	                 1u << STEP_SILENCE | 1u << STEP_ATTEMPT | 1u << STEP_CYCLE | 1u << STEP_MARK,
	RESTORE_STEPS = 1u << STEP_SET | 1u << STEP_RAMP | 1u << STEP_HOLD | 1u << STEP_AWAIT,
};

const struct field_table *test_fields(void)
{
	return &TEST_TABLE;
}

bool texts_load(struct loading *l, const struct yaml_node *node, bool names, const char *what,
                const char ***ret_texts, size_t *ret_count)
{
	bool list = node->kind == YAML_SEQUENCE;
	size_t count = list ? node->count : 1;
	const char **texts = arena_array(l->arena, count + 1, sizeof *texts);
	if (!texts)
		return loading_no_memory(l) != NULL;
	for (size_t i = 0; i < count; i++) {
		const struct yaml_node *item = list ? node->items[i] : node;
		if (names ? !bind_name(&l->binder, item, &texts[i])
		          : !bind_text(&l->binder, item, &texts[i]))
			return false;
		if (item->length == 0 || item->length > ID_MOST) {
			faults_add(l->faults, item->at, "a %s has between 1 and %d bytes", what, ID_MOST);
			return false;
		}
		for (size_t k = 0; k < i; k++)
			if (strcmp(texts[k], texts[i]) == 0) {
				faults_add(l->faults, item->at, "the %s '%s' is named twice", what, texts[i]);
				return false;
			}
	}
	*ret_texts = texts;
	*ret_count = count;
	return true;
}

static bool steps_of(struct loading *l, const struct yaml_node *node, const char *what,
                     unsigned allowed, struct mark_names *marks, struct step **ret_steps,
                     size_t *ret_count)
{
	if (!bind_expect(&l->binder, node, YAML_SEQUENCE, what))
		return false;
	struct step_context context = loading_steps(l);
	context.marks = marks;
	context.allowed = allowed;
	context.continues = !marks || l->test->continues; /* restore has no marks */
	struct err err = {0};
	if (steps_load(&context, node, ret_steps, ret_count, &err) < 0)
		return loading_no_memory(l) != NULL;
	return true;
}

static void sample_of(struct loading *l, const struct yaml_node *node, struct test *test)
{
	const struct yaml_node *sample = yaml_get(node, "sample");
	test->groups = l->groups;
	test->group_count = l->group_count;
	l->sample_known = l->groups_known;
	if (sample)
		l->sample_known = sample_load(l, sample, &test->groups, &test->group_count);
	if (!sample && !l->groups && l->groups_known) {
		faults_add(l->faults, node->at,
		           "nothing is sampled: give `sample: {every, channels}` in the test or the suite");
		l->sample_known = false;
	}
	memset(l->sampled, 0, l->rig->channel_count);
	for (size_t g = 0; test->groups && g < test->group_count; g++)
		for (size_t c = 0; c < test->groups[g].channel_count; c++)
			l->sampled[test->groups[g].channels[c]] = 1;
}

static void words_of(struct loading *l, const struct yaml_node *node, struct test *test)
{
	const struct yaml_node *title = yaml_get(node, "title");
	const struct yaml_node *requirement = yaml_get(node, "requirement");
	const struct yaml_node *tags = yaml_get(node, "tags");
	const char *text = title ? values_text(l, title) : NULL;
	test->title = text ? text : "";
	if (requirement)
		(void)texts_load(l, requirement, false, "requirement", &test->requirements,
		                 &test->requirement_count);
	if (tags)
		(void)texts_load(l, tags, true, "tag", &test->tags, &test->tag_count);
}

static void stimulus_of(struct loading *l, const struct yaml_node *node, struct test *test)
{
	const struct yaml_node *stimulus = yaml_get(node, "stimulus");
	const struct yaml_node *restore = yaml_get(node, "restore");
	size_t before = faults_total(l->faults);
	l->stimulus_known = false;
	if (stimulus && steps_of(l, stimulus, "'stimulus'", STIMULUS_STEPS, &test->marks,
	                         &test->stimulus, &test->stimulus_count)) {
		if (stimulus->count == 0)
			faults_add(l->faults, stimulus->at, "a stimulus without steps commands nothing");
		l->stimulus_known = faults_total(l->faults) == before;
	}
	if (restore)
		(void)steps_of(l, restore, "'restore'", RESTORE_STEPS, NULL, &test->restore,
		               &test->restore_count);
}

/* The population that a case belongs to; the repeats of a point share one. */
static void population_of(struct loading *l, const struct yaml_node *node,
                          const struct test_file *file, struct test *test)
{
	const struct yaml_node *judge = yaml_get(node, "judge_repeats");
	const struct yaml_node *coverage = yaml_get(node, "coverage");
	const struct yaml_node *confidence = yaml_get(node, "confidence");
	bool interval = file->judge_repeats == REPEATS_TOLERANCE_INTERVAL;
	const struct yaml_node *idle = coverage ? coverage : confidence;
	if (idle && !interval)
		faults_add(l->faults, idle->at,
		           "coverage and confidence belong to `judge_repeats: tolerance_interval`");
	if (file->judge_repeats == REPEATS_EACH)
		return;
	size_t times = l->sweep ? (size_t)l->sweep->repeat : 0;
	if (times < 3) {
		faults_add(l->faults, judge->at, "repeats judged together are at least 3: `repeat: 20`");
		return;
	}
	if (l->population_left == 0) {
		struct population *population = arena_alloc(l->arena, sizeof *population);
		if (!population) {
			(void)loading_no_memory(l);
			return;
		}
		*population = (struct population){(enum repeats_judge)file->judge_repeats, file->coverage,
		                                  file->confidence, times};
		l->population = population;
		l->population_left = times;
	}
	test->population = l->population;
	l->population_left--;
}

/* One case; the values of the sweep are in place. */
static void case_load(struct loading *l, const struct yaml_node *node, struct test *test)
{
	struct test_file file = {.decision = (int)l->suite->rule};
	(void)bind_mapping(&l->binder, &TEST_TABLE, node, &file);
	test->at = node->at;
	test->continues = file.continues;
	l->test = test;
	l->rule = (enum decision_rule)file.decision;
	population_of(l, node, &file, test);
	words_of(l, node, test);
	sample_of(l, node, test);
	stimulus_of(l, node, test);
	const struct yaml_node *checks = yaml_get(node, "checks");
	if (checks && !l->out_of_memory)
		checks_load(l, checks);
	l->test = NULL;
}

/* The test of that name in the file so far, or NULL. */
static const struct test *name_taken(const struct suite *suite, const char *name)
{
	for (size_t i = 0; i < suite->test_count; i++)
		if (strcmp(suite->tests[i].base, name) == 0)
			return &suite->tests[i];
	return NULL;
}

static bool test_add(struct loading *l, const struct test *test, size_t *room)
{
	struct suite *suite = l->suite;
	if (suite->test_count == *room) {
		size_t larger = *room * 2 + 16;
		struct test *tests = arena_array(l->arena, larger, sizeof *tests);
		if (!tests)
			return loading_no_memory(l) != NULL;
		if (suite->test_count > 0)
			memcpy(tests, suite->tests, suite->test_count * sizeof *tests);
		suite->tests = tests;
		*room = larger;
	}
	suite->tests[suite->test_count++] = *test;
	return true;
}

static void test_load(struct loading *l, const struct yaml_node *node, bool first, size_t *room)
{
	if (!bind_expect(&l->binder, node, YAML_MAPPING, "a test"))
		return;
	struct sweep sweep;
	const struct yaml_node *name = yaml_get(node, "test");
	const char *base = name && name->kind == YAML_SCALAR ? name->text : "?";
	const struct test *taken = name ? name_taken(l->suite, base) : NULL;
	if (taken)
		faults_add(l->faults, name->at, "test '%s' is there already, in line %d", base,
		           taken->at.line);
	if (!sweep_load(l, node, &sweep))
		return;
	l->sweep = &sweep;
	l->population_left = 0;
	size_t before = faults_total(l->faults);
	for (size_t i = 0; i < sweep.cases && !l->out_of_memory; i++) {
		struct test test = {0};
		if (!sweep_enter(l, &sweep, i, base, &test)) {
			l->sweep = NULL;
			return;
		}
		case_load(l, node, &test);
		const struct yaml_node *continues = yaml_get(node, "continues");
		if (first && i == 0 && test.continues)
			faults_add(l->faults, continues->at,
			           "the first test has none before it that it could continue");
		if (!test_add(l, &test, room) || faults_total(l->faults) > before)
			break; /* the other cases would tell the same */
	}
	if (faults_total(l->faults) == before)
		sweep_leave(l, &sweep, node);
	l->sweep = NULL;
	l->value_count = l->suite_value_count;
}

void tests_load(struct loading *l, const struct yaml_node *list, const struct test *bench,
                size_t bench_count)
{
	size_t room = 0;
	if (!bind_expect(&l->binder, list, YAML_SEQUENCE, "'tests'"))
		return;
	if (list->count == 0)
		faults_add(l->faults, list->at, "a suite without tests could not fail: add one");
	l->sampled = arena_alloc(l->arena, l->rig->channel_count + 1);
	if (!l->sampled) {
		(void)loading_no_memory(l);
		return;
	}
	for (size_t i = 0; i < bench_count; i++)
		if (!test_add(l, &bench[i], &room))
			return;
	for (size_t i = 0; i < list->count && !l->out_of_memory; i++) {
		test_load(l, list->items[i], i == 0, &room);
		if (l->suite->test_count > SUITE_CASES_MOST) {
			faults_add(l->faults, list->items[i]->at, "the suite has more than %d test cases",
			           SUITE_CASES_MOST);
			return;
		}
	}
}
