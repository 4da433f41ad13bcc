/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Runs that are ended early, in virtual time: by a stop at a random moment, an
 * interlock, a wire cut for good, both wires, a wire that comes back, memory
 * that runs out. After each the model is asked, not the runner: the shaft must
 * stand, and where the runner said "at rest" it must have been true.
 */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "near.h"
#include "session.h"

enum { RUNS = 20, LINK_DRIVE = 0, LINK_BENCH = 1 };

struct plot {
	struct session session;
	struct run_options options;
	int64_t at_ns, until_ns; /* the wire is cut from, to */
	bool cut[2];
	bool stop;
};

static uint64_t state = 20240501;

/* A moment of the run, which lasts more than 8 s. */
static int64_t moment(void)
{
	state = state * 6364136223846793005U + 1442695040888963407U;
	return (int64_t)(0.4e9 + (double)(state >> 33) / 2147483648.0 * 7.2e9);
}

static bool is_cut(void *context, int link, int64_t at_ns)
{
	const struct plot *plot = context;
	return plot->cut[link] && at_ns >= plot->at_ns && at_ns < plot->until_ns;
}

/* As engine_virtual(), with the stop raised when its moment has come. */
static void drive(struct plot *plot)
{
	struct session *session = &plot->session;
	for (unsigned long loops = 0; !conductor_ended(session->conductor); loops++) {
		int suite, test;
		assert_true(loops < 3000000);
		int64_t now = session->virtual_clock.now_ns - session->origin_ns;
		if (plot->stop && now >= plot->at_ns)
			(void)stop_raise(&session->stop, "the test says stop");
		int64_t due = engine_settle(session);
		capture_drain(&session->capture, now);
		if (conductor_gate_asked(session->conductor, &suite, &test))
			session_answer_gate(session);
		else
			session->virtual_clock.now_ns = due;
	}
	capture_close(&session->capture, session->virtual_clock.now_ns - session->origin_ns);
}

static void open_plot(struct plot *plot, const char *defect, char *folder)
{
	memset(plot, 0, sizeof *plot);
	plot->until_ns = INT64_MAX;
	plot->options = (struct run_options){.rehearse = true,
	                                     .rig_path = SOURCE_DIR "/rigs/model-spm.yaml",
	                                     .suite_paths = {SOURCE_DIR "/suites/smoke.yaml"},
	                                     .suite_count = 1,
	                                     .out = folder,
	                                     .seed = 7,
	                                     .defect = defect,
	                                     .quiet = true};
	session_init(&plot->session, &plot->options);
	assert_int_equal(session_load(&plot->session), 0);
	assert_int_equal(session_connect(&plot->session), 0);
	assert_int_equal(session_record(&plot->session), 0);
	plot->session.is_cut = is_cut;
	plot->session.is_cut_context = plot;
}

static double shaft_rpm(struct plot *plot, int64_t later_ns)
{
	struct model *model = served_model(plot->session.served);
	model_advance(model, model_now(model) + later_ns);
	return fabs(model_read(model, model_signal_find("shaft.speed", 11))) * 60 / 6.283185307179586;
}

static char folder[128], base[64];

static void remove_folder(void)
{
	char command[256];
	(void)snprintf(command, sizeof command, "rm -rf '%s'", base);
	assert_int_equal(system(command), 0);
}

static void new_folder(void)
{
	(void)snprintf(base, sizeof base, "/tmp/drivetrial-ways-XXXXXX");
	assert_non_null(mkdtemp(base));
	(void)snprintf(folder, sizeof folder, "%.60s/run", base);
}

struct ending {
	struct rest_outcome rest;
	int code;
	double rpm, rpm_later;
};

/* One run with what `prepare` arranged; its folder is verified as far as it was sealed. */
static struct ending end_of(void (*prepare)(struct plot *plot), const char *defect)
{
	struct plot *plot = malloc(sizeof *plot);
	struct ending ending;
	assert_non_null(plot);
	new_folder();
	open_plot(plot, defect, folder);
	prepare(plot);
	drive(plot);
	ending.rpm = shaft_rpm(plot, 0);
	ending.rest = conductor_rest(plot->session.conductor);
	ending.code = session_finish(&plot->session);
	ending.rpm_later = shaft_rpm(plot, 3 * NS_PER_S);
	struct text text;
	bool clean = false;
	text_init(&text, 0);
	assert_int_equal(run_folder_verify(folder, &text, &clean, NULL), 0);
	assert_true(clean);
	text_release(&text);
	session_release(&plot->session);
	free(plot);
	remove_folder();
	return ending;
}

static void check(const struct ending *ending)
{
	if (ending->rest.confirmed) {
		assert_true(ending->rpm < 10);
		assert_int_not_equal(ending->code, EXIT_NOT_AT_REST);
	} else {
		assert_int_equal(ending->code, EXIT_NOT_AT_REST);
		assert_true(ending->rest.reason[0] != '\0');
	}
	assert_true(ending->rpm_later < 10); /* by command, or by the watchdogs */
}

static void stop_somewhere(struct plot *plot)
{
	plot->stop = true;
	plot->at_ns = moment();
}

static void a_stop_at_any_moment_ends_at_rest(void **unused)
{
	(void)unused;
	for (int i = 0; i < RUNS; i++) {
		struct ending ending = end_of(stop_somewhere, NULL);
		check(&ending);
		assert_true(ending.rest.confirmed);
		assert_true(ending.code == EXIT_ABORTED || ending.code == EXIT_ALL_PASS);
	}
}

static void cut_drive(struct plot *plot)
{
	plot->cut[LINK_DRIVE] = true;
	plot->at_ns = moment();
}

static void a_lost_controller_is_seen_at_rest_by_the_bench(void **unused)
{
	(void)unused;
	for (int i = 0; i < RUNS; i++) {
		struct ending ending = end_of(cut_drive, NULL);
		check(&ending);
		assert_true(
		    ending.rest.confirmed); /* its watchdog stopped it, and the transducer says so */
		assert_int_not_equal(ending.code, EXIT_ALL_PASS);
		assert_non_null(strstr(ending.rest.reason, "not acknowledged"));
	}
}

static void cut_bench(struct plot *plot)
{
	plot->cut[LINK_BENCH] = true;
	plot->at_ns = moment();
}

static void without_the_bench_nobody_can_say_that_it_is_at_rest(void **unused)
{
	(void)unused;
	for (int i = 0; i < RUNS; i++) {
		struct ending ending = end_of(cut_bench, NULL);
		check(&ending);
		assert_false(ending.rest.confirmed);
		assert_int_equal(ending.code, EXIT_NOT_AT_REST);
	}
}

static void cut_both(struct plot *plot)
{
	plot->cut[LINK_DRIVE] = plot->cut[LINK_BENCH] = true;
	plot->at_ns = moment();
}

static void with_every_wire_gone_the_watchdogs_stop_the_bench(void **unused)
{
	(void)unused;
	for (int i = 0; i < RUNS; i++) {
		struct ending ending = end_of(cut_both, NULL);
		check(&ending);
		assert_int_equal(ending.code, EXIT_NOT_AT_REST);
	}
}

static void cut_for_a_while(struct plot *plot)
{
	cut_both(plot);
	plot->until_ns = plot->at_ns + 3 * NS_PER_S;
}

static void a_wire_that_comes_back_is_used_to_reach_rest(void **unused)
{
	(void)unused;
	for (int i = 0; i < RUNS; i++) {
		struct ending ending = end_of(cut_for_a_while, NULL);
		check(&ending);
		assert_true(ending.rest.confirmed);
		/* Where it was gone between two tests nothing need be lost; a healthy drive never fails. */
		assert_int_not_equal(ending.code, EXIT_TEST_FAILED);
	}
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(a_stop_at_any_moment_ends_at_rest),
	    cmocka_unit_test(a_lost_controller_is_seen_at_rest_by_the_bench),
	    cmocka_unit_test(without_the_bench_nobody_can_say_that_it_is_at_rest),
	    cmocka_unit_test(with_every_wire_gone_the_watchdogs_stop_the_bench),
	    cmocka_unit_test(a_wire_that_comes_back_is_used_to_reach_rest),
	};
	return RUN_GROUP(tests);
}
