/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Whatever the samples and the fields, every check gives each of its metrics
 * once: an interval with its value inside, or unknown with a reason; and where
 * memory runs out it says so instead. Recordings are spoiled at random: NaN,
 * rows twice, gaps, few rows, marks not reached, channels that nobody sampled.
 */
#include "recording.h"

enum { DRAWS = 6000, CHANNELS = 8, MOST_ROWS = 120 };

static const char *const units[CHANNELS] = {"rpm", "deg", "A_peak",   "Nm",
                                            "1",   "V",   "deg_mech", "1"};

static double value_at(struct random *random, int channel, int shape, double t)
{
	double noise = (shape & 1 ? 0.01 : 0) * random_normal(random);
	double wave = shape & 2 ? sin(0.1 * t) : t > 0 ? 1 - exp(-t / 10) * cos(t / 5) : 0;
	switch (channel) {
	case 0:
		return 1000 * (shape & 4 ? -1 : 1) * (wave + noise);
	case 1:
		return 90 * (shape & 4 ? -1 : 1) + (shape & 8 ? 30 * wave : noise);
	case 4:
		return t > 20 ? 3 : 0;
	case 6:
		return remainder(t * 3, 360);
	default:
		return shape & 8 ? 5 + noise : wave + noise;
	}
}

static void play(struct recording *rec, struct random *random)
{
	recording_clear(rec);
	rec->begin_ns = MS(-60);
	rec->end_ns = MS(120);
	int shape = (int)random_between(random, 0, 16), spoil = (int)random_between(random, 0, 12);
	double h = random_between(random, 1, 4);
	for (int c = 0; c < CHANNELS; c++) {
		rec->channels[c].resolution = spoil == 1 ? 0.5 : 0;
		rec->channels[c].accuracy =
		    (struct accuracy){.given = spoil == 2, .absolute = spoil == 2 ? 0.1 : 0};
		rec->channels[c].refresh_ns = spoil == 3 ? MS(2) : 0;
		rec->channels[c].evidence = shape & 1 ? EVIDENCE_INDEPENDENT : EVIDENCE_SELF_REPORTED;
	}
	for (double t = -59; t < 119; t += h)
		for (int c = 0; c < CHANNELS; c++) {
			double value = value_at(random, c, shape, t);
			double sent = spoil == 4 ? t + 0.1 * c : t;
			if (spoil == 5 && random_uniform(random) < 0.1)
				value = (double)NAN;
			if (spoil == 6 && t > 30 && t < 60)
				continue;
			if (spoil == 7 && t > 10)
				continue;
			if (spoil == 8 && c % 3 == 1)
				continue;
			recording_add(rec, c, MS(sent), MS(sent + 0.3), value);
			if (spoil == 9 && random_uniform(random) < 0.02)
				recording_add(rec, c, MS(sent), MS(sent + 0.3), value);
		}
	for (int c = 0; c < CHANNELS; c++)
		rec->series[c].block = spoil == 4 ? c : 1;
	recording_mark(rec, "a", MS(0), MS(spoil == 10 ? 5 : 0));
	recording_mark(rec, "b", MS(40), MS(41));
	recording_mark(rec, "c", MS(60), MS(61));
	rec->marks[2].reached = spoil != 11;
	recording_command(rec, 0, 1000, MS(-1), MS(0));
	recording_command(rec, 3, 1, MS(-50), MS(-50));
	for (int k = 0; k < (shape & 2 ? 20 : 0); k++)
		recording_command(rec, 0, 50 * k, MS(10 + 3 * k), MS(10.5 + 3 * k));
	static const enum outcome_status states[] = {OUTCOME_EXCEPTION, OUTCOME_ACCEPTED,
	                                             OUTCOME_NO_REPLY, OUTCOME_NOT_MADE};
	rec->outcomes[0] = (struct outcome){"x", states[shape & 3], 2, shape & 4 ? 2 : 3, MS(5), MS(6)};
	rec->outcome_count = 1;
}

static void draw_field(struct used_check *use, const struct field *field, struct random *random,
                       struct random *odd)
{
	static int list[2];
	static const char *const targets[] = {"by_torque_sign", "90 deg", "60 deg to 120 deg",
	                                      "maximum_torque_per_ampere", "voltage_limit"};
	bool given = (field->flags & FIELD_REQUIRED) || random_uniform(random) < 0.6;
	int channel = (int)random_between(random, 0, CHANNELS);
	if (!given)
		return;
	switch (field->kind) {
	case FIELD_CHANNEL:
		check_int(use, field->key, channel);
		break;
	case FIELD_CHANNELS:
		list[0] = channel;
		list[1] = (channel + 3) % CHANNELS;
		check_list(use, field->key, list, random_uniform(odd) < 0.5 ? 1 : 2);
		break;
	case FIELD_MARK:
		check_int(use, field->key, (int)random_between(random, 0, 3));
		break;
	case FIELD_LEVEL:
		check_double(use, field->key, random_between(random, -1, 4));
		break;
	case FIELD_WINDOW:
		check_window(use, (int)random_between(random, -1, 3), MS(random_between(random, 0, 60)),
		             random_uniform(odd) < 0.5 ? 0 : MS(random_between(random, 1, 60)));
		break;
	case FIELD_TEXT:
		check_text(use, field->key, targets[(int)random_between(random, 0, 5)]);
		break;
	case FIELD_LINE_NAME:
		check_text(use, field->key, "x");
		break;
	case FIELD_CHOICE:
		check_int(use, field->key, random_uniform(odd) < 0.5);
		break;
	default:
		break;
	}
}

static void assert_complete(const struct used_check *use)
{
	for (size_t i = 0; i < use->count; i++) {
		const struct metric *metric = &use->metrics[i];
		bool inside = metric->low <= metric->value && metric->value <= metric->high;
		bool open = isnan(metric->value) && metric->low <= metric->high && metric->note[0];
		if (!inside && !open)
			fail_msg("%s.%s: %g in [%g, %g], \"%s\"", use->kind->name, metric->kind->name,
			         metric->value, metric->low, metric->high, metric->note);
		assert_non_null(metric->unit);
	}
}

static int evaluate(struct used_check *use, struct recording *rec, struct err *err)
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
	return use->kind->evaluate(&in, use->params, use->metrics, &use->count, err);
}

static void every_metric_is_an_interval_or_unknown_with_a_reason(void **state)
{
	(void)state;
	struct random random = {77}, odd = {78};
	struct recording rec;
	recording_init(&rec);
	for (int c = 0; c < CHANNELS; c++)
		recording_channel(&rec, units[c], units[c], EVIDENCE_INDEPENDENT);
	rec.channels[7].wraps = 4096;
	rec.machine.flux_linkage = (struct nameplate_value){0.1, 0.05};
	rec.machine.inductance_d = (struct nameplate_value){1e-3, 0.05};
	rec.machine.inductance_q = (struct nameplate_value){3e-3, 0};
	rec.machine.dc_voltage = (struct nameplate_value){300, 0};
	size_t kinds, verified = 0, known = 0, failures = 0;
	const struct check_kind *const *table = check_table(&kinds);
	for (size_t draw = 0; draw < DRAWS; draw++) {
		struct used_check use;
		struct err err = {0};
		const struct check_kind *kind = table[draw % kinds];
		if (draw % kinds == 0)
			play(&rec, &random);
		check_use(&use, kind->name);
		bool good = false;
		for (int trial = 0; trial < 60 && !good; trial++) {
			for (size_t i = 0; i < kind->fields->count; i++)
				draw_field(&use, &kind->fields->fields[i], &random, &odd);
			good = check_verify(&use, &rec, NULL) == 0;
		}
		if (!good)
			continue;
		verified++;
		bool fails = random_uniform(&odd) < 0.3;
		arena_fail_at(fails ? 1 + (long)random_between(&odd, 0, 6) : 0);
		int rc = evaluate(&use, &rec, &err);
		arena_fail_at(0);
		if (rc < 0) {
			assert_true(fails);
			assert_int_equal(err.code, ERR_NOMEM);
			failures++;
			continue;
		}
		assert_int_equal(use.count, kind->metric_count);
		assert_complete(&use);
		for (size_t i = 0; i < use.count; i++)
			known += isnan(use.metrics[i].value) ? 0 : 1;
	}
	/* Else nothing was shown. */
	assert_true(verified > 3000 && known > 1000 && failures > 30);
	recording_release(&rec);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(every_metric_is_an_interval_or_unknown_with_a_reason),
	};
	return RUN_GROUP(tests);
}
