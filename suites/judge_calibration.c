/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Calibration dates against the day of the run. Only instruments that a check
 * uses count, down through derived channels: a bench has many, and one that
 * nobody asked must not spoil a verdict. A failed test stays failed: an
 * instrument out of date is no excuse.
 */
#include "judge_calibration.h"

#include <stdio.h>
#include <string.h>

int64_t day_of(const char *utc)
{
	int year, month, day;
	if (sscanf(utc, "%4d-%2d-%2d", &year, &month, &day) != 3 || month < 1 || month > 12)
		return 0;
	/* Days of the proleptic Gregorian calendar, the year beginning in March. */
	int64_t y = month > 2 ? year : year - 1;
	int64_t era_days = y * 365 + y / 4 - y / 100 + y / 400;
	int64_t year_days = (153 * (month > 2 ? month - 3 : month + 9) + 2) / 5 + day - 1;
	return era_days + year_days - 719468;
}

/* The channels that a check reads, down to those with an instrument. */
static void channels_of(const struct rig *rig, const struct check_use *use, unsigned char *set)
{
	const struct field_table *table = use->kind->fields;
	for (size_t i = 0; i < table->count; i++) {
		const struct field *field = &table->fields[i];
		const unsigned char *at = (const unsigned char *)use->params + field->offset;
		if (field->flags & FIELD_COMMAND)
			continue;
		const int *items = NULL;
		size_t count = 0;
		if (field->kind == FIELD_CHANNEL) {
			items = (const int *)(const void *)at;
			count = 1;
		} else if (field->kind == FIELD_CONDITION) {
			items = &((const struct condition *)(const void *)at)->channel;
			count = 1;
		} else if (field->kind == FIELD_CHANNELS) {
			const struct int_list *list = (const struct int_list *)(const void *)at;
			items = list->items;
			count = list->count;
		}
		for (size_t k = 0; k < count; k++)
			if (items[k] >= 0)
				rig_channel_needs(rig, items[k], set);
	}
}

enum { SET_MOST = 4096 };

struct outdated {
	char text[200]; /* "" where none */
	bool required;
};

static void look_for(const struct rig *rig, int64_t day, const struct check_use *use,
                     struct outdated *ret)
{
	unsigned char set[SET_MOST] = {0};
	*ret = (struct outdated){0};
	if (rig->channel_count > SET_MOST)
		return; /* more than any rig file can hold within its size */
	channels_of(rig, use, set);
	for (size_t i = 0; i < rig->channel_count; i++) {
		const struct channel_info *info = &rig->infos[i];
		const struct accuracy *accuracy = &info->accuracy;
		if (!set[i] || accuracy->calibrated_until_day == 0 || accuracy->calibrated_until_day >= day)
			continue;
		size_t length = strlen(ret->text);
		(void)snprintf(ret->text + length, sizeof ret->text - length,
		               "%sthe calibration of %.40s ended %lld days before the run",
		               length ? ", " : "", info->name,
		               (long long)(day - accuracy->calibrated_until_day));
		ret->required |= accuracy->calibration_required;
	}
}

static void append(char *reason, size_t size, const char *text)
{
	size_t length = strlen(reason);
	if (!strstr(reason, text))
		(void)snprintf(reason + length, size - length, "%s%s", length ? "; " : "", text);
}

static void judge_one(const struct rig *rig, int64_t day, struct test_result *test)
{
	bool required = false;
	char first[200] = "";
	for (size_t c = 0; c < test->check_count; c++) {
		struct check_result *check = &test->checks[c];
		struct outdated outdated;
		if (check->metric_count == 0)
			continue; /* not evaluated: its verdict rests on nothing */
		look_for(rig, day, check->use, &outdated);
		if (!outdated.text[0])
			continue;
		if (!first[0])
			(void)snprintf(first, sizeof first, "%s", outdated.text);
		for (size_t m = 0; m < check->metric_count; m++)
			for (size_t l = 0; l < check->metrics[m].limit_count; l++) {
				struct limit_result *limit = &check->metrics[m].limits[l];
				append(limit->reason, sizeof limit->reason, outdated.text);
				if (outdated.required)
					limit->verdict = verdict_worse(limit->verdict, VERDICT_ERROR);
			}
		if (outdated.required)
			check->verdict = verdict_worse(check->verdict, VERDICT_ERROR);
		required |= outdated.required;
	}
	if (!first[0])
		return;
	if (required && test->verdict != VERDICT_FAIL) {
		test->verdict = VERDICT_ERROR;
		(void)snprintf(test->reason, sizeof test->reason,
		               "%s, and the rig file requires a valid calibration", first);
	} else {
		append(test->reason, sizeof test->reason, first);
	}
}

void judge_calibrations(const struct rig *rig, int64_t day, struct suite_result *suite)
{
	for (size_t i = 0; i < suite->test_count; i++)
		judge_one(rig, day, &suite->tests[i]);
}
