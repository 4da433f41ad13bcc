/* SPDX-License-Identifier: Apache-2.0 */
#include "near.h"

#include "report_text.h"
#include "scratch.h"
#include "synthetic.h"

/* Two digits of the uncertainty: JCGM 100:2008, 7.2.6 (from memory). */
static void a_number_has_two_digits_of_its_uncertainty(void **state)
{
	(void)state;
	static const struct {
		double value, uncertainty;
		const char *text;
	} rows[] = {
	    {96.2371, 2.2, "96.2"},
	    {96.2371, 0.022, "96.237"},
	    {96.2371, 22, "96"},
	    {96.2371, 0, "96.2371"},
	    {1500, 0.5, "1500.00"},
	    {-0.001, 0.5, "0.00"},
	    {-0.004, 2.2, "0.0"},
	    {(double)NAN, 1, "unknown"},
	    {(double)INFINITY, 1, "unbounded"},
	    {12.5, (double)INFINITY, "12.5"},
	    {12.5, (double)NAN, "12.5"},
	    {1e20, 1, "1e+20"},
	    {0.123456789, 1e-20, "0.123456789000"},
	};
	char buffer[64];
	for (size_t i = 0; i < sizeof rows / sizeof *rows; i++)
		assert_string_equal(number_text(rows[i].value, rows[i].uncertainty, buffer, sizeof buffer),
		                    rows[i].text);
}

static void a_metric_is_shown_in_the_unit_of_its_limit(void **state)
{
	(void)state;
	static const struct metric_kind time = {.name = "rise_time", .shape = METRIC_TIME};
	static const struct metric_kind level = {.name = "final", .shape = METRIC_LEVEL};
	static const struct metric_kind share = {.name = "overshoot", .shape = METRIC_PERCENT};
	static const struct metric_kind right = {.name = "code_right", .shape = METRIC_YES_NO};
	const struct unit *s = unit_find("s", 1), *ms = unit_find("ms", 2), *rpm = unit_find("rpm", 3);
	const double none = (double)INFINITY;
	const struct {
		struct metric metric;
		struct limit limit;
		bool limited;
		const char *text;
	} rows[] = {
	    {{.kind = &time, .value = 0.0962, .low = 0.0941, .high = 0.0984, .unit = s},
	     {.min = -none, .max = 0.12, .shown_unit = ms},
	     true,
	     "rise_time 96.2 ms (94.1 to 98.4), limit at most 120 ms"},
	    {{.kind = &time, .value = 1.25, .low = 1.2, .high = 1.3, .unit = s},
	     {.min = -none, .max = 2},
	     true,
	     "rise_time 1.250 s (1.200 to 1.300), limit at most 2 s"},
	    {{.kind = &time, .value = 0.0962, .low = 0.0941, .high = 0.0984, .unit = s},
	     {0},
	     false,
	     "rise_time 96.2 ms (94.1 to 98.4)"},
	    {{.kind = &level, .value = 1500, .low = 1495, .high = 1504, .unit = rpm},
	     {.min = 1490, .max = 1510, .shown_unit = rpm},
	     true,
	     "final 1500.0 rpm (1495.0 to 1504.0), limit 1490 to 1510 rpm"},
	    {{.kind = &share, .value = 4.3, .low = 4.3, .high = 4.3, .unit = unit_percent()},
	     {.min = 1, .max = none},
	     true,
	     "overshoot 4.3 %, limit at least 1 %"},
	    {{.kind = &time, .value = (double)NAN, .low = -none, .high = none, .unit = s},
	     {.min = -none, .max = 0.12, .shown_unit = ms},
	     true,
	     "rise_time unknown (nothing is known), limit at most 120 ms"},
	    {{.kind = &time, .value = (double)NAN, .low = 0.05, .high = none, .unit = s},
	     {.min = -none, .max = 0.12, .shown_unit = ms},
	     true,
	     "rise_time unknown (at least 50), limit at most 120 ms"},
	    {{.kind = &right, .value = 0, .low = 0, .high = 0, .unit = unit_one()},
	     {.min = 1, .max = 1},
	     true,
	     "code_right no, limit is yes"},
	    {{.kind = &right, .value = (double)NAN, .low = 0, .high = 1, .unit = unit_one()},
	     {.min = 0, .max = 0},
	     true,
	     "code_right unknown, limit is no"},
	};
	char buffer[256], small[12];
	for (size_t i = 0; i < sizeof rows / sizeof *rows; i++)
		assert_string_equal(metric_text(&rows[i].metric, rows[i].limited ? &rows[i].limit : NULL,
		                                buffer, sizeof buffer),
		                    rows[i].text);
	assert_string_equal(metric_text(&rows[0].metric, &rows[0].limit, small, sizeof small),
	                    "rise_time 9");
}

static char *printed(const struct run_result *run, bool colour)
{
	char *bytes = NULL;
	size_t length = 0;
	FILE *out = open_memstream(&bytes, &length);
	assert_non_null(out);
	summary_print(run, colour, out);
	assert_int_equal(fclose(out), 0);
	return bytes;
}

static void the_summary_ends_with_what_did_not_pass_and_the_counts(void **state)
{
	(void)state;
	struct synthetic made;
	synthetic_make(&made, "", "the overshoot is outside");
	char *text = printed(&made.run, false);
	static const char *const in_order[] = {
	    "suite release\n",
	    "pass         SPD-01",
	    "skipped      SPD-06",
	    "\nnot passed:\nfail         SPD-02  (suite.yaml:12)\n    the overshoot is outside\n"
	    "    overshoot 20.00 % (19.60 to 20.40), limit at most 12 %\n",
	    "inconclusive SPD-03",
	    "error        SPD-05",
	    "fail         6 tests: 1 pass, 1 fail, 1 inconclusive, 2 error, 1 skipped; partial: 5 of "
	    "6; values of the suite were overridden; rehearsed on the modelled bench\n",
	};
	const char *at = text;
	for (size_t i = 0; i < sizeof in_order / sizeof *in_order; i++) {
		const char *found = strstr(at, in_order[i]);
		if (!found)
			fail_msg("'%s' is not in its place in:\n%s", in_order[i], text);
		at = found + 1;
	}
	assert_null(strchr(text, '\033'));
	free(text);
	made.run.facts.rest_confirmed = false;
	text = printed(&made.run, true);
	const char *last = strstr(text, "REST NOT CONFIRMED");
	assert_non_null(last);
	assert_ptr_equal(strchr(last, '\n'), text + strlen(text) - 1);
	assert_non_null(strstr(text, "\033[1;31mfail\033[0m"));
	free(text);
	synthetic_release(&made);
}

static void hostile_text_cannot_steer_a_terminal(void **state)
{
	(void)state;
	struct synthetic made;
	synthetic_make(&made, "\033[2J", "\033]0;gone\a line\nbreak \xff\xe2\x80\xae rtl");
	char *text = printed(&made.run, false);
	assert_null(strchr(text, '\033'));
	assert_null(strchr(text, '\a'));
	assert_null(strstr(text, "\xe2\x80\xae"));
	assert_non_null(strstr(text, "\\x1b]0;gone\\x07 line break \xef\xbf\xbd\\u202e rtl"));
	free(text);
	synthetic_release(&made);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(a_number_has_two_digits_of_its_uncertainty),
	    cmocka_unit_test(a_metric_is_shown_in_the_unit_of_its_limit),
	    cmocka_unit_test(the_summary_ends_with_what_did_not_pass_and_the_counts),
	    cmocka_unit_test(hostile_text_cannot_steer_a_terminal),
	};
	return RUN_GROUP(tests);
}
