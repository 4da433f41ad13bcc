/* SPDX-License-Identifier: Apache-2.0 */
/* Conditions followed row by row: dwell, missing values, and what each kind errs towards. */
#include "near.h"
#include "watch.h"

static struct watch started(enum watch_kind kind, struct condition condition)
{
	struct watch watch;
	watch_start(&watch, kind, &condition, 0);
	return watch;
}

static void await_without_dwell_fires_at_the_first_true_row(void **state)
{
	(void)state;
	struct watch watch = started(WATCH_AWAIT, (struct condition){.kind = CONDITION_ABOVE, .a = 10});
	watch_row(&watch, 0, 5, 9);
	assert_false(watch.fired);
	watch_row(&watch, 10, 15, 11);
	assert_true(watch.fired);
	/* It became true after the last false row began, and before the true one was there. */
	assert_int_equal(watch.became_earliest_ns, 0);
	assert_int_equal(watch.became_latest_ns, 15);
}

static void await_must_surely_have_lasted(void **state)
{
	(void)state;
	struct watch watch =
	    started(WATCH_AWAIT, (struct condition){.kind = CONDITION_BELOW, .a = 1, .for_ns = 100});
	watch_row(&watch, 0, 40, 0);    /* first true: surely from 40 on */
	watch_row(&watch, 130, 170, 0); /* surely true until 130: 90 long */
	assert_false(watch.fired);
	watch_row(&watch, 140, 180, 0);
	assert_true(watch.fired);
}

static void missing_value_restarts_an_await(void **state)
{
	(void)state;
	struct watch watch =
	    started(WATCH_AWAIT, (struct condition){.kind = CONDITION_BELOW, .a = 1, .for_ns = 100});
	watch_row(&watch, 0, 10, 0);
	watch_row(&watch, 60, 70, (double)NAN);
	watch_row(&watch, 120, 130, 0);
	assert_false(watch.fired);
	watch_row(&watch, 229, 239, 0);
	assert_false(watch.fired);
	watch_row(&watch, 230, 240, 0);
	assert_true(watch.fired);
}

static void rows_from_before_do_not_count_for_an_await(void **state)
{
	(void)state;
	struct condition condition = {.kind = CONDITION_IS, .a = 3};
	struct watch watch;
	watch_start(&watch, WATCH_AWAIT, &condition, 100);
	watch_row(&watch, 90, 110, 3); /* may have been read before */
	assert_false(watch.fired);
	watch_row(&watch, 100, 120, 3);
	assert_true(watch.fired);
}

static void interlock_fires_when_it_may_have_lasted(void **state)
{
	(void)state;
	struct watch watch =
	    started(WATCH_INTERLOCK,
	            (struct condition){.kind = CONDITION_BETWEEN, .a = -5, .b = 5, .for_ns = 100});
	watch_row(&watch, 0, 40, 9);
	assert_false(watch.fired);
	watch_row(&watch, 50, 99, 9);
	assert_false(watch.fired);
	watch_row(&watch, 60, 100, 9); /* from 0 to 100 at the longest */
	assert_true(watch.fired);
}

static void interlock_survives_a_missing_value(void **state)
{
	(void)state;
	struct watch watch = started(
	    WATCH_INTERLOCK, (struct condition){.kind = CONDITION_BELOW, .a = 120, .for_ns = 50});
	watch_row(&watch, 0, 10, 130);
	watch_row(&watch, 20, 30, (double)NAN);
	watch_row(&watch, 50, 60, 130);
	assert_true(watch.fired);
}

static void interlock_forgets_a_short_violation(void **state)
{
	(void)state;
	struct watch watch = started(
	    WATCH_INTERLOCK, (struct condition){.kind = CONDITION_BELOW, .a = 120, .for_ns = 50});
	watch_row(&watch, 0, 10, 130);
	watch_row(&watch, 20, 30, 100);
	watch_row(&watch, 40, 60, 130);
	assert_false(watch.fired);
}

static void nan_never_fulfils_an_await(void **state)
{
	(void)state;
	const enum condition_kind kinds[] = {CONDITION_IS, CONDITION_ABOVE, CONDITION_BELOW,
	                                     CONDITION_BETWEEN};
	for (size_t i = 0; i < 4; i++) {
		struct watch watch =
		    started(WATCH_AWAIT, (struct condition){.kind = kinds[i], .a = -1e9, .b = 1e9});
		watch_row(&watch, 0, 1, (double)NAN);
		assert_false(watch.fired);
	}
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(await_without_dwell_fires_at_the_first_true_row),
	    cmocka_unit_test(await_must_surely_have_lasted),
	    cmocka_unit_test(missing_value_restarts_an_await),
	    cmocka_unit_test(rows_from_before_do_not_count_for_an_await),
	    cmocka_unit_test(interlock_fires_when_it_may_have_lasted),
	    cmocka_unit_test(interlock_survives_a_missing_value),
	    cmocka_unit_test(interlock_forgets_a_short_violation),
	    cmocka_unit_test(nan_never_fulfils_an_await),
	};
	return RUN_GROUP(tests);
}
