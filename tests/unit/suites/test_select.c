/* SPDX-License-Identifier: Apache-2.0 */
/* Selection by name, tag and part, over suites made by hand. */
#include "suite.h"

#include <stdio.h>
#include <string.h>

#include "near.h"

enum { TESTS = 24 };

struct fixture {
	struct suite suite;
	struct test tests[TESTS];
	struct step holds[TESTS];
	char names[TESTS][16];
};

/* Two bench tests, then T-2 ... T-23 that hold for (number + 1) * 100 ms. */
static void make(struct fixture *f)
{
	memset(f, 0, sizeof *f);
	for (int i = 0; i < TESTS; i++) {
		(void)snprintf(f->names[i], sizeof f->names[i], "T-%d", i);
		f->holds[i] =
		    (struct step){.kind = STEP_HOLD, .duration_ns = (i + 1) * 100 * NS_PER_MS, .mark = -1};
		f->tests[i] = (struct test){.name = f->names[i],
		                            .base = f->names[i],
		                            .bench = i < 2,
		                            .stimulus = &f->holds[i],
		                            .stimulus_count = 1};
	}
	f->tests[0].name = f->tests[0].base = "bench/watchdog:drive";
	f->tests[1].name = f->tests[1].base = "bench/direction";
	f->suite = (struct suite){.name = "s", .tests = f->tests, .test_count = TESTS};
}

static int select_only(struct fixture *f, const char *pattern, struct err *err)
{
	const char *only[] = {pattern};
	struct selection selection = {.only = only, .only_count = 1};
	return suite_select(&f->suite, &selection, err);
}

static size_t selected(const struct fixture *f)
{
	size_t all;
	size_t count = suite_selected(&f->suite, &all);
	assert_int_equal(all, TESTS - 2);
	return count;
}

static void without_a_selection_everything_is_selected(void **state)
{
	(void)state;
	struct fixture f;
	struct err err = {0};
	struct selection all = {0};
	make(&f);
	assert_int_equal(suite_select(&f.suite, &all, &err), 0);
	assert_int_equal(selected(&f), TESTS - 2);
	/* Sum of 100 ms * (1 + 2 + ... + 24). */
	assert_int_equal(f.suite.duration_ns, 300 * 100 * NS_PER_MS);
}

static void names_and_globs_select(void **state)
{
	(void)state;
	static const struct {
		const char *pattern;
		size_t count;
	} ROWS[] = {{"T-7", 1},  {"T-1*", 10}, {"*", 22},     {"*-2", 1},
	            {"T-*3", 3}, {"T*2*", 6},  {"bench/*", 0}};
	for (size_t i = 0; i < FIELD_COUNT(ROWS); i++) {
		struct fixture f;
		struct err err = {0};
		make(&f);
		if (select_only(&f, ROWS[i].pattern, &err) < 0)
			fail_msg("%s: %s", ROWS[i].pattern, err.message);
		if (selected(&f) != ROWS[i].count)
			fail_msg("%s selects %zu, expected %zu", ROWS[i].pattern, selected(&f), ROWS[i].count);
	}
}

static void a_base_name_selects_all_points_of_a_sweep(void **state)
{
	(void)state;
	struct fixture f;
	struct err err = {0};
	make(&f);
	f.tests[5].name = "ANG[speed=1rpm]";
	f.tests[6].name = "ANG[speed=2rpm]";
	f.tests[5].base = f.tests[6].base = "ANG";
	assert_int_equal(select_only(&f, "ANG", &err), 0);
	assert_int_equal(selected(&f), 2);
	assert_int_equal(select_only(&f, "ANG[speed=2rpm]", &err), 0);
	assert_int_equal(selected(&f), 1);
	assert_true(f.tests[6].selected);
}

static void bench_tests_are_always_selected(void **state)
{
	(void)state;
	struct fixture f;
	struct err err = {0};
	make(&f);
	assert_int_equal(select_only(&f, "T-9", &err), 0);
	assert_true(f.tests[0].selected && f.tests[1].selected);
	assert_int_equal(selected(&f), 1);
}

static void a_chain_is_selected_as_a_whole(void **state)
{
	(void)state;
	struct fixture f;
	struct err err = {0};
	make(&f);
	f.tests[8].continues = f.tests[9].continues = true;
	assert_int_equal(select_only(&f, "T-8", &err), 0);
	assert_int_equal(selected(&f), 3);
	assert_true(f.tests[7].selected && f.tests[8].selected && f.tests[9].selected);
}

static void what_matches_nothing_is_a_usage_error(void **state)
{
	(void)state;
	struct fixture f;
	struct err err = {0};
	make(&f);
	assert_int_equal(select_only(&f, "T-99*", &err), -1);
	assert_int_equal(err.code, ERR_USAGE);
	struct err tag_err = {0};
	const char *tags[] = {"nowhere"};
	struct selection selection = {.tags = tags, .tag_count = 1};
	assert_int_equal(suite_select(&f.suite, &selection, &tag_err), -1);
	assert_int_equal(tag_err.code, ERR_USAGE);
	struct err near_err = {0};
	assert_int_equal(select_only(&f, "bench/directon", &near_err), -1);
	assert_non_null(strstr(near_err.message, "bench/direction"));
}

static void tags_and_names_must_both_match(void **state)
{
	(void)state;
	struct fixture f;
	struct err err = {0};
	const char *angle[] = {"angle"}, *only[] = {"T-1*"};
	make(&f);
	for (int i = 11; i < 16; i++) {
		f.tests[i].tags = angle;
		f.tests[i].tag_count = 1;
	}
	f.tests[3].tags = angle;
	f.tests[3].tag_count = 1;
	struct selection selection = {.tags = angle, .tag_count = 1};
	assert_int_equal(suite_select(&f.suite, &selection, &err), 0);
	assert_int_equal(selected(&f), 6);
	selection.only = only;
	selection.only_count = 1;
	assert_int_equal(suite_select(&f.suite, &selection, &err), 0);
	assert_int_equal(selected(&f), 5);
}

static void parts_are_disjoint_complete_and_balanced(void **state)
{
	(void)state;
	struct fixture f;
	make(&f);
	f.tests[5].continues = f.tests[6].continues = f.tests[12].continues = true;
	for (int parts = 1; parts <= 6; parts++) {
		int taken[TESTS] = {0};
		int64_t least = INT64_MAX, most = 0;
		for (int part = 1; part <= parts; part++) {
			struct err err = {0};
			struct selection selection = {.part = part, .parts = parts};
			assert_int_equal(suite_select(&f.suite, &selection, &err), 0);
			int64_t duration = 0;
			for (int i = 2; i < TESTS; i++) {
				taken[i] += f.tests[i].selected;
				if (f.tests[i].selected)
					duration += f.holds[i].duration_ns;
				if (f.tests[i].continues)
					assert_int_equal(f.tests[i].selected, f.tests[i - 1].selected);
			}
			least = duration < least ? duration : least;
			most = duration > most ? duration : most;
		}
		for (int i = 2; i < TESTS; i++)
			assert_int_equal(taken[i], 1);
		/* Longest first: the parts differ by no more than one unit, here 2.4 s. */
		assert_true(most - least <= 2400 * NS_PER_MS);
	}
}

static void parts_of_a_selection_share_that_selection(void **state)
{
	(void)state;
	struct fixture f;
	const char *only[] = {"T-1*"};
	make(&f);
	size_t sum = 0;
	for (int part = 1; part <= 3; part++) {
		struct err err = {0};
		struct selection selection = {.only = only, .only_count = 1, .part = part, .parts = 3};
		assert_int_equal(suite_select(&f.suite, &selection, &err), 0);
		sum += selected(&f);
		assert_in_range(selected(&f), 2, 5);
	}
	assert_int_equal(sum, 10);
}

static void impossible_parts_are_usage_errors(void **state)
{
	(void)state;
	static const int ROWS[][2] = {{0, 5}, {6, 5}, {-1, 5}, {1, -2}, {1, 5000}, {30, 30}};
	for (size_t i = 0; i < FIELD_COUNT(ROWS); i++) {
		struct fixture f;
		struct err err = {0};
		struct selection selection = {.part = ROWS[i][0], .parts = ROWS[i][1]};
		make(&f);
		assert_int_equal(suite_select(&f.suite, &selection, &err), -1);
		assert_int_equal(err.code, ERR_USAGE);
	}
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(without_a_selection_everything_is_selected),
	    cmocka_unit_test(names_and_globs_select),
	    cmocka_unit_test(a_base_name_selects_all_points_of_a_sweep),
	    cmocka_unit_test(bench_tests_are_always_selected),
	    cmocka_unit_test(a_chain_is_selected_as_a_whole),
	    cmocka_unit_test(what_matches_nothing_is_a_usage_error),
	    cmocka_unit_test(tags_and_names_must_both_match),
	    cmocka_unit_test(parts_are_disjoint_complete_and_balanced),
	    cmocka_unit_test(parts_of_a_selection_share_that_selection),
	    cmocka_unit_test(impossible_parts_are_usage_errors),
	};
	return RUN_GROUP(tests);
}
