/* SPDX-License-Identifier: Apache-2.0 */
/* See plan_show.h. Times of a metric are shown in ms, everything else in its own unit. */
#include "plan_show.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include <jansson.h>

#include "put.h"

static const struct unit *unit_of(const struct rig *rig, const struct plan_limit *limit)
{
	int channels[CHANNELS_OF_CHECK_MOST];
	const struct metric_kind *kind = &limit->use->kind->metrics[limit->limit->metric];
	const struct unit *channel =
	    check_channels(limit->use, channels) > 0 ? rig->infos[channels[0]].unit : NULL;
	return shape_unit(kind->shape, channel);
}

static const char *number(double value, const struct unit *unit, char *buffer, size_t size)
{
	if (strcmp(unit->name, "s") == 0)
		(void)snprintf(buffer, size, "%.4g ms", value * 1e3);
	else
		(void)snprintf(buffer, size, "%.4g%s%s", value, unit == unit_one() ? "" : " ",
		               unit == unit_one() ? "" : unit->name);
	return buffer;
}

static void show_bounds(const struct plan_limit *limit, const struct unit *unit, struct text *out)
{
	char a[64], b[64];
	const struct limit *l = limit->limit;
	if (limit->use->kind->metrics[l->metric].shape == METRIC_YES_NO)
		text_printf(out, "is %s", l->max > 0.5 ? "yes" : "no");
	else if (isinf(l->min))
		text_printf(out, "max %s", number(l->max, unit, a, sizeof a));
	else if (isinf(l->max))
		text_printf(out, "min %s", number(l->min, unit, a, sizeof a));
	else
		text_printf(out, "%s to %s", number(l->min, unit, a, sizeof a),
		            number(l->max, unit, b, sizeof b));
}

static void show_limit(const struct rig *rig, const struct plan_limit *limit, struct text *out)
{
	const struct metric_kind *kind = &limit->use->kind->metrics[limit->limit->metric];
	const struct unit *unit = unit_of(rig, limit);
	const struct answered *answered = &limit->answered;
	char a[64], b[64];
	text_printf(out, "    %-12s %s.%s ", answer_name(answered->answer), limit->use->name,
	            kind->name);
	show_bounds(limit, unit, out);
	if (kind->shape != METRIC_YES_NO && answered->answer != ANSWER_NONE &&
	    !answered->forecast.impossible) {
		const struct forecast *f = &answered->forecast;
		if (f->up == f->down)
			text_printf(out, "; expected +-%s", number(f->up, unit, a, sizeof a));
		else
			text_printf(out, "; expected -%s +%s", number(f->down, unit, a, sizeof a),
			            number(f->up, unit, b, sizeof b));
		if (!isnan(limit->known))
			text_printf(out, " at %s", number(limit->known, unit, a, sizeof a));
		if (isfinite(answered->sure_to) && isinf(limit->limit->min))
			text_printf(out, "; surely met up to %s", number(answered->sure_to, unit, a, sizeof a));
		else if (isfinite(answered->sure_from) && isfinite(answered->sure_to))
			text_printf(out, "; surely met from %s to %s",
			            number(answered->sure_from, unit, a, sizeof a),
			            number(answered->sure_to, unit, b, sizeof b));
	}
	text_puts(out, "\n");
	if (limit->remedy[0])
		text_printf(out, "                 %s\n", limit->remedy);
}

static void show_links(const struct plan *plan, const struct plan_row *row, struct text *out)
{
	const struct rig *rig = plan->timing->rig;
	char wanted[40], reach[40], best[40];
	for (size_t l = 0; l < rig->link_count; l++) {
		const struct plan_link *link = &row->plan.link[l];
		if (link->transactions == 0)
			continue;
		text_printf(out, "    %s: %zu transaction%s a sample, every %s", rig->links[l].name,
		            link->transactions, link->transactions == 1 ? "" : "s",
		            duration_text(link->reach_ns, reach, sizeof reach));
		if (link->wanted_ns > 0 && link->reach_ns > link->wanted_ns)
			text_printf(out, " (the suite wants %s; one round takes %s)",
			            duration_text(link->wanted_ns, wanted, sizeof wanted),
			            duration_text(link->round_ns, best, sizeof best));
		else
			text_printf(out, " (%s at best)", duration_text(link->round_ns, best, sizeof best));
		text_puts(out, "\n");
	}
}

static void show_marks(const struct plan_row *row, struct text *out)
{
	char at[40];
	bool any = false;
	const struct test *test = row->plan.test;
	for (size_t m = 0; m < test->marks.count; m++) {
		const struct plan_mark *mark = &row->plan.mark[m];
		if (!mark->set)
			continue;
		text_printf(out, "%s%s at %s%s", any ? ", " : "    marks: ", test->marks.names[m],
		            mark->certain ? "" : "the earliest ",
		            duration_text(mark->at_ns, at, sizeof at));
		any = true;
	}
	text_puts(out, any ? "\n" : "");
}

static void show_row(const struct plan *plan, const struct plan_row *row, struct text *out)
{
	char begin[40], whole[40], most[40];
	const struct test *test = row->plan.test;
	text_puts(out, "\n");
	text_add_line(out, test->name, strlen(test->name));
	text_puts(out, "  ");
	text_add_line(out, test->title, strlen(test->title));
	text_puts(out, "\n");
	text_printf(out, "    begins at %s, stimulus %s",
	            duration_text(row->plan.begin_ns, begin, sizeof begin),
	            duration_text(row->plan.stimulus_ns, whole, sizeof whole));
	text_printf(out, ", with restore and rest %s",
	            duration_text(row->plan.whole_ns, whole, sizeof whole));
	if (row->plan.whole_most_ns > row->plan.whole_ns + row->plan.whole_ns / 10)
		text_printf(out, " (at most %s)",
		            duration_text(row->plan.whole_most_ns, most, sizeof most));
	text_puts(out, "\n");
	show_marks(row, out);
	show_links(plan, row, out);
	for (size_t i = 0; i < row->limit_count; i++)
		show_limit(plan->timing->rig, &row->limits[i], out);
}

void plan_show(const struct plan *plan, struct text *out)
{
	char whole[40], most[40];
	text_printf(out, "rig %s; times of links %s%s\n", plan->timing->rig->name,
	            plan->timing->taken[0] ? "as a survey measured them, "
	                                   : "as the rig file says them",
	            plan->timing->taken);
	for (size_t i = 0; i < plan->count; i++)
		show_row(plan, &plan->rows[i], out);
	text_printf(out, "\n%zu tests, about %s, at most %s\n", plan->count,
	            duration_text(plan->whole_ns, whole, sizeof whole),
	            duration_text(plan->whole_most_ns, most, sizeof most));
	text_printf(out,
	            "%zu limits: %zu decidable, %zu open (they hang on where samples fall), %zu "
	            "undecidable%s\n",
	            plan->decidable + plan->open + plan->undecidable + plan->none, plan->decidable,
	            plan->open, plan->undecidable, plan->none ? "; others are not foreseen" : "");
	if (!plan->known_path)
		text_puts(out, "A limit counts as decidable if conformity can surely be shown for half of "
		               "what it allows.\n");
	else
		text_printf(out, "Limits are judged at the values of %s.\n", plan->known_path);
}

/* ---- JSON -------------------------------------------------------------------------- */

static json_t *real(double value)
{
	return isfinite(value) ? json_real(value) : json_null();
}

static json_t *limit_json(const struct rig *rig, const struct plan_limit *limit)
{
	const struct metric_kind *kind = &limit->use->kind->metrics[limit->limit->metric];
	const struct answered *answered = &limit->answered;
	return json_pack("{s:s,s:s,s:s,s:o,s:o,s:s,s:o,s:o,s:o,s:o,s:o,s:s,s:s}", "check",
	                 limit->use->name, "metric", kind->name, "unit", unit_of(rig, limit)->name,
	                 "min", real(limit->limit->min), "max", real(limit->limit->max), "answer",
	                 answer_name(answered->answer), "expected_up", real(answered->forecast.up),
	                 "expected_down", real(answered->forecast.down), "known", real(limit->known),
	                 "sure_from", real(answered->sure_from), "sure_to", real(answered->sure_to),
	                 "remedy", limit->remedy, "formula",
	                 answered->forecast.formula ? answered->forecast.formula : "");
}

static json_t *row_json(const struct rig *rig, const struct plan_row *row)
{
	json_t *links = json_array(), *limits = json_array();
	for (size_t l = 0; l < rig->link_count; l++) {
		const struct plan_link *link = &row->plan.link[l];
		if (link->transactions > 0)
			(void)json_array_append_new(
			    links,
			    json_pack("{s:s,s:I,s:I,s:I,s:I,s:I}", "link", rig->links[l].name, "transactions",
			              (json_int_t)link->transactions, "wanted_ns", (json_int_t)link->wanted_ns,
			              "reach_ns", (json_int_t)link->reach_ns, "reach_most_ns",
			              (json_int_t)link->reach_most_ns, "best_ns", (json_int_t)link->round_ns));
	}
	for (size_t i = 0; i < row->limit_count; i++)
		(void)json_array_append_new(limits, limit_json(rig, &row->limits[i]));
	return json_pack("{s:s,s:s,s:I,s:I,s:I,s:I,s:o,s:o}", "suite", row->plan.suite->name, "test",
	                 row->plan.test->name, "begin_ns", (json_int_t)row->plan.begin_ns,
	                 "stimulus_ns", (json_int_t)row->plan.stimulus_ns, "whole_ns",
	                 (json_int_t)row->plan.whole_ns, "whole_most_ns",
	                 (json_int_t)row->plan.whole_most_ns, "links", links, "limits", limits);
}

int plan_json(const struct plan *plan, struct text *out, struct err *reterr)
{
	const struct rig *rig = plan->timing->rig;
	json_t *tests = json_array();
	for (size_t i = 0; i < plan->count; i++)
		(void)json_array_append_new(tests, row_json(rig, &plan->rows[i]));
	json_t *root = json_pack(
	    "{s:i,s:s,s:s,s:I,s:I,s:{s:I,s:I,s:I,s:I},s:o}", "format", 1, "rig", rig->name,
	    "timing_taken", plan->timing->taken, "whole_ns", (json_int_t)plan->whole_ns,
	    "whole_most_ns", (json_int_t)plan->whole_most_ns, "limits", "decidable",
	    (json_int_t)plan->decidable, "open", (json_int_t)plan->open, "undecidable",
	    (json_int_t)plan->undecidable, "not_foreseen", (json_int_t)plan->none, "tests", tests);
	char *bytes = root ? json_dumps(root, JSON_INDENT(2)) : NULL;
	json_decref(root);
	if (!bytes)
		return err_set(reterr, ERR_NOMEM, "no memory for the plan");
	text_printf(out, "%s\n", bytes);
	free(bytes);
	return 0;
}
