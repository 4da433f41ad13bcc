/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Threads: one for the conductor, one a link; main keeps files, signals and
 * progress. Signals are blocked before the first thread and read from a
 * signalfd, so nothing runs in a handler. The first SIGINT, SIGTERM or SIGHUP
 * raises `stop`; later ones change nothing, since the way to rest must not be
 * cut short by an impatient hand.
 */
#include <errno.h>
#include <poll.h>
#include <signal.h>
#include <stdio.h>
#include <string.h>
#include <sys/prctl.h>
#include <sys/signalfd.h>
#include <unistd.h>

#include "realtime.h"
#include "session.h"

static void *conduct(void *context)
{
	conductor_loop(context);
	return NULL;
}

static void *work(void *context)
{
	worker_loop(context);
	return NULL;
}

struct crew {
	pthread_t conductor, workers[64];
	size_t worker_count;
	bool conducting;
};

/* What --realtime obtains; the run goes on without it. */
static void hurry(struct session *session, const struct crew *crew, struct realtime *realtime)
{
	char *text = session->facts.realtime;
	for (size_t i = 0; i < crew->worker_count; i++)
		realtime_thread(realtime, crew->workers[i], REALTIME_LINK_PRIORITY, (int)i);
	if (crew->conducting)
		realtime_thread(realtime, crew->conductor, REALTIME_CONDUCTOR_PRIORITY, -1);
	realtime_text(realtime, text, sizeof session->facts.realtime);
	if (realtime->fifo < realtime->threads || realtime->locked == 0)
		(void)fprintf(stderr,
		              "drivetrial: --realtime was obtained in part only: %s. SCHED_FIFO needs "
		              "CAP_SYS_NICE or an rtprio limit, locked memory a memlock limit\n",
		              text);
}

static int start(struct session *session, struct crew *crew)
{
	for (size_t i = 0; i < session->rig->link_count && i < 64; i++) {
		struct worker *worker = conductor_worker(session->conductor, i);
		worker_spin(worker, session->options->realtime ? REALTIME_SPIN_NS : 0);
		if (pthread_create(&crew->workers[i], NULL, work, worker) != 0)
			return -1;
		crew->worker_count = i + 1;
	}
	if (pthread_create(&crew->conductor, NULL, conduct, session->conductor) != 0)
		return -1;
	crew->conducting = true;
	return 0;
}

static void finish(struct session *session, struct crew *crew)
{
	if (crew->conducting)
		(void)pthread_join(crew->conductor, NULL);
	for (size_t i = 0; i < crew->worker_count; i++)
		worker_quit(conductor_worker(session->conductor, i));
	for (size_t i = 0; i < crew->worker_count; i++)
		(void)pthread_join(crew->workers[i], NULL);
}

static void take_signal(struct session *session, int fd)
{
	struct signalfd_siginfo info;
	if (read(fd, &info, sizeof info) != (ssize_t)sizeof info)
		return;
	const char *name = info.ssi_signo == SIGINT    ? "SIGINT"
	                   : info.ssi_signo == SIGTERM ? "SIGTERM"
	                                               : "SIGHUP";
	if (stop_raise(&session->stop, "%s", name)) {
		(void)fprintf(stderr, "\n%s: the bench is brought to its safe state, please wait\n", name);
		conductor_wake(session->conductor);
	}
}

static void stop_signals(sigset_t *set)
{
	(void)sigemptyset(set);
	(void)sigaddset(set, SIGINT);
	(void)sigaddset(set, SIGTERM);
	(void)sigaddset(set, SIGHUP);
}

void engine_hold_signals(void)
{
	sigset_t set;
	stop_signals(&set);
	(void)signal(SIGPIPE, SIG_IGN);
	(void)pthread_sigmask(SIG_BLOCK, &set, NULL);
}

int engine_real(struct session *session)
{
	sigset_t set;
	struct crew crew = {0};
	struct progress_line line;
	struct realtime realtime;
	stop_signals(&set);
	(void)prctl(PR_SET_TIMERSLACK, 1UL);
	int fd = -1;
	if (pthread_sigmask(SIG_BLOCK, &set, NULL) != 0 ||
	    (fd = signalfd(-1, &set, SFD_CLOEXEC | SFD_NONBLOCK)) < 0) {
		(void)fprintf(stderr, "drivetrial: cannot watch for signals: %s\n", strerror(errno));
		return EXIT_INTERNAL;
	}
	/* Lines of its own would tear a progress line. */
	progress_init(&line, session->options->quiet || session->options->verbose);
	session->capture.verbose = session->options->verbose;
	if (session->options->realtime)
		realtime_begin(&realtime);
	if (start(session, &crew) < 0) {
		(void)stop_raise(&session->stop, "a thread could not be started");
		if (!crew.conducting)
			/* Nothing was commanded: the workers alone command nothing. */
			(void)fprintf(stderr, "drivetrial: a thread could not be started\n");
	}
	if (session->options->realtime)
		hurry(session, &crew, &realtime);
	while (crew.conducting && !conductor_ended(session->conductor)) {
		struct pollfd poll_fd = {.fd = fd, .events = POLLIN};
		int suite, test;
		if (poll(&poll_fd, 1, 10) > 0)
			take_signal(session, fd);
		int64_t now = clock_now(&session->clock);
		capture_drain(&session->capture, now);
		if (conductor_gate_asked(session->conductor, &suite, &test))
			session_answer_gate(session);
		progress_show(&line, session, now);
	}
	finish(session, &crew);
	progress_clear(&line);
	capture_close(&session->capture, clock_now(&session->clock));
	(void)close(fd);
	return crew.conducting ? 0 : EXIT_INTERNAL;
}
