/* SPDX-License-Identifier: Apache-2.0 */
/*
 * `limits` of a check: which metric must lie where. A limit is stored in the
 * unit in which its metric is given (time in s, angles in deg, shares in %),
 * and the unit that the user wrote is kept for the reports. A limit that no
 * measurement can meet, or that none can miss, is a fault of the file.
 */
#include <math.h>
#include <string.h>

#include "loading.h"

struct limit_file {
	int decision;
};

static const char *const DECISIONS[] = {"guarded", "simple", NULL};

static const struct field LIMIT_FIELDS[] = {
    {.key = "min", .kind = FIELD_OWN, .text = "the metric must not be below it"},
    {.key = "max", .kind = FIELD_OWN, .text = "the metric must not be above it"},
    {.key = "is", .kind = FIELD_OWN, .text = "yes or no, for metrics that are either"},
    {.key = "requirement",
     .kind = FIELD_OWN,
     .text = "the requirement that this limit shows; without it that of the test"},
    {.key = "decision",
     .kind = FIELD_CHOICE,
     .choices = DECISIONS,
     .offset = offsetof(struct limit_file, decision),
     .text = "guarded or simple; without it that of the test"},
};

static const struct field_table LIMIT_TABLE = {"limit", "What a metric must be.", LIMIT_FIELDS,
                                               FIELD_COUNT(LIMIT_FIELDS)};

const struct field_table *limit_fields(void)
{
	return &LIMIT_TABLE;
}

/* The channel in whose unit a level is judged: `channel`, else the first one named. */
static int metric_channel(struct loading *l, const struct check_kind *kind)
{
	const struct field *field = field_find(kind->fields, "channel", strlen("channel"));
	for (size_t i = 0; !field && i < kind->fields->count; i++)
		if (kind->fields->fields[i].kind == FIELD_CHANNEL)
			field = &kind->fields->fields[i];
	const struct yaml_node *node = field ? yaml_get(l->check_map, field->key) : NULL;
	node = node && node->kind == YAML_SCALAR ? values_substitute(l, node) : NULL;
	return node ? rig_channel_find(l->rig, node->text, node->length) : -1;
}

static const struct dimension *shape_dimension(enum metric_shape shape)
{
	switch (shape) {
	case METRIC_TIME:
		return &DIM_TIME;
	case METRIC_ANGLE_ELEC:
		return &DIM_ANGLE_ELEC;
	case METRIC_ANGLE_MECH:
		return &DIM_ANGLE_MECH;
	default:
		return &DIM_NUMBER;
	}
}

/* One bound in the metric's unit. channel: of a level, else -1. */
static bool bound_load(struct loading *l, const struct yaml_node *node,
                       const struct metric_kind *metric, int channel, double *ret,
                       const struct unit **ret_shown)
{
	struct quantity quantity;
	bool level = metric->shape == METRIC_LEVEL || metric->shape == METRIC_LEVEL_TIME;
	if (level && channel < 0)
		return false; /* its channel has a fault already */
	const struct unit *unit = level ? l->rig->channels[channel].info.unit : NULL;
	switch (metric->shape) {
	case METRIC_LEVEL:
		if (!bind_quantity(&l->binder, node, unit, &unit->dimension, &quantity))
			return false;
		*ret = quantity_in(quantity, unit);
		*ret_shown = quantity.unit;
		return level_possible(l, node, channel, *ret);
	case METRIC_LEVEL_TIME:
	case METRIC_COUNT:
		return bind_number(&l->binder, node, ret);
	case METRIC_PERCENT:
		if (!bind_quantity(&l->binder, node, unit_one(), &DIM_NUMBER, &quantity))
			return false;
		if (quantity.unit != unit_percent() && quantity.value != 0) {
			faults_add(l->faults, node->at, "%s is a percentage: write it with %%, as in 12 %%",
			           metric->name);
			return false;
		}
		*ret = quantity.value;
		*ret_shown = unit_percent();
		return true;
	default:
		if (!bind_quantity(&l->binder, node, NULL, shape_dimension(metric->shape), &quantity))
			return false;
		*ret = metric->shape == METRIC_TIME ? quantity_si(quantity)
		                                    : quantity_in(quantity, unit_find("deg", 3));
		*ret_shown = quantity.unit;
		if (metric->shape != METRIC_ANGLE_ELEC || fabs(*ret) <= 180)
			return true;
		faults_add(l->faults, node->at,
		           "%s lies between -180 deg and 180 deg: the limit could never be reached",
		           metric->name);
		return false;
	}
}

static bool yes_no_load(struct loading *l, const struct yaml_node *mapping,
                        const struct metric_kind *metric, struct limit *limit)
{
	const struct yaml_node *is = yaml_get(mapping, "is");
	if (yaml_get(mapping, "min") || yaml_get(mapping, "max") || !is) {
		faults_add(l->faults, mapping->at,
		           "%s is a question: its limit is `{is: yes}` or `{is: no}`", metric->name);
		return false;
	}
	bool yes;
	if (!bind_yes_no(&l->binder, is, &yes))
		return false;
	limit->min = limit->max = yes ? 1 : 0;
	return true;
}

static bool range_load(struct loading *l, const struct yaml_node *mapping,
                       const struct metric_kind *metric, int channel, struct limit *limit)
{
	const struct yaml_node *is = yaml_get(mapping, "is");
	const struct yaml_node *min = yaml_get(mapping, "min"), *max = yaml_get(mapping, "max");
	if (is)
		faults_add(l->faults, is->at, "%s is a measured value: its limits are `min` and `max`",
		           metric->name);
	else if (!min && !max)
		faults_add(l->faults, mapping->at, "the limit of %s limits nothing: give min, max or both",
		           metric->name);
	if (is || (!min && !max))
		return false;
	if (min && !bound_load(l, min, metric, channel, &limit->min, &limit->shown_unit))
		return false;
	if (max && !bound_load(l, max, metric, channel, &limit->max, &limit->shown_unit))
		return false;
	if (limit->min > limit->max)
		faults_add(l->faults, mapping->at, "min is above max: the limits of %s exclude every value",
		           metric->name);
	else if (limit->min == limit->max && metric->shape != METRIC_COUNT)
		faults_add(
		    l->faults, mapping->at,
		    "min and max of %s are equal: no measured value with its uncertainty lies inside",
		    metric->name);
	else if (metric->shape == METRIC_TIME && limit->max < 0)
		faults_add(l->faults, mapping->at,
		           "%s is a time and never negative: the limit excludes "
		           "every value",
		           metric->name);
	else
		return true;
	return false;
}

/* The keys of a limit that belong to the metric's own options. */
static const struct yaml_node *options_of(struct loading *l, const struct yaml_node *mapping,
                                          const struct field_table *options)
{
	struct yaml_node *part = arena_alloc(l->arena, sizeof *part);
	struct yaml_pair *pairs = arena_array(l->arena, mapping->count + 1, sizeof *pairs);
	if (!part || !pairs)
		return loading_no_memory(l);
	*part = (struct yaml_node){.kind = YAML_MAPPING, .at = mapping->at, .pairs = pairs};
	for (size_t i = 0; i < mapping->count; i++)
		if (field_find(options, mapping->pairs[i].key->text, mapping->pairs[i].key->length))
			pairs[part->count++] = mapping->pairs[i];
	return part;
}

static void limit_load(struct loading *l, const struct yaml_node *mapping, size_t row,
                       struct check_use *use)
{
	const struct metric_kind *metric = &use->kind->metrics[row];
	struct limit_file file = {.decision = (int)l->rule};
	struct limit limit = {.metric = (int)row, .min = -HUGE_VAL, .max = HUGE_VAL};
	if (!bind_mapping_beside(&l->binder, &LIMIT_TABLE, metric->options, mapping, &file))
		return;
	if (metric->options) {
		const struct yaml_node *options = options_of(l, mapping, metric->options);
		if (!options || !bind_mapping(&l->binder, metric->options, options, use->params))
			return;
	}
	limit.rule = (enum decision_rule)file.decision;
	const struct yaml_node *requirement = yaml_get(mapping, "requirement");
	const char **texts;
	size_t count;
	if (requirement) {
		if (requirement->kind != YAML_SCALAR) {
			faults_add(l->faults, requirement->at, "a limit shows one requirement: name one");
			return;
		}
		if (!texts_load(l, requirement, false, "requirement", &texts, &count))
			return;
		limit.requirement = texts[0];
	}
	bool good = metric->shape == METRIC_YES_NO
	                ? yes_no_load(l, mapping, metric, &limit)
	                : range_load(l, mapping, metric, metric_channel(l, use->kind), &limit);
	if (good)
		use->limits[use->limit_count++] = limit;
}

static size_t metric_row(struct loading *l, const struct check_kind *kind,
                         const struct yaml_node *key)
{
	const char *names[CHECK_METRICS_MOST];
	for (size_t i = 0; i < kind->metric_count; i++) {
		names[i] = kind->metrics[i].name;
		if (strcmp(names[i], key->text) == 0)
			return i;
	}
	char buffer[YAML_SHOWN];
	const char *nearest = text_nearest(key->text, names, kind->metric_count);
	(void)yaml_shown(key->text, key->length, buffer);
	if (nearest) {
		faults_add(l->faults, key->at, "%s has no metric '%s'; did you mean '%s'?", kind->name,
		           buffer, nearest);
		return kind->metric_count;
	}
	struct text all;
	text_init(&all, 400);
	for (size_t i = 0; i < kind->metric_count; i++)
		text_printf(&all, "%s%s", i ? ", " : "", names[i]);
	faults_add(l->faults, key->at, "%s has no metric '%s': it has %s", kind->name, buffer,
	           text_string(&all));
	text_release(&all);
	return kind->metric_count;
}

/* Options have defaults also where the metric has no limit in the file. */
static void options_default(struct loading *l, const struct yaml_node *limits,
                            struct check_use *use)
{
	struct yaml_node empty = {.kind = YAML_MAPPING, .at = limits->at};
	for (size_t i = 0; i < use->kind->metric_count; i++)
		if (use->kind->metrics[i].options)
			(void)bind_mapping(&l->binder, use->kind->metrics[i].options, &empty, use->params);
}

void limits_load(struct loading *l, const struct yaml_node *limits, struct check_use *use)
{
	if (!bind_expect(&l->binder, limits, YAML_MAPPING, "'limits'"))
		return;
	if (limits->count == 0) {
		faults_add(l->faults, limits->at, "check %s has no limits, so it could not fail",
		           use->kind->name);
		return;
	}
	use->limits = arena_array(l->arena, limits->count, sizeof *use->limits);
	if (!use->limits) {
		(void)loading_no_memory(l);
		return;
	}
	options_default(l, limits, use);
	for (size_t i = 0; i < limits->count; i++) {
		const struct yaml_node *mapping = limits->pairs[i].value;
		size_t row = metric_row(l, use->kind, limits->pairs[i].key);
		if (row < use->kind->metric_count &&
		    bind_expect(&l->binder, mapping, YAML_MAPPING, "a limit"))
			limit_load(l, mapping, row, use);
	}
}
