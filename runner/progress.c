/* SPDX-License-Identifier: Apache-2.0 */
/*
 * What a person sees while a run goes on: on a terminal one line that is drawn
 * again ten times a second; elsewhere one line a test. On stderr, since
 * results go to stdout.
 */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/ioctl.h>
#include <unistd.h>

#include "session.h"

void progress_init(struct progress_line *line, bool quiet)
{
	*line = (struct progress_line){.quiet = quiet, .suite = -1, .test = -1};
	const char *term = getenv("TERM");
	line->terminal = isatty(STDERR_FILENO) && term && strcmp(term, "dumb") != 0;
}

void progress_clear(struct progress_line *line)
{
	if (line->drawn)
		(void)fputs("\r\033[K", stderr);
	line->drawn = false;
}

static int terminal_columns(void)
{
	struct winsize size;
	if (ioctl(STDERR_FILENO, TIOCGWINSZ, &size) == 0 && size.ws_col > 20)
		return size.ws_col;
	return 80;
}

/* Two live values of the test: the first channels of its first sample group. */
static void add_values(struct text *text, struct session *session, const struct test *test)
{
	if (test->group_count == 0)
		return;
	const struct sample_group *group = &test->groups[0];
	for (size_t i = 0; i < group->channel_count && i < 2; i++) {
		const struct channel_info *info = &session->rig->infos[group->channels[i]];
		int device = rig_channel_device(session->rig, group->channels[i]);
		struct worker *worker =
		    conductor_worker(session->conductor, (size_t)session->rig->devices[device].link);
		double value = worker_latest(worker, group->channels[i]);
		if (!isnan(value))
			text_printf(text, "  %s %.5g %s", info->name, value, info->unit->name);
	}
}

static void draw(struct progress_line *line, struct session *session, const struct test *test,
                 const struct conductor_now *now, int64_t now_ns)
{
	struct text text;
	char step[128] = "", elapsed[32], total[32];
	text_init(&text, 1024);
	if (now->resting)
		(void)snprintf(step, sizeof step, "to the safe state");
	else if (now->step)
		(void)step_text(now->step, session->rig, step, sizeof step);
	int64_t all = 0;
	for (size_t i = 0; i < session->suite_count; i++)
		all += session->suites[i]->duration_ns;
	text_printf(
	    &text, "%s  %s  %s of about %s", test ? test->name : "bench", step,
	    duration_text(now_ns / (100 * NS_PER_MS) * (100 * NS_PER_MS), elapsed, sizeof elapsed),
	    duration_text(all / (100 * NS_PER_MS) * (100 * NS_PER_MS), total, sizeof total));
	if (test)
		add_values(&text, session, test);
	int columns = terminal_columns() - 1;
	struct text clean;
	text_init(&clean, 0);
	text_add_line(&clean, text_string(&text), text.length);
	(void)fprintf(stderr, "\r\033[K%.*s", columns, text_string(&clean));
	text_release(&clean);
	(void)fflush(stderr);
	line->drawn = true;
	text_release(&text);
}

void progress_show(struct progress_line *line, struct session *session, int64_t now_ns)
{
	if (line->quiet)
		return;
	struct conductor_now now = conductor_now(session->conductor);
	const struct test *test =
	    now.suite >= 0 && now.test >= 0 ? &session->suites[now.suite]->tests[now.test] : NULL;
	if (line->terminal) {
		static int64_t last_wall;
		int64_t wall = clock_now(&(struct clock){clock_real().now, NULL});
		if (line->drawn && wall - last_wall < 100 * NS_PER_MS)
			return;
		last_wall = wall;
		draw(line, session, test, &now, now_ns);
		return;
	}
	if (test && (now.suite != line->suite || now.test != line->test)) {
		struct text text;
		char elapsed[32];
		text_init(&text, 0);
		text_printf(&text, "%10s  ", duration_text(now_ns, elapsed, sizeof elapsed));
		text_add_line(&text, test->name, strlen(test->name));
		text_puts(&text, "  ");
		text_add_line(&text, test->title, strlen(test->title));
		(void)fprintf(stderr, "%s\n", text_string(&text));
		text_release(&text);
		line->suite = now.suite;
		line->test = now.test;
	}
}
