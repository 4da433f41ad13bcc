/* SPDX-License-Identifier: Apache-2.0 */
/* YAML files as trees with positions; what is refused is also in tests/golden/yaml-*. */
#include "loaded.h"

#include <stdlib.h>
#include <unistd.h>

static void keeps_order_text_and_positions(void **state)
{
	(void)state;
	struct loaded loaded;
	loaded_init(&loaded, "rig: small\nlist:\n  - 1500 rpm\n  - {a: \"5\", b: }\n");
	assert_non_null(loaded.root);
	const struct yaml_node *root = loaded.root;
	assert_int_equal(root->kind, YAML_MAPPING);
	assert_int_equal(root->count, 2);
	assert_string_equal(root->pairs[0].key->text, "rig");
	const struct yaml_node *list = yaml_get(root, "list");
	assert_int_equal(list->kind, YAML_SEQUENCE);
	assert_int_equal(list->count, 2);
	const struct yaml_node *speed = list->items[0];
	assert_string_equal(speed->text, "1500 rpm");
	assert_int_equal(speed->length, 8);
	assert_false(speed->quoted);
	assert_int_equal(speed->at.line, 3);
	assert_int_equal(speed->at.column, 5);
	assert_string_equal(speed->at.file->path, "t.yaml");
	assert_true(yaml_get(list->items[1], "a")->quoted);
	assert_int_equal(yaml_get(list->items[1], "b")->length, 0);
	assert_null(yaml_get(list->items[1], "c"));
	assert_null(yaml_get(list, "a"));
	assert_null(yaml_get(NULL, "a"));
	loaded_release(&loaded);
}

static void counts_columns_in_code_points(void **state)
{
	(void)state;
	struct loaded loaded;
	loaded_init(&loaded, "{\xE6\x97\xA5\xE6\x9C\xAC: 1, x: y}\n");
	assert_int_equal(yaml_get(loaded.root, "x")->at.column, 12);
	loaded_release(&loaded);
}

static void takes_block_scalars_as_quoted(void **state)
{
	(void)state;
	struct loaded loaded;
	loaded_init(&loaded, "a: |\n  12\n  13\nb: >-\n  x\n  y\nc: 'z'\n");
	assert_string_equal(yaml_get(loaded.root, "a")->text, "12\n13\n");
	assert_true(yaml_get(loaded.root, "a")->quoted);
	assert_string_equal(yaml_get(loaded.root, "b")->text, "x y");
	assert_true(yaml_get(loaded.root, "c")->quoted);
	loaded_release(&loaded);
}

static void allows_64_levels_and_refuses_the_next(void **state)
{
	(void)state;
	for (int depth = 64; depth <= 65; depth++) {
		char text[200] = "";
		for (int i = 0; i < depth; i++) {
			text[i] = '[';
			text[depth + i] = ']';
		}
		struct loaded loaded;
		loaded_init(&loaded, text);
		assert_int_equal(loaded.rc, 0);
		if (depth == 64)
			assert_non_null(loaded.root);
		else
			assert_fault(&loaded, 1, 65, "64 levels");
		loaded_release(&loaded);
	}
}

/* Left to itself the parser needs seconds for this file; the test's time limit is the check. */
static void ends_early_on_a_file_of_brackets(void **state)
{
	(void)state;
	size_t length = YAML_BYTES_MOST;
	char *text = malloc(length);
	assert_non_null(text);
	for (int kind = 0; kind < 2; kind++) {
		for (size_t i = 0; i < length; i++)
			text[i] = kind == 0 ? '[' : "- "[i % 2];
		struct loaded loaded;
		loaded_init_bytes(&loaded, text, length);
		assert_fault(&loaded, 1, kind == 0 ? 65 : 129, "64 levels");
		loaded_release(&loaded);
	}
	free(text);
}

static void finds_duplicates_among_very_many_keys(void **state)
{
	(void)state;
	struct text text;
	text_init(&text, 0);
	for (int i = 0; i < 90000; i++)
		text_printf(&text, "k%d:\n", i);
	text_puts(&text, "k17:\n");
	struct loaded loaded;
	loaded_init(&loaded, text_string(&text));
	assert_fault(&loaded, 90001, 1, "the first is in line 18");
	assert_int_equal(loaded.faults.count, 1);
	loaded_release(&loaded);
	text_release(&text);
}

static void refuses_a_file_above_1_mib(void **state)
{
	(void)state;
	char *text = malloc(YAML_BYTES_MOST + 1);
	assert_non_null(text);
	memset(text, '#', YAML_BYTES_MOST + 1);
	struct loaded loaded;
	loaded_init_bytes(&loaded, text, YAML_BYTES_MOST + 1);
	assert_int_equal(loaded.rc, -1);
	assert_int_equal(loaded.err.code, ERR_FILE);
	assert_non_null(strstr(loaded.err.message, "1 MiB"));
	loaded_release(&loaded);
	free(text);
}

static void says_which_file_cannot_be_read(void **state)
{
	(void)state;
	struct loaded loaded;
	loaded_init(&loaded, "a: 1\n");
	static const char *const paths[] = {"/nowhere/rig.yaml", "/"};
	for (size_t i = 0; i < 2; i++) {
		struct err err = {0};
		assert_int_equal(
		    yaml_load(paths[i], &loaded.arena, &loaded.faults, &loaded.file, &loaded.root, &err),
		    -1);
		assert_int_equal(err.code, ERR_FILE);
		assert_string_equal(err.file, paths[i]);
		assert_non_null(strstr(err.message, "cannot be"));
	}
	loaded_release(&loaded);
}

static void reads_on_after_what_can_be_left_out(void **state)
{
	(void)state;
	struct loaded loaded;
	loaded_init(&loaded, "a: &x 1\nb: *x\nc: !t 2\n<<: {}\na: 3\n");
	assert_null(loaded.root);
	assert_int_equal(loaded.faults.count, 5);
	loaded_release(&loaded);
}

static void places_bytes_that_the_parser_cannot(void **state)
{
	(void)state;
	static const struct {
		const char *bytes;
		size_t length;
		int line, column;
		const char *part;
	} rows[] = {
	    {"a: 1\nb: \x00x\n", 10, 2, 4, "NUL"},
	    {"a: 1\nb: \x07x\n", 10, 2, 4, "U+0007"},
	    {"a: \xC3\xA9\n\xC3\xA9: \xff\n", 11, 2, 4, "0xff"},
	    {"a: 1\r\nb: \x7f\r\n", 12, 2, 4, "U+007F"},
	    {"a: 1\rb: 2\n", 10, 1, 5, "carriage return"},
	    {"a: \xE2\x80\xA8\n", 7, 1, 4, "U+2028"},
	    {"\xFE\xFF\x00"
	     "a",
	     4, 1, 1, "UTF-16"},
	    {"a: \xED\xA0\x80\n", 7, 1, 4, "0xed"},
	};
	for (size_t i = 0; i < sizeof rows / sizeof rows[0]; i++) {
		struct loaded loaded;
		loaded_init_bytes(&loaded, rows[i].bytes, rows[i].length);
		assert_fault(&loaded, rows[i].line, rows[i].column, rows[i].part);
		assert_null(loaded.root);
		loaded_release(&loaded);
	}
}

static void takes_crlf_and_a_byte_order_mark(void **state)
{
	(void)state;
	struct loaded loaded;
	loaded_init(&loaded, "\xEF\xBB\xBF"
	                     "a: 1\r\nb: 2\r\n");
	assert_int_equal(loaded.faults.count, 0);
	assert_string_equal(yaml_get(loaded.root, "a")->text, "1");
	assert_int_equal(yaml_get(loaded.root, "b")->at.line, 2);
	loaded_release(&loaded);
}

static void ends_cleanly_when_memory_runs_out(void **state)
{
	(void)state;
	const char *text = "a: {b: [1, 2, {c: d}], e: \"f\"}\ng: h\n";
	int failures = 0;
	for (long n = 1; n < 1000; n++) {
		struct loaded loaded;
		arena_fail_at(n);
		loaded_init(&loaded, text);
		arena_fail_at(0);
		bool done = loaded.rc == 0;
		if (done) {
			assert_non_null(loaded.root);
		} else {
			assert_int_equal(loaded.err.code, ERR_NOMEM);
			assert_null(loaded.root);
			failures++;
		}
		loaded_release(&loaded);
		if (done)
			break;
	}
	assert_true(failures > 20);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(keeps_order_text_and_positions),
	    cmocka_unit_test(counts_columns_in_code_points),
	    cmocka_unit_test(takes_block_scalars_as_quoted),
	    cmocka_unit_test(allows_64_levels_and_refuses_the_next),
	    cmocka_unit_test(ends_early_on_a_file_of_brackets),
	    cmocka_unit_test(finds_duplicates_among_very_many_keys),
	    cmocka_unit_test(refuses_a_file_above_1_mib),
	    cmocka_unit_test(says_which_file_cannot_be_read),
	    cmocka_unit_test(reads_on_after_what_can_be_left_out),
	    cmocka_unit_test(places_bytes_that_the_parser_cannot),
	    cmocka_unit_test(takes_crlf_and_a_byte_order_mark),
	    cmocka_unit_test(ends_cleanly_when_memory_runs_out),
	};
	return RUN_GROUP(tests);
}
