/* SPDX-License-Identifier: Apache-2.0 */
/* Text that comes from outside: what is cleaned, counted, compared and cut. */
#include "near.h"

#include <string.h>

#include "text.h"

static void decodes_well_formed_utf8(void **state)
{
	(void)state;
	static const struct {
		const char *bytes;
		size_t size;
		unsigned point;
	} rows[] = {
	    {"A", 1, 'A'},
	    {"\xC2\x80", 2, 0x80},
	    {"\xDF\xBF", 2, 0x7FF},
	    {"\xE0\xA0\x80", 3, 0x800},
	    {"\xED\x9F\xBF", 3, 0xD7FF},
	    {"\xEF\xBF\xBF", 3, 0xFFFF},
	    {"\xF0\x90\x80\x80", 4, 0x10000},
	    {"\xF4\x8F\xBF\xBF", 4, 0x10FFFF},
	};
	for (size_t i = 0; i < sizeof rows / sizeof rows[0]; i++) {
		unsigned point = 0;
		assert_int_equal(text_decode(rows[i].bytes, strlen(rows[i].bytes), &point), rows[i].size);
		assert_int_equal(point, rows[i].point);
	}
}

/* Unicode Standard, table 3-7: well-formed UTF-8 byte sequences (from memory). */
static void refuses_what_is_no_utf8(void **state)
{
	(void)state;
	static const char *const rows[] = {
	    "\x80",             /* a continuation alone */
	    "\xC0\x80",         /* overlong NUL */
	    "\xC1\xBF",         /* overlong */
	    "\xE0\x9F\xBF",     /* overlong */
	    "\xED\xA0\x80",     /* surrogate */
	    "\xF0\x8F\xBF\xBF", /* overlong */
	    "\xF4\x90\x80\x80", /* above U+10FFFF */
	    "\xF5\x80\x80\x80",
	    "\xFF",
	    "\xE2\x82",     /* cut off */
	    "\xE2\x28\xA1", /* a letter where a continuation belongs */
	};
	unsigned point;
	for (size_t i = 0; i < sizeof rows / sizeof rows[0]; i++)
		assert_int_equal(text_decode(rows[i], strlen(rows[i]), &point), 0);
	assert_int_equal(text_decode("A", 0, &point), 0);
}

static void cleans_what_a_terminal_would_obey(void **state)
{
	(void)state;
	static const struct {
		const char *bytes, *clean;
	} rows[] = {
	    {"plain \xC3\xA9", "plain \xC3\xA9"},
	    {"\x1b[31m", "\\x1b[31m"},
	    {"a\tb\nc", "a\tb\nc"},
	    {"\r\x07\x7f", "\\x0d\\x07\\x7f"},
	    {"\xC2\x9b", "\\x9b"},
	    {"\xE2\x80\xAE", "\\u202e"}, /* right-to-left override */
	    {"\xE2\x81\xA6", "\\u2066"},
	    {"\xEF\xBB\xBF", "\\ufeff"},
	    {"\xff", "\xEF\xBF\xBD"},
	};
	for (size_t i = 0; i < sizeof rows / sizeof rows[0]; i++) {
		struct text text;
		text_init(&text, 0);
		text_add_clean(&text, rows[i].bytes, strlen(rows[i].bytes));
		assert_string_equal(text_string(&text), rows[i].clean);
		text_release(&text);
	}
}

static void a_line_stays_one_line(void **state)
{
	(void)state;
	struct text text;
	const char *title = "one\npass  two\tthree\r\x1b[A";
	text_init(&text, 0);
	text_puts(&text, "kept\n");
	text_add_line(&text, title, strlen(title));
	assert_string_equal(text_string(&text), "kept\none pass  two three\\x0d\\x1b[A");
	text_release(&text);
}

static void counts_columns_of_a_terminal(void **state)
{
	(void)state;
	assert_int_equal(text_columns("abc", 3), 3);
	assert_int_equal(text_columns("e\xCC\x81", 3), 1);                /* e with a combining acute */
	assert_int_equal(text_columns("\xE6\x97\xA5\xE6\x9C\xAC", 6), 4); /* two ideographs */
	assert_int_equal(text_columns("\xEF\xBC\xA1", 3), 2);             /* full-width A */
	assert_int_equal(text_columns("\xff\xfe", 2), 2);                 /* no UTF-8: one each */
	assert_int_equal(text_columns("", 0), 0);
}

static void stops_at_its_declared_maximum(void **state)
{
	(void)state;
	struct text text;
	text_init(&text, 10);
	text_puts(&text, "123456789");
	assert_false(text.cut);
	text_puts(&text, "ab");
	assert_true(text.cut);
	assert_string_equal(text_string(&text), "123456789");
	text_clear(&text);
	assert_false(text.cut);
	text_printf(&text, "%d", 42);
	assert_string_equal(text_string(&text), "42");
	text_release(&text);
	assert_string_equal(text_string(&text), "");
}

static void measures_how_far_words_lie_apart(void **state)
{
	(void)state;
	assert_int_equal(text_distance("", ""), 0);
	assert_int_equal(text_distance("kitten", "sitting"), 3);
	assert_int_equal(text_distance("tiemout", "timeout"), 1); /* two letters exchanged */
	assert_int_equal(text_distance("abc", ""), 3);
	assert_int_equal(text_distance("speed", "speed"), 0);
}

static void suggests_near_words_only(void **state)
{
	(void)state;
	static const char *const keys[] = {"timeout", "channel", "between"};
	assert_string_equal(text_nearest("tiemout", keys, 3), "timeout");
	assert_string_equal(text_nearest("chanel", keys, 3), "channel");
	assert_null(text_nearest("colour", keys, 3));
	assert_null(text_nearest("timeout", keys, 0));
}

static void knows_names(void **state)
{
	(void)state;
	assert_true(text_is_name("a", 1));
	assert_true(text_is_name("SPD-01_b", 8));
	assert_false(text_is_name("", 0));
	assert_false(text_is_name("1a", 2));
	assert_false(text_is_name("_a", 2));
	assert_false(text_is_name("a b", 3));
	assert_false(text_is_name("a\0b", 3));
	char longest[65];
	memset(longest, 'x', sizeof longest);
	assert_true(text_is_name(longest, 64));
	assert_false(text_is_name(longest, 65));
}

static void puts_an_article_before_a_word(void **state)
{
	(void)state;
	assert_string_equal(text_article("angle"), "an");
	assert_string_equal(text_article("torque"), "a");
	assert_string_equal(text_article("unit"), "a");
	assert_string_equal(text_article(""), "a");
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(decodes_well_formed_utf8),
	    cmocka_unit_test(refuses_what_is_no_utf8),
	    cmocka_unit_test(cleans_what_a_terminal_would_obey),
	    cmocka_unit_test(a_line_stays_one_line),
	    cmocka_unit_test(counts_columns_of_a_terminal),
	    cmocka_unit_test(stops_at_its_declared_maximum),
	    cmocka_unit_test(measures_how_far_words_lie_apart),
	    cmocka_unit_test(suggests_near_words_only),
	    cmocka_unit_test(knows_names),
	    cmocka_unit_test(puts_an_article_before_a_word),
	};
	return RUN_GROUP(tests);
}
