/* SPDX-License-Identifier: Apache-2.0 */
/*
 * See reference.h. A page written by hand was rejected: it would be wrong after
 * the first change of a table.
 */
#include "reference.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include "derive.h"
#include "model.h"
#include "rig_loader.h"
#include "step_kind.h"
#include "suite.h"

/* The mappings of both files, by the name that `help` knows them by. */
static const struct mapping {
	const char *name, *where;
	const struct field_table *(*table)(void);
	const struct field_table *fixed;
} MAPPINGS[] = {
    {"rig", "the rig file", NULL, &RIG_FIELDS},
    {"link", "links", NULL, &RIG_LINK_FIELDS},
    {"device", "devices", NULL, &RIG_DEVICE_FIELDS},
    {"watchdog", "devices, watchdog", NULL, &RIG_WATCHDOG_FIELDS},
    {"machine", "machine", NULL, &RIG_MACHINE_FIELDS},
    {"channel", "channels", NULL, &RIG_CHANNEL_FIELDS},
    {"derived", "channels, computed ones", NULL, &RIG_DERIVED_FIELDS},
    {"accuracy", "channels, accuracy", NULL, &RIG_ACCURACY_FIELDS},
    {"condition", "wherever something must hold", condition_fields, NULL},
    {"before", "before, beside a condition", NULL, &RIG_PRECONDITION_FIELDS},
    {"direction", "direction", NULL, &RIG_DIRECTION_FIELDS},
    {"attempts", "attempts", NULL, &RIG_ATTEMPT_FIELDS},
    {"model", "model", NULL, &RIG_MODEL_FIELDS},
    {"parameters", "model, parameters", model_parameters, NULL},
    {"suite", "the suite file", suite_fields, NULL},
    {"sample", "sample", sample_fields, NULL},
    {"test", "tests", test_fields, NULL},
    {"check", "checks, beside the fields of its kind", check_fields, NULL},
    {"window", "checks, window", window_fields, NULL},
    {"limit", "checks, limits, METRIC", limit_fields, NULL},
};

static const struct field_table *table_of(const struct mapping *mapping)
{
	return mapping->table ? mapping->table() : mapping->fixed;
}

/* ---- fields -------------------------------------------------------------------------- */

static void kind_text(const struct field *field, struct text *out)
{
	static const char *const KINDS[] = {
	    [FIELD_OWN] = "",
	    [FIELD_NAME] = "name",
	    [FIELD_TEXT] = "text",
	    [FIELD_YES_NO] = "yes or no",
	    [FIELD_INTEGER] = "whole number",
	    [FIELD_NUMBER] = "number",
	    [FIELD_QUANTITY] = "quantity",
	    [FIELD_DURATION] = "time",
	    [FIELD_CHOICE] = "",
	    [FIELD_CHANNEL] = "channel",
	    [FIELD_CHANNELS] = "channels",
	    [FIELD_MARK] = "mark",
	    [FIELD_LEVEL] = "level, in the channel's unit",
	    [FIELD_LEVELS] = "[least, most], in the channel's unit",
	    [FIELD_WINDOW] = "window",
	    [FIELD_CONDITION] = "condition",
	    [FIELD_LINE_NAME] = "name of an attempt",
	};
	char buffer[160];
	if (field->kind == FIELD_QUANTITY && field->dimension)
		text_printf(out, "%s", dimension_name(*field->dimension, buffer, sizeof buffer));
	else
		text_puts(out, KINDS[field->kind]);
	for (size_t i = 0; field->choices && field->choices[i]; i++)
		text_printf(out, "%s`%s`", i ? ", " : "", field->choices[i]);
}

static void field_line(const struct field *field, struct text *out)
{
	char bounds[160];
	struct text kind;
	text_init(&kind, 1024);
	kind_text(field, &kind);
	text_printf(out, "- `%s`", field->key);
	if (kind.length > 0)
		text_printf(out, " (%s)", text_string(&kind));
	text_printf(out, ": %s", field->text ? field->text : "");
	if (field_bounds_text(field, bounds, sizeof bounds)[0])
		text_printf(out, "; %s", bounds);
	if (field->flags & FIELD_REQUIRED)
		text_puts(out, "; needed");
	else if (field->fallback && field->fallback[0])
		text_printf(out, "; default %s", field->fallback);
	text_puts(out, "\n");
	text_release(&kind);
}

static void fields_list(const struct field_table *table, struct text *out)
{
	for (size_t i = 0; table && i < table->count; i++)
		field_line(&table->fields[i], out);
}

/* ---- entries ------------------------------------------------------------------------- */

static void mapping_entry(const struct mapping *mapping, struct text *out)
{
	const struct field_table *table = table_of(mapping);
	text_printf(out, "### %s\n\n%s Stands in: %s.\n\n", mapping->name, table->text, mapping->where);
	fields_list(table, out);
	text_puts(out, "\n");
}

static void step_entry(const struct step_row *row, struct text *out)
{
	text_printf(out, "### %s\n\n%s.\n\n", row->name, row->text);
	fields_list(row->fields, out);
	text_puts(out, row->fields ? "\n" : "");
}

static const char *shape_text(enum metric_shape shape)
{
	switch (shape) {
	case METRIC_TIME:
		return "time";
	case METRIC_LEVEL:
		return "in the channel's unit";
	case METRIC_PERCENT:
		return "percent";
	case METRIC_ANGLE_ELEC:
		return "electrical angle";
	case METRIC_ANGLE_MECH:
		return "mechanical angle";
	case METRIC_COUNT:
		return "plain number";
	case METRIC_YES_NO:
		return "yes or no";
	case METRIC_LEVEL_TIME:
		return "the channel's unit times seconds";
	}
	return "";
}

static void check_entry(const struct check_kind *kind, struct text *out)
{
	text_printf(out, "### %s\n\n%s. Fields:\n\n", kind->name, kind->text);
	fields_list(kind->fields, out);
	text_puts(out, "\nMetrics, for `limits`:\n\n");
	for (size_t m = 0; m < kind->metric_count; m++) {
		const struct metric_kind *metric = &kind->metrics[m];
		text_printf(out, "- `%s` (%s): %s\n", metric->name, shape_text(metric->shape),
		            metric->text);
		for (size_t i = 0; metric->options && i < metric->options->count; i++) {
			text_puts(out, "  ");
			field_line(&metric->options->fields[i], out);
		}
	}
	text_puts(out, "\n");
}

static void derived_entry(const struct derive_kind *kind, struct text *out)
{
	text_printf(out, "### %s\n\n%s. Inputs:", kind->name, kind->text);
	for (size_t i = 0; i < DERIVE_INPUTS_MOST && kind->inputs[i]; i++)
		text_printf(out, "%s `%s`%s", i ? "," : "", kind->inputs[i],
		            i < kind->required ? "" : " (may be left out)");
	text_puts(out, ".\n\n");
}

static void unit_line(const struct unit *unit, struct text *out)
{
	char buffer[160];
	text_printf(out, "- `%s`: %s; %s\n", unit->name, unit->text,
	            dimension_name(unit->dimension, buffer, sizeof buffer));
}

/* ---- the page -------------------------------------------------------------------------- */

void reference_page(struct text *out)
{
	size_t count;
	const struct check_kind *const *checks = check_table(&count);
	text_puts(out, "# Reference\n\nEvery key of rig and suite files, every step, check, metric, "
	               "derived channel and unit.\nMade by `drivetrial help reference`.\n\n"
	               "## Keys\n\n");
	for (size_t i = 0; i < FIELD_COUNT(MAPPINGS); i++)
		mapping_entry(&MAPPINGS[i], out);
	text_puts(out,
	          "## Steps\n\nIn `stimulus`, `restore`, `safe_state`, and where a rig says steps. "
	          "Every step may bear `mark: NAME`.\n\n");
	for (const struct step_row *row = step_rows(); row->name; row++)
		step_entry(row, out);
	text_puts(out, "## Checks\n\n");
	for (size_t i = 0; i < count; i++)
		check_entry(checks[i], out);
	const struct derive_kind *const *derived = derive_table(&count);
	text_puts(out, "## Derived channels\n\n");
	for (size_t i = 0; i < count; i++)
		derived_entry(derived[i], out);
	const struct unit *units = unit_table(&count);
	text_puts(out, "## Units\n\n");
	for (size_t i = 0; i < count; i++)
		unit_line(&units[i], out);
}

/* Calls `take` with every name that help knows, until it says true. */
enum group { GROUP_CHECK, GROUP_STEP, GROUP_DERIVED, GROUP_MAPPING, GROUP_UNIT, GROUP_COUNT };

static size_t names_of(enum group group, const char **names, size_t most)
{
	size_t count = 0, n = 0;
	const struct check_kind *const *checks = check_table(&count);
	for (size_t i = 0; group == GROUP_CHECK && i < count && n < most; i++)
		names[n++] = checks[i]->name;
	for (const struct step_row *row = step_rows(); group == GROUP_STEP && row->name && n < most;
	     row++)
		names[n++] = row->name;
	const struct derive_kind *const *derived = derive_table(&count);
	for (size_t i = 0; group == GROUP_DERIVED && i < count && n < most; i++)
		names[n++] = derived[i]->name;
	for (size_t i = 0; group == GROUP_MAPPING && i < FIELD_COUNT(MAPPINGS) && n < most; i++)
		names[n++] = MAPPINGS[i].name;
	const struct unit *units = unit_table(&count);
	for (size_t i = 0; group == GROUP_UNIT && i < count && n < most; i++)
		names[n++] = units[i].name;
	return n;
}

static void put_entry(enum group group, size_t index, struct text *out)
{
	size_t count;
	switch (group) {
	case GROUP_CHECK:
		check_entry(check_table(&count)[index], out);
		break;
	case GROUP_STEP:
		step_entry(&step_rows()[index], out);
		break;
	case GROUP_DERIVED:
		derived_entry(derive_table(&count)[index], out);
		break;
	case GROUP_MAPPING:
		mapping_entry(&MAPPINGS[index], out);
		break;
	case GROUP_UNIT:
		unit_line(&unit_table(&count)[index], out);
		break;
	case GROUP_COUNT:
		break;
	}
}

enum { NAMES_MOST = 256 };

bool reference_entry(const char *name, struct text *out, const char **ret_nearest)
{
	const char *names[NAMES_MOST];
	bool found = false;
	*ret_nearest = NULL;
	for (int group = 0; group < GROUP_COUNT; group++) {
		size_t count = names_of((enum group)group, names, NAMES_MOST);
		for (size_t i = 0; i < count; i++)
			if (strcmp(names[i], name) == 0) {
				put_entry((enum group)group, i, out);
				found = true;
			}
		if (!*ret_nearest)
			*ret_nearest = text_nearest(name, names, count);
	}
	return found;
}

void reference_names(struct text *out)
{
	static const char *const TITLES[] = {"checks", "steps", "derived channels", "keys of", "units"};
	const char *names[NAMES_MOST];
	for (int group = 0; group < GROUP_COUNT; group++) {
		size_t count = names_of((enum group)group, names, NAMES_MOST), column = 0;
		text_printf(out, "%s:\n   ", TITLES[group]);
		for (size_t i = 0; i < count; i++) {
			if (column + strlen(names[i]) > 72) {
				text_puts(out, "\n   ");
				column = 0;
			}
			text_printf(out, " %s", names[i]);
			column += strlen(names[i]) + 1;
		}
		text_puts(out, "\n");
	}
}
