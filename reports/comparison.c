/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Reads the results of runs and puts them side by side. What belongs together
 * is found by names: suite, test, check, metric, and which of several limits
 * of a metric. A metric that only one run has is kept and called missing: that
 * a test has gone is news too.
 *
 * Rejected: judging the recordings anew. Two runs are compared by what their
 * reports said; `report DIR --suite NEW` judges anew for who wants that.
 */
#include "comparison.h"

#include <stdlib.h>
#include <string.h>

#include <jansson.h>

enum { METRICS_ROOM = 256 };

struct making {
	struct arena *arena;
	struct comparison *comparison;
	size_t run;
	size_t metric_room, test_room;
	const char *suite, *test, *check;
	size_t hint, test_hint; /* where the last one was found */
	bool failed;            /* no memory */
};

static const char *text_of(const json_t *object, const char *key)
{
	const char *text = json_string_value(json_object_get(object, key));
	return text ? text : "";
}

static double number_of(const json_t *object, const char *key, double otherwise)
{
	const json_t *value = json_object_get(object, key);
	return json_is_number(value) ? json_number_value(value) : otherwise;
}

static const char *keep(struct making *making, const char *text)
{
	const char *kept = arena_strdup(making->arena, text);
	making->failed |= !kept;
	return kept ? kept : "";
}

static void *more(struct making *making, void *items, size_t size, size_t count, size_t *room)
{
	if (count < *room)
		return items;
	size_t wanted = *room ? *room * 2 : METRICS_ROOM;
	char *grown = arena_array(making->arena, wanted, size);
	if (!grown) {
		making->failed = true;
		return NULL;
	}
	if (count > 0)
		memcpy(grown, items, size * count);
	*room = wanted;
	return grown;
}

/* ---- finding ------------------------------------------------------------------ */

static bool is_metric(const struct compared_metric *metric, const struct making *making,
                      const char *name)
{
	return !metric->values[making->run].there && strcmp(metric->name, name) == 0 &&
	       strcmp(metric->test, making->test) == 0 && strcmp(metric->check, making->check) == 0 &&
	       strcmp(metric->suite, making->suite) == 0;
}

/* Begins where the last one was: files are in the same order nearly always. */
static struct compared_metric *find_metric(struct making *making, const char *name)
{
	struct comparison *all = making->comparison;
	for (size_t i = 0; making->run > 0 && i < all->metric_count; i++) {
		size_t at = (making->hint + i) % all->metric_count;
		if (is_metric(&all->metrics[at], making, name)) {
			making->hint = at + 1;
			return &all->metrics[at];
		}
	}
	struct compared_metric *items =
	    more(making, all->metrics, sizeof *items, all->metric_count, &making->metric_room);
	struct compared_value *values = arena_array(making->arena, all->run_count, sizeof *values);
	making->failed |= !values;
	if (!items || !values)
		return NULL;
	all->metrics = items;
	struct compared_metric *metric = &items[all->metric_count++];
	*metric = (struct compared_metric){.suite = making->suite,
	                                   .test = making->test,
	                                   .check = making->check,
	                                   .name = keep(making, name),
	                                   .values = values};
	return metric;
}

static struct compared_test *find_test(struct making *making)
{
	struct comparison *all = making->comparison;
	for (size_t i = 0; making->run > 0 && i < all->test_count; i++) {
		size_t at = (making->test_hint + i) % all->test_count;
		if (strcmp(all->tests[at].test, making->test) == 0 &&
		    strcmp(all->tests[at].suite, making->suite) == 0) {
			making->test_hint = at + 1;
			return &all->tests[at];
		}
	}
	struct compared_test *items =
	    more(making, all->tests, sizeof *items, all->test_count, &making->test_room);
	const char **verdicts = arena_array(making->arena, all->run_count, sizeof *verdicts);
	making->failed |= !verdicts;
	if (!items || !verdicts)
		return NULL;
	all->tests = items;
	struct compared_test *test = &items[all->test_count++];
	*test = (struct compared_test){making->suite, making->test, verdicts, false, false};
	return test;
}

/* ---- reading ------------------------------------------------------------------ */

static void take_metric(struct making *making, const json_t *object)
{
	struct compared_metric *metric = find_metric(making, text_of(object, "name"));
	const double infinite = (double)INFINITY;
	if (!metric)
		return;
	const char *verdict = json_string_value(json_object_get(object, "verdict"));
	metric->unit = keep(making, text_of(object, "unit"));
	metric->evidence = keep(making, text_of(object, "evidence"));
	metric->values[making->run] = (struct compared_value){
	    .there = true,
	    .value = number_of(object, "value", (double)NAN),
	    .low = number_of(object, "low", -infinite),
	    .high = number_of(object, "high", infinite),
	    .min = number_of(object, "min", -infinite),
	    .max = number_of(object, "max", infinite),
	    .guaranteed = number_of(object, "coverage", 0.95) >= 1,
	    .verdict = verdict ? keep(making, verdict) : NULL,
	};
}

static void take_test(struct making *making, const json_t *object)
{
	size_t i, j;
	const json_t *check, *metric;
	making->test = keep(making, text_of(object, "name"));
	struct compared_test *test = find_test(making);
	if (!test)
		return;
	test->verdicts[making->run] = keep(making, text_of(object, "verdict"));
	json_array_foreach(json_object_get(object, "checks"), i, check)
	{
		making->check = keep(making, text_of(check, "name"));
		json_array_foreach(json_object_get(check, "metrics"), j, metric)
		    take_metric(making, metric);
	}
}

static const char *identities(struct making *making, const json_t *facts)
{
	struct text text;
	size_t i;
	const json_t *one;
	text_init(&text, 4096);
	json_array_foreach(json_object_get(facts, "identities"), i, one)
	    text_printf(&text, "%s%s %s %s", i ? ", " : "", text_of(one, "device"), text_of(one, "key"),
	                text_of(one, "text"));
	const char *kept = keep(making, text_string(&text));
	text_release(&text);
	return kept;
}

static int take_run(struct making *making, const char *path, struct err *reterr)
{
	char name[1200];
	json_error_t error;
	size_t i, j;
	const json_t *suite, *test;
	(void)snprintf(name, sizeof name, "%s/results.json", path);
	json_t *root = json_load_file(name, JSON_REJECT_DUPLICATES, &error);
	if (!root)
		return err_set(reterr, ERR_FILE, "%s: %s", name, error.text);
	if (json_integer_value(json_object_get(root, "format")) != 1 ||
	    !json_is_array(json_object_get(root, "suites"))) {
		json_decref(root);
		return err_set(reterr, ERR_FILE, "%s: these are no results that this program knows", name);
	}
	const json_t *facts = json_object_get(root, "facts");
	making->comparison->runs[making->run] = (struct compared_run){
	    .path = keep(making, path),
	    .started = keep(making, text_of(facts, "started")),
	    .rig = keep(making, text_of(facts, "rig")),
	    .verdict = keep(making, text_of(root, "verdict")),
	    .identities = identities(making, facts),
	    .rehearsal = json_is_true(json_object_get(facts, "rehearsal")),
	    .partial = json_is_true(json_object_get(root, "partial")),
	};
	json_array_foreach(json_object_get(root, "suites"), i, suite)
	{
		making->suite = keep(making, text_of(suite, "name"));
		json_array_foreach(json_object_get(suite, "tests"), j, test) take_test(making, test);
	}
	json_decref(root);
	return making->failed ? err_set(reterr, ERR_NOMEM, "no memory for the comparison") : 0;
}

/* ---- comparing ---------------------------------------------------------------- */

static double margin_of(const struct compared_value *value)
{
	double least = fmin(value->value - value->min, value->max - value->value);
	return value->there && isfinite(value->value) && isfinite(least) ? least : (double)NAN;
}

static void compare_ends(struct compared_metric *metric, size_t runs, double share)
{
	const struct compared_value *old = &metric->values[0], *new = &metric->values[runs - 1];
	metric->change = metric->uncertainty = metric->lost = (double)NAN;
	metric->margin_before = margin_of(old);
	metric->margin_after = margin_of(new);
	metric->flipped = old->verdict && new->verdict &&strcmp(old->verdict, new->verdict) != 0;
	metric->limit_changed =
	    old->there && new->there && (old->min != new->min || old->max != new->max);
	if (!old->there || !new->there || !isfinite(old->value) || !isfinite(new->value))
		return;
	metric->change = new->value - old->value;
	/* The sides that face each other. */
	bool up = metric->change > 0;
	double u_old = up ? old->high - old->value : old->value - old->low;
	double u_new = up ? new->value - new->low : new->high - new->value;
	metric->uncertainty = old->guaranteed || new->guaranteed ? u_old + u_new : hypot(u_old, u_new);
	metric->significant = fabs(metric->change) > metric->uncertainty;
	double loss = metric->margin_before - metric->margin_after;
	if (isnan(loss))
		return;
	metric->lost = metric->margin_before != 0 ? loss / fabs(metric->margin_before)
	               : loss > 0                 ? (double)INFINITY
	                                          : 0;
	metric->worse = metric->significant && loss > share * fabs(metric->margin_before);
}

/* Least squares over the number of the run; u from the uncertainties, k = 2 (JCGM 100, 5.1). */
static void find_trend(struct compared_metric *metric, size_t runs)
{
	double n = 0, sum_x = 0, sum_y = 0, sxx = 0, sxy = 0, variance = 0;
	metric->slope = metric->slope_uncertainty = (double)NAN;
	for (size_t i = 0; i < runs; i++)
		if (metric->values[i].there && isfinite(metric->values[i].value)) {
			n++;
			sum_x += (double)i;
			sum_y += metric->values[i].value;
		}
	if (n < 3)
		return;
	for (size_t i = 0; i < runs; i++)
		if (metric->values[i].there && isfinite(metric->values[i].value)) {
			double dx = (double)i - sum_x / n;
			sxx += dx * dx;
			sxy += dx * (metric->values[i].value - sum_y / n);
			double half = fmax(metric->values[i].high - metric->values[i].value,
			                   metric->values[i].value - metric->values[i].low);
			variance += dx * dx * half * half;
		}
	metric->slope = sxy / sxx;
	metric->slope_uncertainty = sqrt(variance) / sxx;
	metric->trend = fabs(metric->slope) > metric->slope_uncertainty;
}

static bool is_pass(const char *verdict)
{
	return verdict && strcmp(verdict, "pass") == 0;
}

static void compare_all(struct comparison *all)
{
	size_t last = all->run_count - 1;
	for (size_t i = 0; i < all->metric_count; i++) {
		struct compared_metric *metric = &all->metrics[i];
		compare_ends(metric, all->run_count, all->share);
		find_trend(metric, all->run_count);
		all->significant += metric->significant;
		all->worse += metric->worse;
		all->flips += metric->flipped;
		all->missing += metric->values[0].there != metric->values[last].there;
	}
	for (size_t i = 0; i < all->test_count; i++) {
		struct compared_test *test = &all->tests[i];
		const char *old = test->verdicts[0], *new = test->verdicts[last];
		test->flipped = old && new &&strcmp(old, new) != 0;
		test->worse = test->flipped && strcmp(new, "skipped") != 0 &&
		              (is_pass(old) || (strcmp(new, "fail") == 0 && strcmp(old, "skipped") != 0));
		all->worse += test->worse;
		all->flips += test->flipped;
	}
}

bool comparison_is_worse(const struct comparison *comparison)
{
	return comparison->worse > 0;
}

int comparison_make(const char *const *paths, size_t count, double share, struct arena *arena,
                    struct comparison *ret_comparison, struct err *reterr)
{
	struct making making = {.arena = arena, .comparison = ret_comparison};
	*ret_comparison = (struct comparison){.share = share, .run_count = count};
	ret_comparison->runs = arena_array(arena, count, sizeof *ret_comparison->runs);
	if (!ret_comparison->runs)
		return err_set(reterr, ERR_NOMEM, "no memory for the comparison");
	for (making.run = 0; making.run < count; making.run++) {
		making.hint = making.test_hint = 0;
		if (take_run(&making, paths[making.run], reterr) < 0)
			return -1;
	}
	compare_all(ret_comparison);
	return 0;
}
