/* SPDX-License-Identifier: Apache-2.0 */
/*
 * `survey`: looks at a bench and commands nothing. No request of it writes;
 * the rig's attendance asks nothing, since nothing can move. It takes the same
 * locks as a run: beside one it would spoil its times, and on a serial line
 * its replies.
 *
 * --watch ends with Ctrl-C. The signal is taken by sigtimedwait between two
 * rounds, so nothing runs in a handler and the terminal is left whole.
 */
#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "options.h"
#include "plan_timing.h"
#include "survey_show.h"
#include "verbs.h"

static const struct option_row ROWS[] = {
    {"rig", true, "the rig file (needed)"},
    {"watch", false, "goes on showing the values until Ctrl-C"},
    {"record", true, "FILE: writes the times measured, for `plan --timing FILE`"},
    {"link", true, "LINK=ADDRESS: another address, tcp:HOST:PORT or rtu:/dev/PATH"},
    {"help", false, "this text"},
};

enum { ROW_COUNT = sizeof ROWS / sizeof ROWS[0], WATCH_PERIOD_MS = 500 };

struct survey_options {
	struct run_options *run;
	const char *record;
	bool watch, help;
};

static int take(void *context, const struct option_row *row, const char *value, struct err *reterr)
{
	struct survey_options *options = context;
	if (!row)
		return err_set(reterr, ERR_USAGE, "survey takes no '%s'; the rig file goes behind --rig",
		               value);
	if (strcmp(row->name, "record") == 0)
		options->record = value;
	else if (strcmp(row->name, "watch") == 0)
		options->watch = true;
	else if (strcmp(row->name, "help") == 0)
		options->help = true;
	else
		return run_option_take(options->run, row->name, value, reterr);
	return 0;
}

static int show_help(void)
{
	struct text out;
	text_init(&out, 0);
	text_puts(&out,
	          "drivetrial survey --rig RIG reads who is on the bench and what each channel holds,\n"
	          "how long transactions take and how often values change. It commands nothing.\n"
	          "What looks wrong (order of words, scale, a counter that stands) is listed at the\n"
	          "end; that changes no exit code. Exit 0, or 69 where a device does not answer.\n\n");
	options_describe(ROWS, ROW_COUNT, &out);
	text_puts(&out, "\n  drivetrial survey --rig rigs/bench.yaml --record bench.timing.json\n"
	                "  drivetrial survey --rig rigs/model-spm.yaml --link "
	                "drive_wire=tcp:127.0.0.1:15020 --watch\n");
	bool written = fputs(text_string(&out), stdout) >= 0 && fflush(stdout) == 0;
	text_release(&out);
	return written ? 0 : EXIT_NO_OUTPUT;
}

static bool print(const struct text *text)
{
	return !text->cut && fputs(text_string(text), stdout) >= 0 && fflush(stdout) == 0;
}

static bool show(const struct survey *survey)
{
	struct text out, doubts;
	text_init(&out, 0);
	text_init(&doubts, 0);
	survey_show(survey, &out);
	size_t count = survey_doubts(survey, &doubts);
	size_t silent = 0;
	for (size_t d = 0; d < survey->rig->device_count; d++)
		silent += !survey->device[d].answers;
	if (silent > 0)
		text_printf(&out, "\n%zu of %zu devices do not answer\n", silent,
		            survey->rig->device_count);
	if (count > 0)
		text_printf(&out, "\n%zu to look at\n%s", count, text_string(&doubts));
	else if (silent == 0)
		text_puts(&out, "\nnothing looks wrong\n");
	bool written = print(&out);
	text_release(&out);
	text_release(&doubts);
	return written;
}

/* Waits up to `ms` for Ctrl-C or SIGTERM. */
static bool asked_to_end(const sigset_t *signals, int ms)
{
	struct timespec pause = {.tv_sec = ms / 1000, .tv_nsec = ms % 1000 * 1000000L};
	return sigtimedwait(signals, NULL, &pause) > 0;
}

/* The table is drawn over the one before it on a terminal; elsewhere one follows the other. */
static int watch(struct survey *survey, const sigset_t *signals)
{
	bool terminal = isatty(STDOUT_FILENO) == 1;
	size_t lines = 0;
	do {
		struct text out;
		text_init(&out, 0);
		survey_again(survey);
		if (terminal && lines > 0)
			text_printf(&out, "\x1b[%zuA\x1b[J", lines);
		text_printf(&out, "%s\n", terminal ? "values now, Ctrl-C ends" : "values now");
		survey_show_values(survey, &out);
		lines = survey->rig->channel_count + 1;
		bool written = print(&out);
		text_release(&out);
		if (!written)
			return EXIT_NO_OUTPUT;
	} while (!asked_to_end(signals, WATCH_PERIOD_MS));
	return 0;
}

static bool all_answer(const struct survey *survey)
{
	bool all = true;
	for (size_t d = 0; d < survey->rig->device_count; d++)
		all = all && survey->device[d].answers;
	return all;
}

static int take_survey(struct session *session, const struct survey_options *options)
{
	struct err err = {0};
	struct survey survey;
	sigset_t signals;
	int code = session_reach(session);
	if (code != 0)
		return code;
	(void)sigemptyset(&signals);
	(void)sigaddset(&signals, SIGINT);
	(void)sigaddset(&signals, SIGTERM);
	if (options->watch)
		(void)sigprocmask(SIG_BLOCK, &signals, NULL);
	if (survey_take(&survey, session, &err) < 0)
		return session_exit_of(&err);
	if (!show(&survey))
		return EXIT_NO_OUTPUT;
	if (options->record && bench_timing_record(options->record, &survey, &err) < 0)
		return session_exit_of(&err);
	if (options->watch)
		code = watch(&survey, &signals);
	return code != 0 ? code : all_answer(&survey) ? 0 : EXIT_NO_RIG;
}

static int carry_out(const struct survey_options *options)
{
	struct err err = {0};
	struct session *session = malloc(sizeof *session);
	int code;
	if (!session)
		return EXIT_INTERNAL;
	session_init(session, options->run);
	if (rig_load(options->run->rig_path, &session->arena, &session->faults, &session->rig, &err) <
	    0)
		code = session_exit_of(&err);
	else if (!session->rig)
		code = session_print_faults(&session->faults);
	else
		code = take_survey(session, options);
	session_release(session);
	free(session);
	return code;
}

int verb_survey(int argc, char **argv)
{
	struct survey_options options = {.run = calloc(1, sizeof *options.run)};
	struct err err = {0};
	int code;
	if (!options.run)
		return EXIT_INTERNAL;
	if (options_parse(argc, argv, ROWS, ROW_COUNT, take, &options, &err) < 0) {
		code = session_exit_of(&err);
	} else if (options.help) {
		code = show_help();
	} else if (!options.run->rig_path) {
		(void)err_set(&err, ERR_USAGE, "survey needs --rig RIG; see 'drivetrial survey --help'");
		code = session_exit_of(&err);
	} else {
		code = carry_out(&options);
	}
	run_options_free(options.run);
	return code;
}
