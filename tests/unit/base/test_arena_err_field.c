/* SPDX-License-Identifier: Apache-2.0 */
/* Memory that lives and dies together, errors that are kept, tables of fields. */
#include "near.h"

#include <stdalign.h>
#include <stdint.h>
#include <string.h>

#include "arena.h"
#include "err.h"
#include "field.h"

static void gives_zeroed_aligned_memory(void **state)
{
	(void)state;
	struct arena arena;
	arena_init(&arena, 0);
	for (size_t size = 1; size < 300000; size = size * 3 + 1) {
		unsigned char *bytes = arena_alloc(&arena, size);
		assert_non_null(bytes);
		assert_int_equal((uintptr_t)bytes % alignof(max_align_t), 0);
		for (size_t i = 0; i < size; i += 97)
			assert_int_equal(bytes[i], 0);
		memset(bytes, 0xA5, size);
	}
	arena_release(&arena);
	arena_release(&arena);
	arena_release(NULL);
}

static void refuses_more_than_its_maximum(void **state)
{
	(void)state;
	struct arena arena;
	arena_init(&arena, 1000);
	assert_non_null(arena_alloc(&arena, 900));
	assert_null(arena_alloc(&arena, 200));
	arena_clear(&arena);
	assert_non_null(arena_alloc(&arena, 900));
	arena_release(&arena);
}

static void refuses_products_that_overflow(void **state)
{
	(void)state;
	struct arena arena;
	arena_init(&arena, SIZE_MAX);
	assert_null(arena_array(&arena, SIZE_MAX / 2, 3));
	assert_null(arena_array(&arena, (size_t)1 << 33, (size_t)1 << 33));
	assert_null(arena_alloc(&arena, SIZE_MAX));
	assert_non_null(arena_array(&arena, 0, 8));
	arena_release(&arena);
}

static void copies_and_prints_text(void **state)
{
	(void)state;
	struct arena arena;
	arena_init(&arena, 0);
	assert_string_equal(arena_strndup(&arena, "speed_command", 5), "speed");
	assert_string_equal(arena_strdup(&arena, ""), "");
	assert_string_equal(arena_printf(&arena, "%s-%d", "refused", 3), "refused-3");
	arena_release(&arena);
}

static void fails_from_the_nth_allocation_on(void **state)
{
	(void)state;
	struct arena arena;
	arena_init(&arena, 0);
	arena_fail_at(3);
	assert_non_null(arena_alloc(&arena, 8));
	assert_non_null(arena_strdup(&arena, "x"));
	assert_null(arena_alloc(&arena, 8));
	assert_null(arena_printf(&arena, "x"));
	arena_fail_at(0);
	assert_non_null(arena_alloc(&arena, 8));
	arena_release(&arena);
}

static void keeps_the_first_error(void **state)
{
	(void)state;
	struct err err = {0};
	assert_int_equal(err_set_at(&err, ERR_FILE, "rig.yaml", 12, 9, "unknown key '%s'", "x"), -1);
	assert_int_equal(err_set(&err, ERR_NOMEM, "later"), -1);
	assert_int_equal(err.code, ERR_FILE);
	assert_string_equal(err.message, "unknown key 'x'");
	assert_string_equal(err.file, "rig.yaml");
	assert_int_equal(err.line, 12);
	assert_int_equal(err.column, 9);
	assert_int_equal(err_set(NULL, ERR_STATE, "nobody listens"), -1);
}

static void cuts_long_messages(void **state)
{
	(void)state;
	struct err err = {0};
	(void)err_set(&err, ERR_STATE, "%2000d", 1);
	assert_int_equal(strlen(err.message), sizeof err.message - 1);
}

static const struct field FIELDS[] = {
    {.key = "timeout", .kind = FIELD_DURATION, .least = 1e6, .most = 1e9, .text = ""},
    {.key = "share", .kind = FIELD_QUANTITY, .dimension = &DIM_NUMBER, .most = 0.5, .text = ""},
    {.key = "speed", .kind = FIELD_QUANTITY, .dimension = &DIM_TORQUE, .most = 3, .text = ""},
    {.key = "count", .kind = FIELD_INTEGER, .least = 1, .most = 9, .text = ""},
    {.key = "above", .kind = FIELD_NUMBER, .flags = FIELD_POSITIVE, .text = ""},
    {.key = "any", .kind = FIELD_NUMBER, .text = ""},
};
static const struct field_table TABLE = {"thing", "", FIELDS, FIELD_COUNT(FIELDS)};

static void finds_fields_and_near_ones(void **state)
{
	(void)state;
	assert_ptr_equal(field_find(&TABLE, "count", 5), &FIELDS[3]);
	assert_ptr_equal(field_find(&TABLE, "counter", 5), &FIELDS[3]);
	assert_null(field_find(&TABLE, "coun", 4));
	assert_string_equal(field_nearest(&TABLE, "tiemout", 7), "timeout");
	assert_null(field_nearest(&TABLE, "colour", 6));
	char longer[200];
	memset(longer, 'x', sizeof longer);
	assert_null(field_nearest(&TABLE, longer, sizeof longer));
}

static void writes_bounds_in_the_units_of_the_field(void **state)
{
	(void)state;
	static const char *const expected[] = {"between 1 ms and 1 s",
	                                       "between 0 and 50 %",
	                                       "between 0 and 3 Nm",
	                                       "between 1 and 9",
	                                       "above 0",
	                                       ""};
	for (size_t i = 0; i < FIELD_COUNT(FIELDS); i++) {
		char buffer[128];
		assert_string_equal(field_bounds_text(&FIELDS[i], buffer, sizeof buffer), expected[i]);
	}
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(gives_zeroed_aligned_memory),
	    cmocka_unit_test(refuses_more_than_its_maximum),
	    cmocka_unit_test(refuses_products_that_overflow),
	    cmocka_unit_test(copies_and_prints_text),
	    cmocka_unit_test(fails_from_the_nth_allocation_on),
	    cmocka_unit_test(keeps_the_first_error),
	    cmocka_unit_test(cuts_long_messages),
	    cmocka_unit_test(finds_fields_and_near_ones),
	    cmocka_unit_test(writes_bounds_in_the_units_of_the_field),
	};
	return RUN_GROUP(tests);
}
