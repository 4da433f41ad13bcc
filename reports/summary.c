/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The summary on a console: what a person looks for first stands last, where a
 * terminal leaves it on the screen. One line a test, then what did not pass
 * with its reason and numbers, then the counts.
 */
#include <string.h>

#include "report_text.h"

enum { NAME_WIDTH = 28, NUMBERS_SHOWN = 3 };

/* Foreground colours of ECMA-48; bold besides, so that the words stand out without hue too. */
static const char *verdict_colour(enum verdict verdict)
{
	switch (verdict) {
	case VERDICT_PASS:
		return "\033[32m";
	case VERDICT_FAIL:
		return "\033[1;31m";
	case VERDICT_INCONCLUSIVE:
		return "\033[1;33m";
	case VERDICT_ERROR:
		return "\033[1;35m";
	case VERDICT_SKIPPED:
		break;
	}
	return "\033[2m";
}

/* One line of foreign text: clean, without line ends, at most `most` bytes of it. */
static void print_clean(const char *string, size_t most, FILE *out)
{
	struct text text;
	size_t length = string ? strlen(string) : 0;
	text_init(&text, 0);
	if (length > most)
		while (most > 0 && ((unsigned char)string[most] & 0xC0) == 0x80)
			most--;
	text_add_clean(&text, string ? string : "", length > most ? most : length);
	for (size_t i = 0; i < text.length; i++)
		if (text.data[i] == '\n' || text.data[i] == '\t')
			text.data[i] = ' ';
	(void)fputs(text_string(&text), out);
	if (length > most)
		(void)fputs("...", out);
	text_release(&text);
}

static void print_verdict(enum verdict verdict, bool colour, FILE *out)
{
	const char *name = verdict_name(verdict);
	(void)fprintf(out, "%s%s%s%*s", colour ? verdict_colour(verdict) : "", name,
	              colour ? "\033[0m" : "", (int)(13 - strlen(name)), "");
}

static void print_test(const struct test_result *test, bool colour, FILE *out)
{
	print_verdict(test->verdict, colour, out);
	print_clean(test->test->name, 100, out);
	size_t columns = text_columns(test->test->name, strlen(test->test->name));
	const char *title = test->test->title;
	if (title && title[0]) {
		(void)fprintf(out, "%*s", columns < NAME_WIDTH ? (int)(NAME_WIDTH - columns) : 2, "");
		print_clean(title, 80, out);
	}
	(void)fputc('\n', out);
}

/* Of the limits that were not met, the first few, on one line. */
static void print_numbers(const struct test_result *test, FILE *out)
{
	char line[512];
	size_t shown = 0, more = 0;
	for (size_t c = 0; c < test->check_count; c++)
		for (size_t m = 0; m < test->checks[c].metric_count; m++) {
			const struct metric_result *metric = &test->checks[c].metrics[m];
			for (size_t l = 0; l < metric->limit_count; l++) {
				if (metric->limits[l].verdict == VERDICT_PASS)
					continue;
				if (shown == NUMBERS_SHOWN) {
					more++;
					continue;
				}
				(void)fputs(shown ? "; " : "    ", out);
				print_clean(
				    metric_text(&metric->metric, metric->limits[l].limit, line, sizeof line),
				    sizeof line, out);
				shown++;
			}
		}
	if (more)
		(void)fprintf(out, "; and %zu more", more);
	if (shown)
		(void)fputc('\n', out);
}

static void print_failure(const struct test_result *test, bool colour, FILE *out)
{
	print_verdict(test->verdict, colour, out);
	print_clean(test->test->name, 100, out);
	if (test->test->at.file && test->test->at.line > 0) {
		(void)fputs("  (", out);
		print_clean(test->test->at.file->path, 200, out);
		(void)fprintf(out, ":%d)", test->test->at.line);
	}
	(void)fputs("\n    ", out);
	print_clean(test->reason, sizeof test->reason, out);
	(void)fputc('\n', out);
	print_numbers(test, out);
}

static bool wants_attention(enum verdict verdict)
{
	return verdict != VERDICT_PASS && verdict != VERDICT_SKIPPED;
}

static void print_counts(const struct run_result *run, bool colour, FILE *out)
{
	const struct run_totals *totals = &run->totals;
	size_t all, selected = run_selected(run, &all);
	print_verdict(run_verdict(run), colour, out);
	(void)fprintf(out, "%zu tests: %zu pass, %zu fail, %zu inconclusive, %zu error, %zu skipped",
	              totals->tests, totals->pass, totals->fail, totals->inconclusive, totals->error,
	              totals->skipped);
	if (run->facts.partial || selected < all)
		(void)fprintf(out, "; partial: %zu of %zu", selected, all);
	if (run_overridden(run))
		(void)fputs("; values of the suite were overridden", out);
	if (run->facts.rehearsal)
		(void)fputs("; rehearsed on the modelled bench", out);
	(void)fputc('\n', out);
}

void summary_print(const struct run_result *run, bool colour, FILE *out)
{
	const struct run_facts *facts = &run->facts;
	size_t failures = 0;
	char label[160];
	for (size_t s = 0; s < run->suite_count; s++) {
		(void)fputs("suite ", out);
		print_clean(suite_label(run, s, label, sizeof label), 160, out);
		(void)fputc('\n', out);
		for (size_t t = 0; t < run->suites[s].test_count; t++) {
			print_test(&run->suites[s].tests[t], colour, out);
			failures += wants_attention(run->suites[s].tests[t].verdict);
		}
	}
	if (failures)
		(void)fputs("\nnot passed:\n", out);
	for (size_t s = 0; s < run->suite_count; s++)
		for (size_t t = 0; t < run->suites[s].test_count; t++)
			if (wants_attention(run->suites[s].tests[t].verdict))
				print_failure(&run->suites[s].tests[t], colour, out);
	(void)fputc('\n', out);
	if (facts->aborted) {
		(void)fputs("aborted: ", out);
		print_clean(facts->abort_reason, sizeof facts->abort_reason, out);
		(void)fputc('\n', out);
	}
	print_counts(run, colour, out);
	if (facts->rest_was_needed && !facts->rest_confirmed) {
		(void)fputs("REST NOT CONFIRMED: the shaft may turn. ", out);
		print_clean(facts->rest_reason, sizeof facts->rest_reason, out);
		(void)fputc('\n', out);
	}
}
