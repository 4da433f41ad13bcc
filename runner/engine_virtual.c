/* SPDX-License-Identifier: Apache-2.0 */
/*
 * One loop calls the ticks of conductor and workers in time order and moves
 * the clock from one due instant to the next. There is no second
 * implementation for rehearsal: the ticks are those of the real run.
 */
#include <stdio.h>

#include "session.h"

int64_t engine_settle(struct session *session)
{
	int64_t now = session->virtual_clock.now_ns;
	int64_t due = now;
	for (int turns = 0; due <= now && turns < 1000; turns++) {
		due = conductor_tick(session->conductor, now - session->origin_ns);
		for (size_t i = 0; i < session->rig->link_count; i++) {
			struct worker *worker = conductor_worker(session->conductor, i);
			int64_t worker_due = worker_tick(worker, now - session->origin_ns);
			if (worker_due < due)
				due = worker_due;
		}
		if (due != INT64_MAX)
			due += session->origin_ns;
		if (conductor_woken(session->conductor))
			due = now;
		if (conductor_ended(session->conductor))
			return now;
	}
	return due > now ? due : now + 1000;
}

int engine_virtual(struct session *session)
{
	struct progress_line line;
	/* Lines of its own would tear a progress line. */
	progress_init(&line, session->options->quiet || session->options->verbose);
	session->capture.verbose = session->options->verbose;
	for (unsigned long loops = 0; !conductor_ended(session->conductor); loops++) {
		int64_t due = engine_settle(session);
		int suite, test;
		int64_t now = session->virtual_clock.now_ns - session->origin_ns;
		if (due == INT64_MAX) {
			(void)stop_raise(&session->stop, "nothing is due any more: a fault of the program");
			due = session->virtual_clock.now_ns + NS_PER_MS;
		}
		bool asked = conductor_gate_asked(session->conductor, &suite, &test);
		if (asked || loops % 64 == 0)
			capture_drain(&session->capture, now);
		if (asked)
			session_answer_gate(session);
		else if (!conductor_ended(session->conductor))
			session->virtual_clock.now_ns = due;
		if (loops % 256 == 0)
			progress_show(&line, session, now);
	}
	progress_clear(&line);
	capture_close(&session->capture, session->virtual_clock.now_ns - session->origin_ns);
	return 0;
}
