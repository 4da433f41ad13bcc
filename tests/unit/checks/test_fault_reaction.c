/* SPDX-License-Identifier: Apache-2.0 */
/* fault_reaction: latencies as guaranteed intervals, and what is held and cleared. */
#include "decision.h"
#include "recording.h"

struct bench {
	struct recording rec;
	struct used_check use;
	int code, torque, running;
	int cause, gone, restart, reset, again;
};

static const double code_values[] = {0, 1, 3};
static const char *const code_names[] = {"none", "overcurrent", "encoder_loss"};

static void bench_init(struct bench *bench)
{
	*bench = (struct bench){0};
	struct recording *rec = &bench->rec;
	recording_init(rec);
	bench->code = recording_channel(rec, "fault_code", "1", EVIDENCE_SELF_REPORTED);
	rec->channels[bench->code].named_values = code_values;
	rec->channels[bench->code].value_names = code_names;
	rec->channels[bench->code].name_count = 3;
	bench->torque = recording_channel(rec, "shaft_torque", "Nm", EVIDENCE_INDEPENDENT);
	bench->running = recording_channel(rec, "running", "1", EVIDENCE_SELF_REPORTED);
	check_use(&bench->use, "fault_reaction");
	check_int(&bench->use, "indication", bench->code);
	check_double(&bench->use, "code", 3);
}

/* What the drive does; times in ms, 0 the cause. */
struct story {
	double detected, off, end;
	double code;         /* what it shows */
	double unlatched;    /* shows none again from here; 0: never */
	double runs_at;      /* runs (and makes torque) from here until the reset; 0: not */
	double clears_after; /* reset; negative: never */
	bool runs_again;
	double stops_again; /* after `again`; 0: never */
	double level;       /* torque while it drives */
};

static const struct story healthy = {.detected = 12,
                                     .off = 25,
                                     .end = 900,
                                     .code = 3,
                                     .clears_after = 5,
                                     .runs_again = true,
                                     .level = 1.2};

static double shown(const struct story *story, double t)
{
	if (t < story->detected || (story->unlatched > 0 && t >= story->unlatched))
		return 0;
	return story->clears_after >= 0 && t >= 500 + story->clears_after ? 0 : story->code;
}

static bool runs(const struct story *story, double t)
{
	if (t < story->off)
		return true;
	if (story->runs_at > 0 && t >= story->runs_at && t < 500)
		return true;
	return story->runs_again && t >= 620 && !(story->stops_again > 0 && t >= story->stops_again);
}

/* Polled every 2 ms; gone at 300, restart tried at 400, reset at 500, again at 600 ms. */
static void play(struct bench *bench, const struct story *story)
{
	struct recording *rec = &bench->rec;
	recording_clear(rec);
	rec->begin_ns = MS(-100);
	rec->end_ns = MS(story->end);
	bench->cause = recording_mark(rec, "cause", MS(0), MS(1));
	bench->gone = recording_mark(rec, "gone", MS(300), MS(301));
	bench->restart = recording_mark(rec, "restart", MS(400), MS(401));
	bench->reset = recording_mark(rec, "reset", MS(500), MS(501));
	bench->again = recording_mark(rec, "again", MS(600), MS(601));
	for (double t = -99; t < story->end; t += 2) {
		recording_add(rec, bench->code, MS(t), MS(t + 0.5), shown(story, t + 0.25));
		recording_add(rec, bench->running, MS(t), MS(t + 0.5), runs(story, t + 0.25));
		recording_add(rec, bench->torque, MS(t + 1), MS(t + 1.5),
		              runs(story, t + 1.25) ? story->level : 0.01);
	}
	check_int(&bench->use, "from", bench->cause);
	check_int(&bench->use, "torque", bench->torque);
	check_double(&bench->use, "torque_below", 0.25);
	check_int(&bench->use, "gone", bench->gone);
	check_int(&bench->use, "restart", bench->restart);
	check_int(&bench->use, "reset", bench->reset);
	check_int(&bench->use, "again", bench->again);
	check_int(&bench->use, "running", bench->running);
}

static const struct metric *run(struct bench *bench, const char *metric)
{
	check_run(&bench->use, &bench->rec);
	return check_metric(&bench->use, metric);
}

/*
 * Command effective in [0, 4] ms; polls [5, 9], [10, 15], [20, 24] show
 * nothing, [26, 31] shows the code: the latency is in [16, 31] ms whatever the
 * distribution (by hand from the intervals).
 */
static void latency_is_the_guaranteed_interval_of_the_polls(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	struct recording *rec = &bench.rec;
	recording_mark(rec, "cause", MS(0), MS(4));
	check_int(&bench.use, "from", 0);
	rec->begin_ns = MS(-10);
	rec->end_ns = MS(40);
	recording_add(rec, bench.code, MS(-6), MS(-2), 0);
	recording_add(rec, bench.code, MS(5), MS(9), 0);
	recording_add(rec, bench.code, MS(10), MS(15), 0);
	recording_add(rec, bench.code, MS(20), MS(24), 0);
	recording_add(rec, bench.code, MS(26), MS(31), 3);
	const struct metric *metric = run(&bench, "detection_time");
	assert_near(metric->low, .016, 1e-15, "s");
	assert_near(metric->high, .031, 1e-15, "s");
	assert_near(metric->coverage, 1, 0, "");
	static const struct {
		double limit;
		enum verdict verdict;
	} rows[] = {{.040, VERDICT_PASS},
	            {.031, VERDICT_PASS},
	            {.025, VERDICT_INCONCLUSIVE},
	            {.016, VERDICT_INCONCLUSIVE},
	            {.015, VERDICT_FAIL}};
	char reason[512];
	for (size_t i = 0; i < 5; i++) {
		struct limit limit = {.min = -(double)INFINITY, .max = rows[i].limit};
		assert_int_equal(decide(metric, &limit, reason, sizeof reason), rows[i].verdict);
	}
	/* A register image refreshed every 3 ms may be as much older. */
	rec->channels[bench.code].refresh_ns = MS(3);
	metric = run(&bench, "detection_time");
	assert_near(metric->low, .013, 1e-15, "s");
	assert_near(metric->high, .031, 1e-15, "s");
	recording_release(rec);
}

static void a_healthy_drive_passes_everything(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, &healthy);
	const struct metric *detection = run(&bench, "detection_time");
	assert_known(detection);
	assert_true(detection->low <= .0115 && detection->high >= .0115); /* 12 - 0.5 (cause in 0..1) */
	assert_true(detection->high - detection->low < .005);
	assert_int_equal(detection->evidence, EVIDENCE_SELF_REPORTED);
	const struct metric *off = check_metric(&bench.use, "torque_off_time");
	assert_true(off->low <= .0245 && off->high >= .0245 && off->high - off->low < .005);
	assert_int_equal(off->evidence, EVIDENCE_INDEPENDENT);
	static const char *const yes[] = {"code_right", "stays_latched", "restart_refused",
	                                  "reset_clears", "restarts_clean"};
	for (size_t i = 0; i < 5; i++)
		assert_yes_no(check_metric(&bench.use, yes[i]), true);
	recording_release(&bench.rec);
}

static void each_misbehaviour_is_seen_where_it_lies(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	struct story story = healthy;
	story.code = 1; /* quick, and wrong */
	play(&bench, &story);
	assert_known(run(&bench, "detection_time"));
	assert_yes_no(check_metric(&bench.use, "code_right"), false);
	assert_non_null(strstr(check_metric(&bench.use, "code_right")->note, "overcurrent"));
	story = healthy;
	story.unlatched = 350; /* not latched after the cause has gone */
	play(&bench, &story);
	assert_yes_no(run(&bench, "stays_latched"), false);
	assert_yes_no(check_metric(&bench.use, "code_right"), true);
	story = healthy;
	story.runs_at = 420; /* restarts without a reset */
	play(&bench, &story);
	assert_yes_no(run(&bench, "restart_refused"), false);
	story = healthy;
	story.clears_after = -1;
	story.runs_again = false;
	play(&bench, &story);
	assert_yes_no(run(&bench, "reset_clears"), false);
	assert_yes_no(check_metric(&bench.use, "restarts_clean"), false);
	story = healthy;
	story.stops_again = 700;
	play(&bench, &story);
	assert_yes_no(run(&bench, "restarts_clean"), false);
	recording_release(&bench.rec);
}

static void what_never_comes_fails_and_does_not_pass_by_ending_early(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	struct story story = healthy;
	story.detected = 1e9;
	story.off = 1e9;
	story.end = 290;
	play(&bench, &story);
	char reason[512];
	static const char *const never[] = {"detection_time", "torque_off_time"};
	check_int(&bench.use, "gone", -1);
	check_int(&bench.use, "restart", -1);
	check_int(&bench.use, "reset", -1);
	check_int(&bench.use, "again", -1);
	check_run(&bench.use, &bench.rec);
	for (size_t i = 0; i < 2; i++) {
		const struct metric *metric = check_metric(&bench.use, never[i]);
		assert_true(metric->low > .28 && metric->low < .29);
		assert_true(isinf(metric->high) && isinf(metric->value));
		struct limit limit = {.min = -(double)INFINITY, .max = .06};
		assert_int_equal(decide(metric, &limit, reason, sizeof reason), VERDICT_FAIL);
		limit.rule = DECISION_SIMPLE;
		assert_int_equal(decide(metric, &limit, reason, sizeof reason), VERDICT_FAIL);
		limit = (struct limit){.min = -(double)INFINITY, .max = .5}; /* longer than was watched */
		assert_int_equal(decide(metric, &limit, reason, sizeof reason), VERDICT_INCONCLUSIVE);
	}
	assert_yes_no(check_metric(&bench.use, "code_right"), false);
	assert_unknown(check_metric(&bench.use, "stays_latched"), "nothing was indicated");
	recording_release(&bench.rec);
}

/* A link that went silent right after the cause proves nothing about the code. */
static void a_code_that_may_have_come_unseen_is_not_wrong(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	struct recording *rec = &bench.rec;
	recording_mark(rec, "cause", MS(0), MS(30));
	check_int(&bench.use, "from", 0);
	rec->begin_ns = MS(-40);
	rec->end_ns = MS(300);
	for (double t = -40; t < 4; t += 4)
		recording_add(rec, bench.code, MS(t), MS(t + 1), 0);
	recording_add(rec, bench.code, MS(150), MS(180), (double)NAN);
	const struct metric *metric = run(&bench, "code_right");
	assert_unknown(metric, "no sample of fault_code");
	/* Read to the end it is. */
	for (double t = 200; t < 300; t += 4)
		recording_add(rec, bench.code, MS(t), MS(t + 1), 0);
	metric = run(&bench, "code_right");
	assert_known(metric);
	assert_near(metric->high, 0, 0, "");
	recording_release(rec);
}

static void torque_must_have_been_there_to_go_off(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	struct story story = healthy;
	story.level = 0.2;
	play(&bench, &story);
	assert_unknown(run(&bench, "torque_off_time"), "not surely above");
	/* Above the level by less than the instrument's limit of error. */
	story.level = 0.26;
	play(&bench, &story);
	bench.rec.channels[bench.torque].accuracy = (struct accuracy){.given = true, .absolute = 0.02};
	assert_unknown(run(&bench, "torque_off_time"), "not surely above");
	recording_release(&bench.rec);
}

static void a_short_dip_is_not_off(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, &healthy);
	struct recorded_row *rows = bench.rec.rows[bench.torque];
	for (size_t i = 0; i < bench.rec.series[bench.torque].rows; i++) {
		double t = (double)rows[i].sent / 1e6;
		if (t > 5 && t < 100)
			rows[i].value = t < 15 || t > 40 ? 0.01 : 1.2; /* 10 ms of nothing, then on again */
	}
	const struct metric *off = run(&bench, "torque_off_time");
	assert_true(off->low > .035 && off->high < .045);
	recording_release(&bench.rec);
}

static void missing_rows_widen_and_never_pass(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, &healthy);
	struct recorded_row *rows = bench.rec.rows[bench.code];
	for (size_t i = 0; i < bench.rec.series[bench.code].rows; i++) {
		double t = (double)rows[i].sent / 1e6;
		if (t > 4 && t < 60)
			rows[i].value = (double)NAN; /* where the answer lies */
	}
	const struct metric *metric = run(&bench, "detection_time");
	assert_true(metric->low < .005 && metric->high > .055);
	assert_non_null(strstr(metric->note, "widened"));
	recording_release(&bench.rec);

	bench_init(&bench);
	play(&bench, &healthy);
	rows = bench.rec.rows[bench.code];
	for (size_t i = 0; i < bench.rec.series[bench.code].rows; i++)
		if (rows[i].sent > MS(350) && rows[i].sent < MS(450))
			rows[i].value = (double)NAN;
	assert_unknown(run(&bench, "stays_latched"), "no sample");
	assert_known(check_metric(&bench.use, "detection_time"));
	for (size_t i = 0; i < bench.rec.series[bench.code].rows; i++)
		rows[i].value = (double)NAN;
	assert_unknown(run(&bench, "detection_time"), "is a measurement");
	assert_unknown(check_metric(&bench.use, "code_right"), "measurement");
	recording_release(&bench.rec);
}

static void frozen_rows_are_no_measurement(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, &healthy);
	size_t rows = bench.rec.series[bench.code].rows;
	const struct bad_rows bad = {0, rows - 1, "the life counter of controller stands"};
	bench.rec.series[bench.code].bad = &bad;
	bench.rec.series[bench.code].bad_count = 1;
	assert_unknown(run(&bench, "detection_time"), "life counter");
	assert_known(check_metric(&bench.use, "torque_off_time"));
	recording_release(&bench.rec);
}

static void no_rows_before_or_a_code_already_there_is_inconclusive(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	struct story story = healthy;
	story.detected = -1000;
	play(&bench, &story);
	assert_unknown(run(&bench, "detection_time"), "before the cause already");
	assert_unknown(check_metric(&bench.use, "code_right"), "before the cause already");
	play(&bench, &healthy);
	bench.rec.series[bench.code].row0 += 52 * sizeof(struct recorded_row);
	bench.rec.series[bench.code].rows -= 52;
	assert_unknown(run(&bench, "detection_time"), "was not read");
	bench.rec.marks[bench.cause].reached = false;
	assert_unknown(run(&bench, "torque_off_time"), "ended before the mark cause");
	recording_release(&bench.rec);
}

static void rows_out_of_order_are_no_evidence(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, &healthy);
	struct recorded_row *rows = bench.rec.rows[bench.code];
	struct recorded_row swapped = rows[60];
	rows[60] = rows[61];
	rows[61] = swapped;
	assert_unknown(run(&bench, "detection_time"), "out of order");
	recording_release(&bench.rec);
}

static void contradicting_fields_are_refused(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, &healthy);
	struct err err = {0};
	assert_int_equal(check_verify(&bench.use, &bench.rec, &err), 0);
	check_double(&bench.use, "torque_below", (double)NAN);
	assert_int_equal(check_verify(&bench.use, &bench.rec, &err), -1);
	check_double(&bench.use, "torque_below", -1);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	check_double(&bench.use, "torque_below", 0.25);
	check_int(&bench.use, "running", -1);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1); /* again needs it */
	recording_release(&bench.rec);
}

/* Guaranteed bounds hold always: 2000 draws of causes, polls and refresh. */
static void bounds_hold_in_every_draw(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	struct recording *rec = &bench.rec;
	struct random random = {17};
	double widest = 0;
	for (int draw = 0; draw < 2000; draw++) {
		recording_clear(rec);
		double refresh = random_between(&random, 0, 3), mark = random_between(&random, 0, 5);
		double cause = random_between(&random, 0, mark);
		double latency = random_between(&random, 0, 40);
		rec->channels[bench.code].refresh_ns = MS(refresh);
		recording_mark(rec, "cause", MS(0), MS(mark));
		rec->begin_ns = MS(-50);
		rec->end_ns = MS(80);
		for (double t = -40; t < 80; t += random_between(&random, 1.5, 4)) {
			double width = random_between(&random, 0.2, 1.4);
			double taken =
			    random_between(&random, t, t + width) - random_between(&random, 0, refresh);
			recording_add(rec, bench.code, MS(t), MS(t + width), taken >= cause + latency ? 3 : 0);
		}
		check_int(&bench.use, "from", 0);
		const struct metric *metric = run(&bench, "detection_time");
		assert_known(metric);
		assert_true(metric->low <= latency / 1e3 + 1e-9 && latency / 1e3 <= metric->high + 1e-9);
		widest = fmax(widest, metric->high - metric->low);
	}
	assert_true(widest < .020);
	recording_release(rec);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(latency_is_the_guaranteed_interval_of_the_polls),
	    cmocka_unit_test(a_healthy_drive_passes_everything),
	    cmocka_unit_test(each_misbehaviour_is_seen_where_it_lies),
	    cmocka_unit_test(what_never_comes_fails_and_does_not_pass_by_ending_early),
	    cmocka_unit_test(a_code_that_may_have_come_unseen_is_not_wrong),
	    cmocka_unit_test(torque_must_have_been_there_to_go_off),
	    cmocka_unit_test(a_short_dip_is_not_off),
	    cmocka_unit_test(missing_rows_widen_and_never_pass),
	    cmocka_unit_test(frozen_rows_are_no_measurement),
	    cmocka_unit_test(no_rows_before_or_a_code_already_there_is_inconclusive),
	    cmocka_unit_test(rows_out_of_order_are_no_evidence),
	    cmocka_unit_test(contradicting_fields_are_refused),
	    cmocka_unit_test(bounds_hold_in_every_draw),
	};
	return RUN_GROUP(tests);
}
