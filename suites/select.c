/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Which tests of a suite are run. The unit is a chain: a test and those that
 * continue it, since a link of a chain means nothing without the links before.
 *
 * Parts are made longest first, each unit to the part with least work so far
 * (Graham's rule): nobody needs the best packing, but every bench must come to
 * the same one without asking the others, so that ties go by place in the
 * file. Dealing out by number was rejected: the long tests of a suite tend to
 * stand side by side.
 */
#include <stdlib.h>
#include <string.h>

#include "suite.h"

/* What a unit costs beside its steps: the safe state, and the checks of `before`. */
#define UNIT_OVERHEAD_NS (800 * NS_PER_MS)
#define TEST_OVERHEAD_NS (100 * NS_PER_MS)

enum { PARTS_MOST = 1000 };

struct unit_of_tests {
	size_t first, count;
	int64_t duration_ns;
	bool chosen;
	int part; /* from 1 */
};

static bool glob_matches(const char *pattern, const char *name)
{
	const char *star = NULL, *resume = NULL;
	while (*name) {
		if (*pattern == '*') {
			star = pattern++;
			resume = name;
		} else if (*pattern == *name) {
			pattern++;
			name++;
		} else if (star) {
			pattern = star + 1;
			name = ++resume;
		} else {
			return false;
		}
	}
	while (*pattern == '*')
		pattern++;
	return !*pattern;
}

static bool test_matches(const struct test *test, const char *pattern)
{
	return glob_matches(pattern, test->name) || glob_matches(pattern, test->base);
}

static bool has_tag(const struct test *test, const char *tag)
{
	for (size_t i = 0; i < test->tag_count; i++)
		if (strcmp(test->tags[i], tag) == 0)
			return true;
	return false;
}

static int64_t test_duration(const struct test *test)
{
	int64_t stimulus, restore, most;
	steps_duration(test->stimulus, test->stimulus_count, &stimulus, &most);
	steps_duration(test->restore, test->restore_count, &restore, &most);
	return stimulus + restore;
}

static size_t find_units(const struct suite *suite, struct unit_of_tests *units)
{
	size_t count = 0;
	for (size_t i = 0; i < suite->test_count; i++) {
		const struct test *test = &suite->tests[i];
		if (test->bench)
			continue;
		if (!test->continues || count == 0)
			units[count++] = (struct unit_of_tests){.first = i, .duration_ns = UNIT_OVERHEAD_NS};
		units[count - 1].count++;
		units[count - 1].duration_ns += test_duration(test) + TEST_OVERHEAD_NS;
	}
	return count;
}

static int refuse_pattern(const struct suite *suite, const char *pattern, struct err *reterr)
{
	const char *nearest = NULL;
	size_t best = strlen(pattern) / 3 + 1;
	for (size_t i = 0; i < suite->test_count; i++) {
		const char *bases[] = {suite->tests[i].base, suite->tests[i].name};
		for (size_t k = 0; k < 2; k++)
			if (text_distance(pattern, bases[k]) < best) {
				best = text_distance(pattern, bases[k]);
				nearest = bases[k];
			}
	}
	return err_set(reterr, ERR_USAGE, "--only %s matches no test of suite %s%s%s%s", pattern,
	               suite->name, nearest ? "; did you mean '" : "", nearest ? nearest : "",
	               nearest ? "'?" : "");
}

/* Every pattern and every tag must match something, else a typing error runs nothing. */
static int check_words(const struct suite *suite, const struct selection *selection,
                       struct err *reterr)
{
	for (size_t p = 0; p < selection->only_count; p++) {
		bool found = false;
		for (size_t i = 0; i < suite->test_count && !found; i++)
			found = test_matches(&suite->tests[i], selection->only[p]);
		if (!found)
			return refuse_pattern(suite, selection->only[p], reterr);
	}
	for (size_t t = 0; t < selection->tag_count; t++) {
		bool found = false;
		for (size_t i = 0; i < suite->test_count && !found; i++)
			found = has_tag(&suite->tests[i], selection->tags[t]);
		if (!found)
			return err_set(reterr, ERR_USAGE, "no test of suite %s has the tag '%s'", suite->name,
			               selection->tags[t]);
	}
	return 0;
}

static bool is_chosen(const struct test *test, const struct selection *selection)
{
	bool by_name = selection->only_count == 0, by_tag = selection->tag_count == 0;
	for (size_t i = 0; i < selection->only_count && !by_name; i++)
		by_name = test_matches(test, selection->only[i]);
	for (size_t i = 0; i < selection->tag_count && !by_tag; i++)
		by_tag = has_tag(test, selection->tags[i]);
	return by_name && by_tag;
}

/* The longest unit that has no part yet; NULL where all have. */
static struct unit_of_tests *longest_left(struct unit_of_tests *units, size_t count)
{
	struct unit_of_tests *longest = NULL;
	for (size_t i = 0; i < count; i++)
		if (units[i].chosen && units[i].part == 0 &&
		    (!longest || units[i].duration_ns > longest->duration_ns))
			longest = &units[i];
	return longest;
}

static int deal_parts(struct unit_of_tests *units, size_t count, int parts, struct err *reterr)
{
	int64_t *loads = calloc((size_t)parts, sizeof *loads);
	if (!loads)
		return err_set(reterr, ERR_NOMEM, "memory ran out while selecting tests");
	struct unit_of_tests *unit;
	while ((unit = longest_left(units, count)) != NULL) {
		int least = 0;
		for (int p = 1; p < parts; p++)
			if (loads[p] < loads[least])
				least = p;
		loads[least] += unit->duration_ns;
		unit->part = least + 1;
	}
	free(loads);
	return 0;
}

static int choose(struct suite *suite, const struct selection *selection,
                  struct unit_of_tests *units, struct err *reterr)
{
	size_t count = find_units(suite, units), chosen = 0;
	bool bench_named = false;
	for (size_t i = 0; i < suite->test_count; i++)
		bench_named =
		    bench_named || (suite->tests[i].bench && selection->only_count > 0 &&
		                    selection->tag_count == 0 && is_chosen(&suite->tests[i], selection));
	for (size_t u = 0; u < count; u++) {
		for (size_t i = 0; i < units[u].count; i++)
			units[u].chosen =
			    units[u].chosen || is_chosen(&suite->tests[units[u].first + i], selection);
		chosen += units[u].chosen;
	}
	if (chosen == 0 && !bench_named)
		return err_set(reterr, ERR_USAGE, "no test of suite %s has both a name and a tag selected",
		               suite->name);
	if (selection->parts > 0 && deal_parts(units, count, selection->parts, reterr) < 0)
		return -1;
	size_t left = 0;
	for (size_t u = 0; u < count; u++) {
		if (selection->parts > 0 && units[u].part != selection->part)
			units[u].chosen = false;
		left += units[u].chosen;
	}
	if (left == 0 && selection->parts > 0)
		return err_set(reterr, ERR_USAGE,
		               "part %d of %d has no test: there are only %zu chains of tests to share out",
		               selection->part, selection->parts, chosen);
	suite->duration_ns = 0;
	for (size_t i = 0; i < suite->test_count; i++)
		suite->tests[i].selected = suite->tests[i].bench;
	for (size_t u = 0; u < count; u++)
		for (size_t i = 0; i < units[u].count; i++)
			suite->tests[units[u].first + i].selected = units[u].chosen;
	for (size_t i = 0; i < suite->test_count; i++)
		if (suite->tests[i].selected)
			suite->duration_ns += test_duration(&suite->tests[i]);
	return 0;
}

int suite_select(struct suite *suite, const struct selection *selection, struct err *reterr)
{
	if (selection->parts != 0 && (selection->parts < 1 || selection->parts > PARTS_MOST ||
	                              selection->part < 1 || selection->part > selection->parts))
		return err_set(reterr, ERR_USAGE,
		               "--part %d/%d: the part lies between 1 and the number of parts, of which "
		               "there are at most %d",
		               selection->part, selection->parts, PARTS_MOST);
	if (check_words(suite, selection, reterr) < 0)
		return -1;
	struct unit_of_tests *units = calloc(suite->test_count + 1, sizeof *units);
	if (!units)
		return err_set(reterr, ERR_NOMEM, "memory ran out while selecting tests");
	int rc = choose(suite, selection, units, reterr);
	free(units);
	return rc;
}

size_t suite_selected(const struct suite *suite, size_t *ret_all)
{
	size_t selected = 0, all = 0;
	for (size_t i = 0; i < suite->test_count; i++) {
		all += !suite->tests[i].bench;
		selected += !suite->tests[i].bench && suite->tests[i].selected;
	}
	*ret_all = all;
	return selected;
}
