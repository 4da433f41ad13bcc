/* SPDX-License-Identifier: Apache-2.0 */
/* How faults are collected and shown: order, caret, tabs, long and hostile lines. */
#include "loaded.h"

static struct faults faults;

static void printed(const char *expected)
{
	struct text out;
	text_init(&out, 0);
	faults_print(&faults, &out);
	assert_string_equal(text_string(&out), expected);
	text_release(&out);
}

static struct yaml_file file_of(const char *text)
{
	memset(&faults, 0, sizeof faults);
	return (struct yaml_file){.path = "rig.yaml", .bytes = text, .length = strlen(text)};
}

static void points_at_the_place(void **state)
{
	(void)state;
	struct yaml_file file = file_of("rig: a\nlinks: {wire: x}\n");
	faults_add(&faults, (struct position){&file, 2, 9}, "unknown key '%s'", "wire");
	printed("rig.yaml:2:9: unknown key 'wire'\n"
	        "     2 | links: {wire: x}\n"
	        "       |         ^\n");
}

static void sorts_by_position(void **state)
{
	(void)state;
	struct yaml_file file = file_of("a\nb\n");
	faults_add(&faults, (struct position){&file, 2, 1}, "third");
	faults_add(&faults, (struct position){&file, 1, 2}, "second");
	faults_add(&faults, (struct position){&file, 1, 1}, "first");
	printed("rig.yaml:1:1: first\n     1 | a\n       | ^\n"
	        "rig.yaml:1:2: second\n     1 | a\n       |  ^\n"
	        "rig.yaml:2:1: third\n     2 | b\n       | ^\n");
}

static void keeps_files_together(void **state)
{
	(void)state;
	struct yaml_file rig = file_of("a\nb\n"), suite = rig;
	suite.path = "suite.yaml";
	faults_add(&faults, (struct position){&rig, 2, 1}, "of the rig");
	faults_add(&faults, (struct position){&suite, 1, 1}, "of the suite");
	faults_add(&faults, (struct position){&rig, 1, 1}, "of the rig too");
	printed("rig.yaml:1:1: of the rig too\n     1 | a\n       | ^\n"
	        "rig.yaml:2:1: of the rig\n     2 | b\n       | ^\n"
	        "suite.yaml:1:1: of the suite\n     1 | a\n       | ^\n");
}

static void says_what_has_no_place(void **state)
{
	(void)state;
	struct yaml_file file = file_of("a\n");
	faults_add(&faults, (struct position){0}, "--set x: nothing uses it");
	faults_add(&faults, (struct position){.file = &file}, "there are no interlocks");
	printed("--set x: nothing uses it\n"
	        "rig.yaml: there are no interlocks\n");
}

static void adds_the_same_fault_once(void **state)
{
	(void)state;
	struct yaml_file file = file_of("a\n");
	for (int i = 0; i < 100; i++)
		faults_add(&faults, (struct position){&file, 1, 1}, "again");
	assert_int_equal(faults_total(&faults), 1);
}

static void counts_what_is_too_much(void **state)
{
	(void)state;
	struct yaml_file file = file_of("a\n");
	for (int i = 0; i < FAULTS_MOST + 5; i++)
		faults_add(&faults, (struct position){&file, 1, 1}, "fault %d", i);
	assert_int_equal(faults.count, FAULTS_MOST);
	assert_int_equal(faults_total(&faults), FAULTS_MOST + 5);
	struct text out;
	text_init(&out, 0);
	faults_print(&faults, &out);
	assert_non_null(strstr(text_string(&out), "... and 5 more\n"));
	text_release(&out);
}

static void places_the_caret_by_display_width(void **state)
{
	(void)state;
	/* Two wide characters, then e with a combining accent: 5 columns before the x. */
	struct yaml_file file = file_of("\xE6\x97\xA5\xE6\x9C\xAC"
	                                "e\xCC\x81x\n");
	faults_add(&faults, (struct position){&file, 1, 5}, "here");
	printed("rig.yaml:1:5: here\n"
	        "     1 | \xE6\x97\xA5\xE6\x9C\xAC"
	        "e\xCC\x81x\n"
	        "       |      ^\n");
}

static void expands_tabs(void **state)
{
	(void)state;
	struct yaml_file file = file_of("\tab\tc\n");
	faults_add(&faults, (struct position){&file, 1, 5}, "here");
	printed("rig.yaml:1:5: here\n"
	        "     1 |     ab  c\n"
	        "       |         ^\n");
}

static void shows_control_characters(void **state)
{
	(void)state;
	struct yaml_file file = file_of("a\x1b[2Jb\xff"
	                                "c\n");
	faults_add(&faults, (struct position){&file, 1, 6}, "key '%s'", "\x1b[2J\n\t\xE2\x80\xAE");
	printed("rig.yaml:1:6: key '\\x1b[2J\\n\\t\\u202e'\n"
	        "     1 | a\\x1b[2Jb\xEF\xBF\xBD"
	        "c\n"
	        "       |         ^\n");
}

static void points_behind_the_end_of_a_line(void **state)
{
	(void)state;
	struct yaml_file file = file_of("ab\r\ncd");
	faults_add(&faults, (struct position){&file, 1, 30}, "first");
	faults_add(&faults, (struct position){&file, 2, 3}, "second");
	faults_add(&faults, (struct position){&file, 9, 1}, "beyond the file");
	printed("rig.yaml:1:30: first\n     1 | ab\n       |   ^\n"
	        "rig.yaml:2:3: second\n     2 | cd\n       |   ^\n"
	        "rig.yaml:9:1: beyond the file\n");
}

static void cuts_long_lines_around_the_caret(void **state)
{
	(void)state;
	char line[1001];
	for (int i = 0; i < 1000; i++)
		line[i] = (char)('a' + i % 26);
	line[1000] = '\0';
	for (int column = 1; column <= 1000; column += 37) {
		struct yaml_file file = file_of(line);
		faults_add(&faults, (struct position){&file, 1, column}, "here");
		struct text out;
		text_init(&out, 0);
		faults_print(&faults, &out);
		/* The character above the caret is that of the column. */
		const char *source = strchr(text_string(&out), '\n') + 1;
		const char *caret_line = strchr(source, '\n') + 1;
		size_t caret = strcspn(caret_line, "^");
		assert_int_equal(source[caret], line[column - 1]);
		assert_true(strlen(source) < 250);
		text_release(&out);
	}
}

static void quotes_text_of_files_safely(void **state)
{
	(void)state;
	char buffer[YAML_SHOWN];
	assert_string_equal(yaml_shown("abc", 3, buffer), "abc");
	assert_string_equal(yaml_shown("a\nb\tc\x1b", 6, buffer), "a\\nb\\tc\\x1b");
	assert_string_equal(yaml_shown("0123456789012345678901234567890123456789x", 41, buffer),
	                    "0123456789012345678901234567890123456789...");
	char wide[4 * 60 + 1] = "";
	for (int i = 0; i < 60; i++)
		memcpy(wide + 4 * i, "\xF0\x9F\x9A\x80", 5);
	(void)yaml_shown(wide, strlen(wide), buffer);
	assert_int_equal(strlen(buffer), 4 * 40 + 3);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(points_at_the_place),
	    cmocka_unit_test(sorts_by_position),
	    cmocka_unit_test(keeps_files_together),
	    cmocka_unit_test(says_what_has_no_place),
	    cmocka_unit_test(adds_the_same_fault_once),
	    cmocka_unit_test(counts_what_is_too_much),
	    cmocka_unit_test(places_the_caret_by_display_width),
	    cmocka_unit_test(expands_tabs),
	    cmocka_unit_test(shows_control_characters),
	    cmocka_unit_test(points_behind_the_end_of_a_line),
	    cmocka_unit_test(cuts_long_lines_around_the_caret),
	    cmocka_unit_test(quotes_text_of_files_safely),
	};
	return RUN_GROUP(tests);
}
