/* SPDX-License-Identifier: Apache-2.0 */
/* What the writers do with disks and sizes; what stands in the files is tested in tests/outputs. */
#include "near.h"

#include "scratch.h"
#include "synthetic.h"

static struct run_folder made_folder(const char *name)
{
	struct run_folder folder;
	struct err err = {0};
	assert_int_equal(run_folder_new(scratch_path(name), "", "bench", &folder, &err), 0);
	return folder;
}

static char *html_of(const struct run_result *run, const char *name, size_t *ret_length)
{
	struct err err = {0};
	char path[100];
	struct run_folder folder = made_folder(name);
	assert_int_equal(reports_write(run, &folder, &err), 0);
	run_folder_close(&folder);
	(void)snprintf(path, sizeof path, "%s/report.html", name);
	char *bytes = scratch_read(scratch_path(path), ret_length);
	assert_non_null(bytes);
	return bytes;
}

static void a_full_disk_leaves_no_half_report(void **state)
{
	(void)state;
	struct synthetic made;
	struct err err = {0};
	struct run_folder folder = made_folder("full");
	synthetic_make(&made, "", "text");
	scratch_disk(1000);
	int rc = reports_write(&made.run, &folder, &err);
	scratch_disk_again();
	assert_int_equal(rc, -1);
	assert_int_equal(err.code, ERR_OUTPUT);
	assert_int_equal(scratch_count(folder.path), 0);
	run_folder_close(&folder);
	synthetic_release(&made);
}

static void one_report_that_fails_does_not_keep_the_others_away(void **state)
{
	(void)state;
	struct synthetic made;
	struct err err = {0};
	struct run_folder folder = made_folder("one");
	synthetic_make(&made, "", "text");
	/* A folder in the place of the first report. */
	assert_int_equal(mkdir(scratch_path("one/results.json"), 0777), 0);
	assert_int_equal(reports_write(&made.run, &folder, &err), -1);
	assert_int_equal(err.code, ERR_OUTPUT);
	assert_non_null(strstr(err.file, "results.json"));
	assert_int_equal(access(scratch_path("one/junit.xml"), F_OK), 0);
	assert_int_equal(access(scratch_path("one/report.html"), F_OK), 0);
	assert_int_equal(access(scratch_path("one/report.css"), F_OK), 0);
	run_folder_close(&folder);
	synthetic_release(&made);
}

static void rest_that_was_not_confirmed_stands_before_the_verdict(void **state)
{
	(void)state;
	struct synthetic made;
	synthetic_make(&made, "", "text");
	made.run.facts.rest_confirmed = false;
	char *html = html_of(&made.run, "rest", NULL);
	const char *alarm = strstr(html, "Rest was not confirmed"), *verdict = strstr(html, "<h1");
	assert_non_null(alarm);
	assert_non_null(verdict);
	assert_true(alarm < verdict);
	free(html);
	synthetic_release(&made);
}

static size_t count_of(const char *text, const char *word)
{
	size_t count = 0;
	for (const char *at = text; (at = strstr(at, word)); at += strlen(word))
		count++;
	return count;
}

static void what_was_abnormal_stands_before_the_failures(void **state)
{
	(void)state;
	struct synthetic made;
	synthetic_make(&made, "[speed=1000rpm,load=1.2Nm]", "text");
	struct run_event events[] = {
	    {RUN_EVENT_LINK, "drive_wire", "the reply was garbled", NS_PER_S, 3 * NS_PER_S, 4},
	    {RUN_EVENT_INTERLOCK, "speed", "speed is 3700 rpm", NS_PER_S, NS_PER_S, 1},
	    {RUN_EVENT_REST, "", "speed stayed above 10 rpm", NS_PER_S, NS_PER_S, 1},
	};
	made.run.facts.events = events;
	made.run.facts.event_count = 3;
	char *html = html_of(&made.run, "abnormal", NULL);
	const char *what = strstr(html, "All tests"), *failed = strstr(html, "What did not pass");
	static const char *const expected[] = {"the reply was garbled (4 times",
	                                       "speed is 3700 rpm",
	                                       "speed stayed above 10 rpm",
	                                       "rest on what the device under test says of itself",
	                                       "partial: ",
	                                       "values overridden"};
	assert_non_null(what);
	assert_non_null(failed);
	assert_true(failed < what);
	for (size_t i = 0; i < sizeof expected / sizeof *expected; i++) {
		const char *at = strstr(html, expected[i]);
		assert_non_null(at);
		assert_true(at < failed);
	}
	/* The failed limit has its picture beside it, once. */
	assert_non_null(strstr(failed, "id=\"t0-1-c0-title\""));
	assert_int_equal(count_of(html, "id=\"t0-1-c0-title\""), 1);
	assert_true(strstr(failed, "id=\"t0-1-c0-title\"") < what);
	assert_non_null(strstr(html, "SPD-01[<wbr/>speed=1000rpm,<wbr/>load=1.2Nm]"));
	free(html);
	synthetic_release(&made);
}

static void a_requirement_has_the_worst_verdict_of_its_tests(void **state)
{
	(void)state;
	struct synthetic made;
	synthetic_make(&made, "", "text");
	char *html = html_of(&made.run, "requirements", NULL);
	const char *table = strstr(html, ">Requirements</h2>");
	assert_non_null(table);
	const char *row = strstr(table, "SRS-112");
	assert_non_null(row);
	const char *end = strstr(row, "</tr>"), *verdict = strstr(row, "class=\"verdict fail\"");
	assert_non_null(verdict);
	assert_true(verdict < end);
	assert_non_null(strstr(row, "but 1 of 6 tests not run"));
	free(html);
	synthetic_release(&made);
}

static void a_run_that_was_aborted_before_its_first_test_has_its_reports(void **state)
{
	(void)state;
	struct synthetic made;
	synthetic_make(&made, "", "text");
	for (int i = 0; i < SYN_TESTS; i++) {
		struct test_result *test = &made.suite_result.tests[i];
		test->recorded = NULL;
		test->series = NULL;
		test->verdict = VERDICT_ERROR;
		test->checks[0].metric_count = 0;
		test->checks[0].verdict = VERDICT_SKIPPED;
	}
	made.run.facts.aborted = true;
	made.run.facts.started_utc[0] = '\0';
	made.run.facts.host[0] = '\0';
	made.run.facts.rig = NULL;
	char *html = html_of(&made.run, "aborted", NULL);
	assert_non_null(strstr(html, "Verdict: fail") ? html : strstr(html, "Verdict: error"));
	assert_null(strstr(html, "<svg"));
	free(html);
	char *junit = scratch_read(scratch_path("aborted/junit.xml"), NULL);
	assert_non_null(strstr(junit, "type=\"not-reached\""));
	assert_non_null(strstr(junit, "hostname=\"localhost\""));
	assert_non_null(strstr(junit, "timestamp=\"1970-01-01T00:00:00\""));
	free(junit);
	synthetic_release(&made);
}

static void a_run_of_many_tests_stays_below_ten_megabytes(void **state)
{
	(void)state;
	enum { TESTS = 500 };
	struct synthetic made;
	size_t length = 0;
	synthetic_make(&made, "", "a reason of a usual length, with a number or two: 12.5 % and 3 ms");
	struct test *tests = syn_array(&made, TESTS, sizeof *tests);
	struct test_result *results = syn_array(&made, TESTS, sizeof *results);
	for (int i = 0; i < TESTS; i++) {
		tests[i] = made.suite.tests[i % 4];
		results[i] = made.suite_result.tests[i % 4];
		tests[i].name = arena_printf(&made.arena, "SPD-%03d", i);
		assert_non_null(tests[i].name);
		results[i].test = &tests[i];
	}
	made.suite.tests = tests;
	made.suite.test_count = TESTS;
	made.suite_result.tests = results;
	made.suite_result.test_count = TESTS;
	made.suite_result.totals =
	    (struct run_totals){TESTS, TESTS / 4, TESTS / 4, TESTS / 4, TESTS / 4, 0};
	made.run.totals = made.suite_result.totals;
	char *html = html_of(&made.run, "many", &length);
	assert_true(length < 10000000);
	/* Three of four tests were judged, and each of them has its picture. */
	assert_int_equal(count_of(html, "<svg"), 375);
	free(html);
	synthetic_release(&made);
}

static void a_long_record_keeps_its_extremes_in_the_picture(void **state)
{
	(void)state;
	enum { ROWS = 200000 };
	struct synthetic made;
	size_t length = 0;
	synthetic_make(&made, "", "text");
	struct test_result *test = &made.suite_result.tests[0];
	struct recorded_test *recorded = syn_array(&made, 1, sizeof *recorded);
	struct syn_row *rows = syn_array(&made, ROWS, sizeof *rows);
	*recorded = *test->recorded;
	for (int i = 0; i < ROWS; i++)
		rows[i] = (struct syn_row){recorded->begin_ns + i * 5000,
		                           recorded->begin_ns + i * 5000 + 9,
		                           {i == 123456   ? 4000
		                            : i == 150001 ? -4000
		                                          : i % 2,
		                            0}};
	test->recorded = recorded;
	test->series[SYN_SPEED].row0 = (unsigned char *)rows;
	test->series[SYN_SPEED].rows = ROWS;
	made.suite_result.test_count = 1;
	made.suite.test_count = 1;
	char *html = html_of(&made.run, "long", &length);
	assert_true(length < 200000);
	/* Of the panel (y from 26 to 176) 8 % of the range are left free above and below. */
	const char *line = strstr(html, "stroke=\"#1f4e6b\"");
	assert_non_null(line);
	double least = (double)INFINITY, most = -(double)INFINITY;
	for (const char *at = html; (at = strstr(at, "points=\"")); at++) {
		const char *point = at + 8;
		while (*point != '"') {
			char *next;
			(void)strtod(point, &next);
			assert_int_equal(*next, ',');
			double y = strtod(next + 1, &next);
			least = fmin(least, y);
			most = fmax(most, y);
			point = *next == ' ' ? next + 1 : next;
		}
	}
	assert_near(least, 26 + 150 * 0.08 / 1.16, 0.2, "pixels");
	assert_near(most, 176 - 150 * 0.08 / 1.16, 0.2, "pixels");
	free(html);
	synthetic_release(&made);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(a_full_disk_leaves_no_half_report),
	    cmocka_unit_test(one_report_that_fails_does_not_keep_the_others_away),
	    cmocka_unit_test(rest_that_was_not_confirmed_stands_before_the_verdict),
	    cmocka_unit_test(what_was_abnormal_stands_before_the_failures),
	    cmocka_unit_test(a_requirement_has_the_worst_verdict_of_its_tests),
	    cmocka_unit_test(a_run_that_was_aborted_before_its_first_test_has_its_reports),
	    cmocka_unit_test(a_run_of_many_tests_stays_below_ten_megabytes),
	    cmocka_unit_test(a_long_record_keeps_its_extremes_in_the_picture),
	};
	return cmocka_run_group_tests(tests, scratch_make, scratch_remove) != 0;
}
