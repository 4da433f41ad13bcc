/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_TEST_RECORDING_H
#define DRIVETRIAL_TEST_RECORDING_H
/*
 * Recordings made in a test: channels, rows, marks, commands; and a check with
 * its fields set by name, as the loader of suite files does.
 */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "decision.h"
#include "near.h"

enum { RECORDING_CHANNELS = 8, RECORDING_MARKS = 8, RECORDING_COMMANDS = 2000 };

struct recorded_row {
	int64_t sent, received;
	double value;
};

struct recording {
	struct channel_info channels[RECORDING_CHANNELS];
	struct series series[RECORDING_CHANNELS];
	struct recorded_row *rows[RECORDING_CHANNELS];
	size_t room[RECORDING_CHANNELS], channel_count;
	struct mark marks[RECORDING_MARKS];
	size_t mark_count;
	struct command commands[RECORDING_COMMANDS];
	size_t command_count;
	struct outcome outcomes[RECORDING_MARKS];
	size_t outcome_count;
	struct machine machine;
	struct arena arena;
	int64_t begin_ns, end_ns, sample_ns;
};

#define MS(x) ((int64_t)llround((x)*1e6))
#define S(x)  ((int64_t)llround((x)*1e9))

static inline void recording_init(struct recording *rec)
{
	*rec = (struct recording){.sample_ns = MS(2)};
	arena_init(&rec->arena, 0);
	rec->machine = (struct machine){
	    .pole_pairs = 4,
	    .encoder_lines = 1024,
	    .rated_speed = {314.159265358979, 0},
	    .rated_torque = {2.4, 0},
	    .rated_current = {4.8, 0},
	};
}

static inline void recording_release(struct recording *rec)
{
	for (size_t i = 0; i < rec->channel_count; i++)
		free(rec->rows[i]);
	arena_release(&rec->arena);
}

/* Forgets rows, marks, commands and outcomes; channels stay. */
static inline void recording_clear(struct recording *rec)
{
	for (size_t i = 0; i < rec->channel_count; i++)
		rec->series[i].rows = 0;
	rec->mark_count = rec->command_count = rec->outcome_count = 0;
	arena_clear(&rec->arena);
}

static inline int recording_channel(struct recording *rec, const char *name, const char *unit,
                                    enum evidence evidence)
{
	size_t i = rec->channel_count++;
	assert_true(i < RECORDING_CHANNELS);
	rec->channels[i] = (struct channel_info){
	    .name = name,
	    .device = evidence == EVIDENCE_INDEPENDENT ? "bench" : "controller",
	    .unit = unit_find(unit, strlen(unit)),
	    .evidence = evidence,
	};
	assert_non_null(rec->channels[i].unit);
	return (int)i;
}

static inline void recording_add(struct recording *rec, int channel, int64_t sent, int64_t received,
                                 double value)
{
	struct series *series = &rec->series[channel];
	if (series->rows == rec->room[channel]) {
		rec->room[channel] = rec->room[channel] ? 2 * rec->room[channel] : 256;
		rec->rows[channel] =
		    realloc(rec->rows[channel], rec->room[channel] * sizeof *rec->rows[channel]);
		assert_non_null(rec->rows[channel]);
	}
	rec->rows[channel][series->rows] = (struct recorded_row){sent, received, value};
	*series = (struct series){
	    .channel = &rec->channels[channel],
	    .rows = series->rows + 1,
	    .row0 = (const unsigned char *)rec->rows[channel],
	    .stride = sizeof(struct recorded_row),
	    .earliest_at = offsetof(struct recorded_row, sent),
	    .latest_at = offsetof(struct recorded_row, received),
	    .value_at = offsetof(struct recorded_row, value),
	    .block = channel,
	};
}

/* A row that was true at exactly one instant. */
static inline void recording_at(struct recording *rec, int channel, int64_t t, double value)
{
	recording_add(rec, channel, t, t, value);
}

static inline int recording_mark(struct recording *rec, const char *name, int64_t earliest,
                                 int64_t latest)
{
	rec->marks[rec->mark_count] = (struct mark){name, earliest, latest, true};
	return (int)rec->mark_count++;
}

static inline void recording_command(struct recording *rec, int channel, double value,
                                     int64_t earliest, int64_t latest)
{
	assert_true(rec->command_count < RECORDING_COMMANDS);
	rec->commands[rec->command_count++] = (struct command){channel, value, earliest, latest};
}

/* A check with its fields. */
struct used_check {
	const struct check_kind *kind;
	_Alignas(max_align_t) unsigned char params[256];
	struct metric metrics[CHECK_METRICS_MOST];
	size_t count;
};

static inline void field_absent(const struct field *field, unsigned char *params)
{
	unsigned char *at = params + field->offset;
	const int none = -1;
	const double nan_value = (double)NAN;
	const struct window window = {-1, 0, 0};
	if (field->kind == FIELD_CHANNEL || field->kind == FIELD_MARK)
		memcpy(at, &none, sizeof none);
	else if (field->kind == FIELD_LEVEL)
		memcpy(at, &nan_value, sizeof nan_value);
	else if (field->kind == FIELD_LEVELS)
		for (size_t i = 0; i < 2; i++)
			memcpy(at + i * sizeof nan_value, &nan_value, sizeof nan_value);
	else if (field->kind == FIELD_WINDOW)
		memcpy(at, &window, sizeof window);
	if (!field->fallback)
		return;
	struct quantity quantity;
	int64_t ns;
	double si;
	int choice = 0;
	switch (field->kind) {
	case FIELD_DURATION:
		assert_int_equal(quantity_parse(field->fallback, strlen(field->fallback), NULL, &DIM_TIME,
		                                &quantity, NULL),
		                 0);
		assert_int_equal(quantity_ns(quantity, &ns, NULL), 0);
		memcpy(at, &ns, sizeof ns);
		break;
	case FIELD_QUANTITY:
		assert_int_equal(quantity_parse(field->fallback, strlen(field->fallback), NULL,
		                                field->dimension, &quantity, NULL),
		                 0);
		si = quantity_si(quantity);
		memcpy(at, &si, sizeof si);
		break;
	case FIELD_CHOICE:
		while (strcmp(field->choices[choice], field->fallback) != 0)
			choice++;
		memcpy(at, &choice, sizeof choice);
		break;
	case FIELD_TEXT:
		memcpy(at, &field->fallback, sizeof field->fallback);
		break;
	default:
		fail_msg("no default is known for the field %s", field->key);
	}
}

static inline void check_use(struct used_check *use, const char *name)
{
	*use = (struct used_check){.kind = check_find(name, strlen(name))};
	assert_non_null(use->kind);
	assert_true(use->kind->params_size <= sizeof use->params);
	for (size_t i = 0; i < use->kind->fields->count; i++)
		field_absent(&use->kind->fields->fields[i], use->params);
	for (size_t m = 0; m < use->kind->metric_count; m++)
		if (use->kind->metrics[m].options)
			for (size_t i = 0; i < use->kind->metrics[m].options->count; i++)
				field_absent(&use->kind->metrics[m].options->fields[i], use->params);
}

/* The place of a field, of the check or of one of its metrics' options. */
static inline unsigned char *check_field(struct used_check *use, const char *key)
{
	const struct field *field = field_find(use->kind->fields, key, strlen(key));
	for (size_t m = 0; !field && m < use->kind->metric_count; m++)
		if (use->kind->metrics[m].options)
			field = field_find(use->kind->metrics[m].options, key, strlen(key));
	assert_non_null(field);
	return use->params + field->offset;
}

static inline void check_int(struct used_check *use, const char *key, int value)
{
	memcpy(check_field(use, key), &value, sizeof value);
}

static inline void check_ns(struct used_check *use, const char *key, int64_t value)
{
	memcpy(check_field(use, key), &value, sizeof value);
}

static inline void check_double(struct used_check *use, const char *key, double value)
{
	memcpy(check_field(use, key), &value, sizeof value);
}

static inline void check_text(struct used_check *use, const char *key, const char *value)
{
	memcpy(check_field(use, key), &value, sizeof value);
}

static inline void check_window(struct used_check *use, int from, int64_t after, int64_t length)
{
	const struct window window = {from, after, length};
	memcpy(check_field(use, "window"), &window, sizeof window);
}

static inline void check_list(struct used_check *use, const char *key, int *items, size_t count)
{
	const struct int_list list = {items, count};
	memcpy(check_field(use, key), &list, sizeof list);
}

static inline void check_run(struct used_check *use, struct recording *rec)
{
	const struct check_input in = {
	    .series = rec->series,
	    .channels = rec->channels,
	    .channel_count = rec->channel_count,
	    .marks = rec->marks,
	    .mark_count = rec->mark_count,
	    .outcomes = rec->outcomes,
	    .outcome_count = rec->outcome_count,
	    .commands = rec->commands,
	    .command_count = rec->command_count,
	    .machine = &rec->machine,
	    .begin_ns = rec->begin_ns,
	    .end_ns = rec->end_ns,
	    .sample_ns = rec->sample_ns,
	    .scratch = &rec->arena,
	};
	struct err err = {0};
	assert_int_equal(use->kind->evaluate(&in, use->params, use->metrics, &use->count, &err), 0);
	assert_int_equal(use->count, use->kind->metric_count);
	for (size_t i = 0; i < use->count; i++)
		assert_ptr_equal(use->metrics[i].kind, &use->kind->metrics[i]);
}

static inline int check_verify(struct used_check *use, struct recording *rec, struct err *reterr)
{
	return use->kind->verify ? use->kind->verify(use->params, rec->channels, &rec->machine, reterr)
	                         : 0;
}

static inline const struct metric *check_metric(const struct used_check *use, const char *name)
{
	for (size_t i = 0; i < use->count; i++)
		if (strcmp(use->metrics[i].kind->name, name) == 0)
			return &use->metrics[i];
	fail_msg("no metric %s", name);
	return NULL;
}

/* The guarded verdict against [min, max]. */
static inline enum verdict decided(const struct metric *metric, double min, double max)
{
	char reason[512];
	const struct limit limit = {.min = min, .max = max};
	return decide(metric, &limit, reason, sizeof reason);
}

/* Limits just beyond the interval pass, beside it fail, across it are open. */
static inline void assert_edges(const struct metric *metric)
{
	double width = metric->high - metric->low, small = 1e-9 + 1e-6 * width;
	double none = -(double)INFINITY;
	assert_int_equal(decided(metric, none, metric->high + small), VERDICT_PASS);
	assert_int_equal(decided(metric, none, metric->low - small), VERDICT_FAIL);
	if (width > 0)
		assert_int_equal(decided(metric, none, metric->high - width / 2), VERDICT_INCONCLUSIVE);
}

/* NaN in all values of a channel between two times (ms, sent). */
static inline void recording_hole(struct recording *rec, int channel, double from, double to)
{
	for (size_t i = 0; i < rec->series[channel].rows; i++)
		if (rec->rows[channel][i].sent >= MS(from) && rec->rows[channel][i].sent <= MS(to))
			rec->rows[channel][i].value = (double)NAN;
}

static inline void assert_unknown(const struct metric *metric, const char *word)
{
	assert_true(isnan(metric->value));
	assert_true(metric->kind->shape == METRIC_YES_NO
	                ? metric->low == 0 && metric->high == 1
	                : metric->low == (double)-INFINITY && metric->high == (double)INFINITY);
	if (!strstr(metric->note, word))
		fail_msg("the note \"%s\" does not say \"%s\"", metric->note, word);
}

static inline void assert_known(const struct metric *metric)
{
	if (!(metric->low <= metric->value && metric->value <= metric->high))
		fail_msg("%s: %g not in [%g, %g]: %s", metric->kind->name, metric->value, metric->low,
		         metric->high, metric->note);
}

static inline void assert_yes_no(const struct metric *metric, bool yes)
{
	double wanted = yes ? 1 : 0;
	if (!(metric->value == wanted && metric->low == wanted && metric->high == wanted))
		fail_msg("%s is %g, not %g: %s", metric->kind->name, metric->value, wanted, metric->note);
}

/* Random numbers that are the same everywhere: SplitMix64 and Box-Muller. */
struct random {
	uint64_t state;
};

static inline double random_uniform(struct random *random)
{
	uint64_t z = (random->state += UINT64_C(0x9e3779b97f4a7c15));
	z = (z ^ (z >> 30)) * UINT64_C(0xbf58476d1ce4e5b9);
	z = (z ^ (z >> 27)) * UINT64_C(0x94d049bb133111eb);
	z ^= z >> 31;
	return ((double)(z >> 11) + 0.5) * 0x1p-53;
}

static inline double random_between(struct random *random, double low, double high)
{
	return low + (high - low) * random_uniform(random);
}

static inline double random_normal(struct random *random)
{
	double radius = sqrt(-2 * log(random_uniform(random)));
	return radius * cos(6.283185307179586 * random_uniform(random));
}

#endif
