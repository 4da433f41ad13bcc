/* SPDX-License-Identifier: Apache-2.0 */
/* A comparison as text for a console and as JSON for programs. */
#include <string.h>

#include <jansson.h>

#include "comparison.h"

static void clean(const char *string, FILE *out)
{
	struct text text;
	text_init(&text, 0);
	text_add_line(&text, string, strlen(string));
	(void)fputs(text_string(&text), out);
	text_release(&text);
}

static const char *number(double value, double uncertainty, char *buffer, size_t size)
{
	return number_text(value, isfinite(uncertainty) ? uncertainty : 0, buffer, size);
}

static double half_width(const struct compared_value *value)
{
	return fmax(value->high - value->value, value->value - value->low);
}

static const char *margin_text(double margin, char *buffer, size_t size)
{
	if (isnan(margin))
		(void)snprintf(buffer, size, "none");
	else
		(void)snprintf(buffer, size, "%.3g", margin);
	return buffer;
}

static void print_values(const struct comparison *all, const struct compared_metric *metric,
                         FILE *out)
{
	char text[64];
	for (size_t r = 0; r < all->run_count; r++) {
		const struct compared_value *value = &metric->values[r];
		(void)fprintf(out, "%s%s", r ? " -> " : "",
		              value->there ? number(value->value, half_width(value), text, sizeof text)
		                           : "not there");
	}
	(void)fprintf(out, " %s", strcmp(metric->unit, "1") == 0 ? "" : metric->unit);
}

static void print_metric(const struct comparison *all, const struct compared_metric *metric,
                         FILE *out)
{
	size_t last = all->run_count - 1;
	char change[64], uncertainty[64], before[64], after[64];
	(void)fputs(metric->worse         ? "worse        "
	            : metric->flipped     ? "verdict      "
	            : metric->significant ? "changed      "
	                                  : "             ",
	            out);
	clean(metric->test, out);
	(void)fputs("  ", out);
	clean(metric->check, out);
	(void)fprintf(out, ".%s\n    ", metric->name);
	print_values(all, metric, out);
	if (!isnan(metric->change))
		(void)fprintf(
		    out, "; change %s +- %s, %s",
		    number(metric->change, metric->uncertainty, change, sizeof change),
		    number(metric->uncertainty, metric->uncertainty, uncertainty, sizeof uncertainty),
		    metric->significant ? "significant" : "not significant");
	if (!isnan(metric->margin_before) || !isnan(metric->margin_after))
		(void)fprintf(out, "; margin %s -> %s",
		              margin_text(metric->margin_before, before, sizeof before),
		              margin_text(metric->margin_after, after, sizeof after));
	if (isfinite(metric->lost) && metric->lost != 0 && metric->significant)
		(void)fprintf(out, " (%.0f %% %s)", 100 * fabs(metric->lost),
		              metric->lost > 0 ? "lost" : "gained");
	if (metric->limit_changed)
		(void)fputs("; its limit was changed", out);
	if (metric->flipped)
		(void)fprintf(out, "; %s -> %s", metric->values[0].verdict, metric->values[last].verdict);
	if (!isnan(metric->slope))
		(void)fprintf(out, "; trend %s +- %s a run%s",
		              number(metric->slope, metric->slope_uncertainty, change, sizeof change),
		              number(metric->slope_uncertainty, metric->slope_uncertainty, uncertainty,
		                     sizeof uncertainty),
		              metric->trend ? ", significant" : "");
	(void)fputc('\n', out);
}

static bool wanted(const struct compared_metric *metric, size_t last, bool all)
{
	return all || metric->worse || metric->flipped || metric->significant || metric->trend ||
	       metric->limit_changed || metric->values[0].there != metric->values[last].there;
}

void comparison_print(const struct comparison *comparison, bool all, FILE *out)
{
	size_t last = comparison->run_count - 1, shown = 0;
	for (size_t r = 0; r <= last; r++) {
		const struct compared_run *run = &comparison->runs[r];
		(void)fprintf(out, "%s  ", r == 0 ? "old" : r == last ? "new" : "   ");
		clean(run->path, out);
		(void)fputs(": ", out);
		clean(run->rig, out);
		(void)fprintf(out, "%s, ", run->rehearsal ? " (rehearsed)" : "");
		clean(run->started, out);
		(void)fputs(", ", out);
		clean(run->identities, out);
		(void)fprintf(out, ", %s%s\n", run->verdict, run->partial ? ", partial" : "");
	}
	(void)fputc('\n', out);
	/* What got worse first, then the rest in the order of the suites. */
	for (int pass = 0; pass < 2; pass++)
		for (size_t i = 0; i < comparison->metric_count; i++) {
			const struct compared_metric *metric = &comparison->metrics[i];
			if (metric->worse != (pass == 0) || !wanted(metric, last, all))
				continue;
			print_metric(comparison, metric, out);
			shown++;
		}
	for (size_t i = 0; i < comparison->test_count; i++) {
		const struct compared_test *test = &comparison->tests[i];
		const char *old = test->verdicts[0], *new = test->verdicts[last];
		if (old && new && !test->flipped)
			continue;
		(void)fputs(test->worse ? "worse        " : "verdict      ", out);
		clean(test->test, out);
		(void)fprintf(out, "  %s -> %s\n", old ? old : "not there", new ? new : "not there");
		shown++;
	}
	(void)fprintf(out,
	              "%s%zu metrics: %zu changed significantly, %zu verdicts flipped, %zu in one run "
	              "only; worse by more than %.4g %% of the margin, or in verdict: %zu\n",
	              shown ? "\n" : "", comparison->metric_count, comparison->significant,
	              comparison->flips, comparison->missing, 100 * comparison->share,
	              comparison->worse);
}

/* ---- JSON ------------------------------------------------------------------- */

static json_t *real(double value)
{
	return isfinite(value) ? json_real(value) : json_null();
}

static json_t *string(const char *value)
{
	return value ? json_string(value) : json_null();
}

static json_t *values_json(const struct comparison *all, const struct compared_metric *metric)
{
	json_t *array = json_array();
	for (size_t r = 0; r < all->run_count; r++) {
		const struct compared_value *value = &metric->values[r];
		json_t *one = value->there ? json_pack("{so so so so so so}", "value", real(value->value),
		                                       "low", real(value->low), "high", real(value->high),
		                                       "min", real(value->min), "max", real(value->max),
		                                       "verdict", string(value->verdict))
		                           : json_null();
		(void)json_array_append_new(array, one);
	}
	return array;
}

static json_t *metric_json(const struct comparison *all, const struct compared_metric *metric)
{
	json_t *object = json_pack(
	    "{ss ss ss ss ss ss so so so sb sb sb sb so so so}", "suite", metric->suite, "test",
	    metric->test, "check", metric->check, "metric", metric->name, "unit", metric->unit,
	    "evidence", metric->evidence, "values", values_json(all, metric), "change",
	    real(metric->change), "uncertainty", real(metric->uncertainty), "significant",
	    metric->significant, "worse", metric->worse, "flipped", metric->flipped, "limit_changed",
	    metric->limit_changed, "margin_before", real(metric->margin_before), "margin_after",
	    real(metric->margin_after), "margin_lost_share", real(metric->lost));
	if (object && all->run_count > 2)
		(void)json_object_set_new(object, "trend",
		                          json_pack("{so so sb}", "per_run", real(metric->slope),
		                                    "uncertainty", real(metric->slope_uncertainty),
		                                    "significant", metric->trend));
	return object;
}

char *comparison_json(const struct comparison *comparison)
{
	json_t *runs = json_array(), *metrics = json_array(), *tests = json_array();
	bool failed = !runs || !metrics || !tests;
	for (size_t r = 0; r < comparison->run_count; r++) {
		const struct compared_run *run = &comparison->runs[r];
		failed |= json_array_append_new(runs, json_pack("{ss ss ss ss ss sb sb}", "path", run->path,
		                                                "rig", run->rig, "started", run->started,
		                                                "identities", run->identities, "verdict",
		                                                run->verdict, "rehearsal", run->rehearsal,
		                                                "partial", run->partial)) < 0;
	}
	for (size_t i = 0; i < comparison->metric_count; i++)
		failed |=
		    json_array_append_new(metrics, metric_json(comparison, &comparison->metrics[i])) < 0;
	for (size_t i = 0; i < comparison->test_count; i++) {
		const struct compared_test *test = &comparison->tests[i];
		json_t *verdicts = json_array();
		for (size_t r = 0; r < comparison->run_count; r++)
			(void)json_array_append_new(verdicts, string(test->verdicts[r]));
		failed |=
		    json_array_append_new(tests, json_pack("{ss ss so sb sb}", "suite", test->suite, "test",
		                                           test->test, "verdicts", verdicts, "flipped",
		                                           test->flipped, "worse", test->worse)) < 0;
	}
	json_t *root = json_pack("{si sf so so so s{sI sI sI sI}}", "format", 1, "share",
	                         comparison->share, "runs", runs, "metrics", metrics, "tests", tests,
	                         "counts", "significant", (json_int_t)comparison->significant, "worse",
	                         (json_int_t)comparison->worse, "flips", (json_int_t)comparison->flips,
	                         "missing", (json_int_t)comparison->missing);
	char *bytes =
	    root && !failed ? json_dumps(root, JSON_INDENT(1) | JSON_REAL_PRECISION(15)) : NULL;
	json_decref(root);
	return bytes;
}
