/* SPDX-License-Identifier: Apache-2.0 */
/* What a suite file becomes; what is refused is in tests/golden/suite-*. */
#include "suite.h"

#include <string.h>

#include "near.h"

#define GOLDEN SOURCE_DIR "/tests/golden/suite-everything/"

struct fixture {
	struct arena arena;
	struct faults faults;
	const struct rig *rig;
	struct suite *suite;
};

static void load_with(struct fixture *f, const char *rig, const char *suite,
                      struct override *overrides, size_t override_count)
{
	struct err err = {0};
	memset(f, 0, sizeof *f);
	arena_init(&f->arena, 0);
	if (rig_load(rig, &f->arena, &f->faults, &f->rig, &err) < 0 || !f->rig)
		fail_msg("%s: %s%s", rig, err.message, f->faults.items[0].message);
	if (suite_load(suite, f->rig, overrides, override_count, &f->arena, &f->faults, &f->suite,
	               &err) < 0 ||
	    !f->suite)
		fail_msg("%s: %s%s", suite, err.message, f->faults.items[0].message);
}

static int setup(void **state)
{
	static struct fixture f;
	load_with(&f, GOLDEN "rig.yaml", GOLDEN "suite.yaml", NULL, 0);
	*state = &f;
	return 0;
}

static int teardown(void **state)
{
	struct fixture *f = *state;
	arena_release(&f->arena);
	return 0;
}

static const struct test *test_named(const struct fixture *f, const char *name)
{
	for (size_t i = 0; i < f->suite->test_count; i++)
		if (strcmp(f->suite->tests[i].name, name) == 0)
			return &f->suite->tests[i];
	fail_msg("there is no test %s", name);
	return NULL;
}

static const struct limit *limit_named(const struct check_use *use, const char *metric)
{
	for (size_t i = 0; i < use->limit_count; i++)
		if (strcmp(use->kind->metrics[use->limits[i].metric].name, metric) == 0)
			return &use->limits[i];
	fail_msg("check %s has no limit of %s", use->name, metric);
	return NULL;
}

static void sweeps_and_repeats_become_cases_in_the_order_of_nested_loops(void **state)
{
	struct fixture *f = *state;
	static const char *const NAMES[] = {
	    "SPD-01[1]",
	    "SPD-01[2]",
	    "SPD-01[3]",
	    "SPD-02[speed=500rpm,which=speed]",
	    "SPD-02[speed=500rpm,which=bench_speed]",
	    "SPD-02[speed=1500rpm,which=speed]",
	    "SPD-02[speed=1500rpm,which=bench_speed]",
	    "SPD-02[speed=-1000rpm,which=speed]",
	    "SPD-02[speed=-1000rpm,which=bench_speed]",
	    "REF-01",
	};
	assert_int_equal(f->suite->test_count, FIELD_COUNT(NAMES));
	for (size_t i = 0; i < FIELD_COUNT(NAMES); i++)
		assert_string_equal(f->suite->tests[i].name, NAMES[i]);
	assert_string_equal(f->suite->tests[5].base, "SPD-02");
	assert_int_equal(f->suite->tests[5].sweep_count, 2);
	assert_string_equal(f->suite->tests[5].sweep[0].name, "speed");
	assert_string_equal(f->suite->tests[5].sweep[0].shown, "1500 rpm");
}

static void a_limit_tabled_over_the_sweep_takes_the_entry_of_its_point(void **state)
{
	(void)state;
	struct fixture f;
	static const char *const NAMES[] = {"SPD-01[speed=500rpm]", "SPD-01[speed=1500rpm]"};
	load_with(&f, SOURCE_DIR "/tests/golden/suite-table-good/rig.yaml",
	          SOURCE_DIR "/tests/golden/suite-table-good/suite.yaml", NULL, 0);
	for (int i = 0; i < 2; i++) {
		const struct check_use *use = &test_named(&f, NAMES[i])->checks[0];
		assert_near(limit_named(use, "rise_time")->max, i ? 0.12 : 0.06, 1e-12, "s");
		assert_near(limit_named(use, "settling_time")->max, i ? 0.3 : 0.2, 1e-12, "s");
	}
	arena_release(&f.arena);
}

static void the_repeats_of_a_point_share_their_population(void **state)
{
	(void)state;
	struct fixture f;
	load_with(&f, SOURCE_DIR "/tests/golden/suite-population-good/rig.yaml",
	          SOURCE_DIR "/tests/golden/suite-population-good/suite.yaml", NULL, 0);
	const struct population *population = test_named(&f, "SPD-01[1]")->population;
	assert_non_null(population);
	assert_ptr_equal(test_named(&f, "SPD-01[20]")->population, population);
	assert_int_equal(population->judge, REPEATS_TOLERANCE_INTERVAL);
	assert_int_equal(population->times, 20);
	assert_near(population->coverage, 0.95, 1e-12, "");
	assert_near(population->confidence, 0.90, 1e-12, "");
	arena_release(&f.arena);
}

static void values_of_a_sweep_reach_steps_and_checks(void **state)
{
	struct fixture *f = *state;
	const struct test *test = test_named(f, "SPD-02[speed=-1000rpm,which=bench_speed]");
	assert_near(test->stimulus[1].assigns[0].value, -1000, 0, "rpm");
	/* The channel is the first field of step_response's parameters. */
	int channel;
	memcpy(&channel,
	       (const char *)test->checks[0].params +
	           field_find(test->checks[0].kind->fields, "channel", 7)->offset,
	       sizeof channel);
	assert_int_equal(channel, rig_channel_find(f->rig, "bench_speed", 11));
}

static void names_in_a_title_are_replaced_and_other_dollars_are_kept(void **state)
{
	struct fixture *f = *state;
	assert_string_equal(test_named(f, "SPD-01[1]")->title, "Step to 1500 rpm, then $5 of luck");
	assert_string_equal(test_named(f, "REF-01")->title, "");
}

static void limits_are_in_the_unit_of_their_metric(void **state)
{
	struct fixture *f = *state;
	const struct check_use *use = &test_named(f, "SPD-01[1]")->checks[0];
	const struct limit *rise = limit_named(use, "rise_time");
	const struct limit *settling = limit_named(use, "settling_time");
	const struct limit *error = limit_named(use, "steady_state_error");
	assert_near(rise->max, 0.120, 1e-15, "s");
	assert_true(isinf(rise->min) && rise->min < 0);
	assert_string_equal(rise->shown_unit->name, "ms");
	assert_near(settling->max, 0.3, 1e-15, "s");
	assert_string_equal(settling->shown_unit->name, "s");
	/* A bare number is in the channel's unit; 0.6 rad/s are 0.6 * 60 / (2 pi) rpm. */
	assert_near(error->min, -5, 0, "rpm");
	assert_near(error->max, 5.729577951308232, 1e-12, "rpm");
	/* A percentage is a number of hundredths. */
	use = &test_named(f, "SPD-02[speed=500rpm,which=speed]")->checks[0];
	assert_near(limit_named(use, "overshoot")->max, 0.1, 1e-15, "%");
	use = &test_named(f, "REF-01")->checks[0];
	assert_near(limit_named(use, "refused")->min, 1, 0, "");
	assert_near(limit_named(use, "refused")->max, 1, 0, "");
}

static void decision_and_requirement_come_from_the_nearest_place(void **state)
{
	struct fixture *f = *state;
	const struct test *test = test_named(f, "SPD-01[1]");
	assert_int_equal(f->suite->rule, DECISION_GUARDED);
	assert_int_equal(limit_named(&test->checks[0], "rise_time")->rule, DECISION_SIMPLE);
	assert_int_equal(limit_named(&test->checks[0], "settling_time")->rule, DECISION_GUARDED);
	assert_string_equal(limit_named(&test->checks[0], "settling_time")->requirement, "SRS-113");
	assert_null(limit_named(&test->checks[0], "rise_time")->requirement);
	assert_int_equal(test->requirement_count, 2);
	assert_string_equal(test->requirements[1], "SRS-2");
	assert_int_equal(test->tag_count, 2);
	test = test_named(f, "SPD-02[speed=500rpm,which=speed]");
	assert_int_equal(test->checks[0].limits[0].rule, DECISION_GUARDED);
}

/* The options of a metric's limit, and their defaults where it has none. */
static void options_of_a_limit_reach_the_parameters(void **state)
{
	struct fixture *f = *state;
	const char *const NAMES[] = {"SPD-01[1]", "SPD-02[speed=500rpm,which=speed]"};
	const double FROM[] = {0.2, 0.1}, BAND[] = {0.05, 0.02};
	for (size_t i = 0; i < 2; i++) {
		const struct check_use *use = &test_named(f, NAMES[i])->checks[0];
		double from = (double)NAN, band = (double)NAN;
		for (size_t m = 0; m < use->kind->metric_count; m++) {
			const struct metric_kind *metric = &use->kind->metrics[m];
			if (strcmp(metric->name, "rise_time") == 0)
				memcpy(&from,
				       (const char *)use->params + field_find(metric->options, "from", 4)->offset,
				       sizeof from);
			if (strcmp(metric->name, "settling_time") == 0)
				memcpy(&band,
				       (const char *)use->params + field_find(metric->options, "band", 4)->offset,
				       sizeof band);
		}
		assert_near(from, FROM[i], 1e-15, "");
		assert_near(band, BAND[i], 1e-15, "");
	}
}

static void samples_are_of_the_test_else_of_the_suite(void **state)
{
	struct fixture *f = *state;
	const struct test *test = test_named(f, "SPD-01[1]");
	assert_int_equal(test->group_count, 2);
	assert_int_equal(test->groups[0].every_ns, 0); /* fastest */
	assert_int_equal(test->groups[1].every_ns, 10 * NS_PER_MS);
	assert_int_equal(test->groups[1].channel_count, 3);
	test = test_named(f, "REF-01");
	assert_int_equal(test->group_count, 1);
	assert_int_equal(test->groups[0].every_ns, 5 * NS_PER_MS);
}

static void checks_of_one_kind_have_names_of_their_own(void **state)
{
	(void)state;
	struct fixture f;
	load_with(&f, SOURCE_DIR "/rigs/model-spm.yaml", SOURCE_DIR "/suites/release.yaml", NULL, 0);
	const struct test *test = test_named(&f, "SPD-01");
	assert_string_equal(test->checks[0].name, "step_response");
	assert_string_equal(test->checks[1].name, "step_response-2");
	arena_release(&f.arena);
}

static void overrides_replace_values_and_are_told(void **state)
{
	(void)state;
	struct fixture f;
	struct override overrides[] = {{"half_speed", "1200 rpm", false}};
	load_with(&f, GOLDEN "rig.yaml", GOLDEN "suite.yaml", overrides, 1);
	assert_true(overrides[0].used);
	assert_string_equal(f.suite->values[0].shown, "1200 rpm");
	assert_true(f.suite->values[0].overridden);
	assert_false(f.suite->values[1].overridden);
	const struct test *test = test_named(&f, "SPD-01[1]");
	assert_near(test->stimulus[1].assigns[0].value, 1200, 0, "rpm");
	assert_string_equal(test->title, "Step to 1200 rpm, then $5 of luck");
	(void)test_named(&f, "SPD-02[speed=1200rpm,which=speed]");
	arena_release(&f.arena);
}

/* Issue of the release: at least 16 tests, in no more than 90 s with all that comes around them. */
static void the_release_suite_is_whole_and_short(void **state)
{
	(void)state;
	struct fixture f;
	load_with(&f, SOURCE_DIR "/rigs/model-spm.yaml", SOURCE_DIR "/suites/release.yaml", NULL, 0);
	size_t bases = 0, all;
	const char *last = "";
	for (size_t i = 0; i < f.suite->test_count; i++) {
		const struct test *test = &f.suite->tests[i];
		bases += !test->bench && strcmp(test->base, last) != 0;
		last = test->base;
		assert_true(test->check_count > 0);
		assert_true(test->bench || test->requirement_count > 0);
		for (size_t c = 0; c < test->check_count; c++)
			assert_true(test->checks[c].limit_count > 0);
		for (size_t k = 0; k < i; k++)
			assert_string_not_equal(test->name, f.suite->tests[k].name);
	}
	assert_true(bases >= 16);
	size_t selected = suite_selected(f.suite, &all);
	assert_int_equal(selected, all);
	/* A second a test for the safe state and what must hold before it. */
	assert_true(f.suite->duration_ns + (int64_t)f.suite->test_count * NS_PER_S < 90 * NS_PER_S);
	arena_release(&f.arena);
}

static void the_smoke_suite_is_under_15_s(void **state)
{
	(void)state;
	struct fixture f;
	load_with(&f, SOURCE_DIR "/rigs/model-spm.yaml", SOURCE_DIR "/suites/smoke.yaml", NULL, 0);
	assert_true(f.suite->duration_ns + (int64_t)f.suite->test_count * NS_PER_S < 15 * NS_PER_S);
	arena_release(&f.arena);
}

/* --- the bench's own tests ------------------------------------------------- */

static const struct step *step_of_kind(const struct test *test, enum step_kind kind, size_t skip)
{
	for (size_t i = 0; i < test->stimulus_count; i++)
		if (test->stimulus[i].kind == kind && skip-- == 0)
			return &test->stimulus[i];
	fail_msg("%s has no such step", test->name);
	return NULL;
}

static void every_watchdog_is_proven_by_silence(void **state)
{
	(void)state;
	struct fixture f;
	load_with(&f, SOURCE_DIR "/rigs/model-spm.yaml", SOURCE_DIR "/suites/smoke.yaml", NULL, 0);
	static const char *const NAMES[] = {"bench/watchdog:controller", "bench/watchdog:load_machine"};
	for (size_t i = 0; i < 2; i++) {
		const struct test *test = &f.suite->tests[i];
		assert_string_equal(test->name, NAMES[i]);
		assert_true(test->bench && test->selected);
		const struct step *silence = step_of_kind(test, STEP_SILENCE, 0);
		assert_int_equal(silence->duration_ns, 300 * NS_PER_MS); /* 1.5 times 200 ms */
		assert_string_equal(f.rig->devices[silence->device].name, NAMES[i] + 15);
		const struct step *tripped = step_of_kind(test, STEP_AWAIT, 0);
		assert_true(tripped > silence);
		assert_int_equal(tripped->condition.kind, CONDITION_IS);
		assert_near(tripped->condition.a, 9, 0, ""); /* link_watchdog */
		const struct step *clear = step_of_kind(test, STEP_AWAIT, 1);
		assert_int_equal(clear->condition.channel, tripped->condition.channel);
		assert_false(condition_holds(&clear->condition, 9));
		assert_true(condition_holds(&clear->condition, 0));
		assert_true(test->restore_count > 0);
		assert_int_equal(test->checks[0].limit_count, 1);
	}
	arena_release(&f.arena);
}

static void every_direction_is_proven_at_its_low_command(void **state)
{
	(void)state;
	struct fixture f;
	load_with(&f, SOURCE_DIR "/rigs/model-spm.yaml", SOURCE_DIR "/suites/smoke.yaml", NULL, 0);
	const struct test *test = test_named(&f, "bench/direction-1");
	const struct step *command = step_of_kind(test, STEP_SET, 1); /* after its preparation */
	assert_int_equal(command->assigns[0].channel, rig_channel_find(f.rig, "speed_command", 13));
	assert_near(command->assigns[0].value, 100, 0, "rpm");
	assert_string_equal(test->checks[0].kind->name, "same_sign");
	assert_near(test->restore[0].assigns[0].value, 0, 0, "rpm");
	test = test_named(&f, "bench/direction-2");
	assert_near(step_of_kind(test, STEP_SET, 1)->assigns[0].value, 0.4, 1e-15, "Nm");
	arena_release(&f.arena);
}

/* --- what is read ---------------------------------------------------------- */

static bool reads(const struct rig *rig, const unsigned char *set, const char *name)
{
	return set[rig_channel_find(rig, name, strlen(name))];
}

static void a_test_reads_its_samples_interlocks_and_life_counters(void **state)
{
	(void)state;
	struct fixture f;
	load_with(&f, SOURCE_DIR "/rigs/model-spm.yaml", SOURCE_DIR "/suites/release.yaml", NULL, 0);
	unsigned char *set = arena_alloc(&f.arena, f.rig->channel_count);
	test_channels(f.rig, test_named(&f, "ALN-01"), set);
	assert_true(reads(f.rig, set, "phase_b")); /* an input of bench_angle */
	assert_true(reads(f.rig, set, "rotor_angle"));
	assert_true(reads(f.rig, set, "analyser_life"));
	assert_true(reads(f.rig, set, "life_counter"));
	assert_true(reads(f.rig, set, "bench_speed")); /* an interlock */
	assert_false(reads(f.rig, set, "winding_temperature"));
	assert_false(reads(f.rig, set, "load_life")); /* nothing else of it is read */
	memset(set, 0, f.rig->channel_count);
	idle_channels(f.rig, set);
	assert_true(reads(f.rig, set, "bench_speed"));
	assert_true(reads(f.rig, set, "fault_code")); /* of `before` */
	assert_true(reads(f.rig, set, "transducer_life"));
	assert_false(reads(f.rig, set, "phase_a"));
	arena_release(&f.arena);
}

/* --- memory ---------------------------------------------------------------- */

static void memory_that_runs_out_is_told_at_every_allocation(void **state)
{
	(void)state;
	bool done = false;
	for (long n = 1; !done && n < 20000; n += n < 200 ? 1 : 17) {
		struct arena arena, rig_arena;
		struct faults faults = {0};
		struct err err = {0};
		const struct rig *rig = NULL;
		struct suite *suite = NULL;
		arena_init(&arena, 0);
		arena_init(&rig_arena, 0);
		assert_int_equal(rig_load(GOLDEN "rig.yaml", &rig_arena, &faults, &rig, &err), 0);
		assert_non_null(rig);
		arena_fail_at(n);
		int rc = suite_load(GOLDEN "suite.yaml", rig, NULL, 0, &arena, &faults, &suite, &err);
		arena_fail_at(0);
		if (rc < 0) {
			assert_int_equal(err.code, ERR_NOMEM);
			assert_null(suite);
		} else {
			assert_non_null(suite); /* a fault would blame the file */
			done = true;
		}
		arena_release(&arena);
		arena_release(&rig_arena);
	}
	assert_true(done);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, setup, teardown)

int main(void)
{
	const struct CMUnitTest tests[] = {
	    TEST(sweeps_and_repeats_become_cases_in_the_order_of_nested_loops),
	    TEST(a_limit_tabled_over_the_sweep_takes_the_entry_of_its_point),
	    TEST(the_repeats_of_a_point_share_their_population),
	    TEST(values_of_a_sweep_reach_steps_and_checks),
	    TEST(names_in_a_title_are_replaced_and_other_dollars_are_kept),
	    TEST(limits_are_in_the_unit_of_their_metric),
	    TEST(decision_and_requirement_come_from_the_nearest_place),
	    TEST(options_of_a_limit_reach_the_parameters),
	    TEST(samples_are_of_the_test_else_of_the_suite),
	    cmocka_unit_test(checks_of_one_kind_have_names_of_their_own),
	    cmocka_unit_test(overrides_replace_values_and_are_told),
	    cmocka_unit_test(the_release_suite_is_whole_and_short),
	    cmocka_unit_test(the_smoke_suite_is_under_15_s),
	    cmocka_unit_test(every_watchdog_is_proven_by_silence),
	    cmocka_unit_test(every_direction_is_proven_at_its_low_command),
	    cmocka_unit_test(a_test_reads_its_samples_interlocks_and_life_counters),
	    cmocka_unit_test(memory_that_runs_out_is_told_at_every_allocation),
	};
	return RUN_GROUP(tests);
}
