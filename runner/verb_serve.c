/* SPDX-License-Identifier: Apache-2.0 */
/*
 * `serve`: the modelled bench as Modbus servers, for trying suites in real
 * time and for tests of any client. SIGTERM and SIGINT end it with a line that
 * says what the shaft does, so that a test can ask the model and not the
 * runner; SIGUSR1 says so without an end. Signals come through a signalfd, so
 * nothing runs in a handler.
 */
#include <errno.h>
#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/signalfd.h>
#include <unistd.h>

#include "options.h"
#include "server.h"
#include "session.h"
#include "verbs.h"

enum { LISTENS_MOST = 16 };

static const struct option_row ROWS[] = {
    {"rig", true, "the rig file (needed); it must have a model: section"},
    {"listen", true,
     "LINK=ADDRESS: tcp:HOST:PORT (port 0: any free one) or rtu:BAUD (a new pty, as slow as such "
     "a\n"
     "                 line; rtu: of the rig's rate; rtu:0: not slowed)"},
    {"defect", true, "NAME: builds the controller wrong in a named way; 'list' shows them"},
    {"seed", true, "N: of noise; default 1"},
    {"help", false, "this text"},
};

enum { ROW_COUNT = sizeof ROWS / sizeof ROWS[0] };

struct serve_options {
	const char *rig_path;
	struct {
		const char *text;
		size_t name_length; /* LINK in LINK=ADDRESS */
	} listens[LISTENS_MOST];
	size_t listen_count;
	uint64_t defects, seed;
	bool list, help;
};

struct serving {
	struct served *served;
	int signal_fd;
};

static int take_defect(struct serve_options *options, const char *value, struct err *reterr)
{
	if (strcmp(value, "list") == 0) {
		options->list = true;
		return 0;
	}
	int row = model_defect_find(value);
	if (row >= 0) {
		options->defects |= UINT64_C(1) << row;
		return 0;
	}
	const char *names[64];
	size_t count;
	const struct model_defect *defects = model_defects(&count);
	for (size_t i = 0; i < 64; i++)
		names[i] = i < count ? defects[i].name : "";
	const char *nearest = text_nearest(value, names, count);
	return err_set(reterr, ERR_USAGE, "unknown defect '%s'%s%s; --defect list shows them", value,
	               nearest ? "; the nearest is " : "", nearest ? nearest : "");
}

static int take_seed(struct serve_options *options, const char *value, struct err *reterr)
{
	char *end;
	errno = 0;
	options->seed = strtoull(value, &end, 10);
	if (value[0] < '0' || value[0] > '9' || *end != '\0' || errno != 0)
		return err_set(reterr, ERR_USAGE, "--seed wants a whole number, not '%s'", value);
	return 0;
}

static int take_listen(struct serve_options *options, const char *value, struct err *reterr)
{
	const char *equals = strchr(value, '=');
	if (!equals || equals == value || options->listen_count == LISTENS_MOST)
		return err_set(reterr, ERR_USAGE, "--listen wants LINK=ADDRESS, at most %d times, not '%s'",
		               LISTENS_MOST, value);
	options->listens[options->listen_count].text = value;
	options->listens[options->listen_count++].name_length = (size_t)(equals - value);
	return 0;
}

static int take(void *context, const struct option_row *row, const char *value, struct err *reterr)
{
	struct serve_options *options = context;
	if (!row)
		return err_set(reterr, ERR_USAGE, "serve takes no '%s'", value);
	if (strcmp(row->name, "rig") == 0)
		options->rig_path = value;
	else if (strcmp(row->name, "listen") == 0)
		return take_listen(options, value, reterr);
	else if (strcmp(row->name, "defect") == 0)
		return take_defect(options, value, reterr);
	else if (strcmp(row->name, "seed") == 0)
		return take_seed(options, value, reterr);
	else
		options->help = true;
	return 0;
}

static int show_help(void)
{
	struct text out;
	text_init(&out, 0);
	text_puts(&out,
	          "drivetrial serve --rig RIG [--listen LINK=ADDRESS] [--defect NAME] [--seed N]\n"
	          "\n"
	          "Answers as the modelled bench, in real time, with the register map of the rig\n"
	          "file, and prints `ready LINK=ADDRESS ...` when all links listen. SIGTERM ends\n"
	          "it, SIGUSR1 prints the state of the shaft.\n\n");
	options_describe(ROWS, ROW_COUNT, &out);
	bool written = fputs(text_string(&out), stdout) >= 0 && fflush(stdout) == 0;
	text_release(&out);
	return written ? 0 : EXIT_NO_OUTPUT;
}

static int show_defects(void)
{
	size_t count;
	const struct model_defect *defects = model_defects(&count);
	bool written = true;
	for (size_t i = 0; i < count; i++)
		written = printf("%s\t%s\n", defects[i].name, defects[i].text) > 0 && written;
	return written && fflush(stdout) == 0 ? 0 : EXIT_NO_OUTPUT;
}

static int show_faults(const struct faults *faults)
{
	struct text out;
	text_init(&out, 0);
	faults_print(faults, &out);
	(void)fputs(text_string(&out), stderr);
	text_release(&out);
	return EXIT_FILE;
}

static bool on_signal(void *context)
{
	const struct serving *serving = context;
	struct signalfd_siginfo info;
	char state[160];
	if (read(serving->signal_fd, &info, sizeof info) != (ssize_t)sizeof info)
		return false;
	bool asked = info.ssi_signo == (uint32_t)SIGUSR1;
	(void)printf("%s%s\n", asked ? "state " : "",
	             server_state(serving->served, state, sizeof state));
	(void)fflush(stdout);
	return !asked;
}

static void on_late(void *context, int64_t behind_ns)
{
	(void)context;
	(void)fprintf(stderr,
	              "drivetrial serve: the modelled bench was %lld ms behind real time; this "
	              "machine is too busy to trust times measured on it\n",
	              (long long)(behind_ns / 1000000));
}

/* The address that --listen gives a link, or NULL. */
static const char *address_of(const struct serve_options *options, const char *name)
{
	const char *address = NULL;
	for (size_t i = 0; i < options->listen_count; i++) {
		size_t length = options->listens[i].name_length;
		if (strlen(name) == length && memcmp(options->listens[i].text, name, length) == 0)
			address = options->listens[i].text + length + 1;
	}
	return address;
}

static int listen_all(const struct serve_options *options, const struct rig *rig,
                      struct server *server, struct err *reterr)
{
	for (size_t i = 0; i < options->listen_count; i++)
		if (rig_link_find(rig, options->listens[i].text, options->listens[i].name_length) < 0)
			return err_set(reterr, ERR_USAGE, "--listen: the rig %s has no link '%.*s'", rig->name,
			               (int)options->listens[i].name_length, options->listens[i].text);
	for (size_t i = 0; i < rig->link_count; i++)
		if (server_listen(server, (int)i, address_of(options, rig->links[i].name), reterr) < 0)
			return -1;
	return 0;
}

static bool say_ready(const struct rig *rig, const struct server *server)
{
	bool written = printf("ready") > 0;
	for (size_t i = 0; i < rig->link_count; i++)
		written =
		    printf(" %s=%s", rig->links[i].name, server_address(server, (int)i)) > 0 && written;
	return printf("\n") > 0 && fflush(stdout) == 0 && written;
}

static int open_signals(void)
{
	sigset_t set;
	(void)sigemptyset(&set);
	(void)sigaddset(&set, SIGTERM);
	(void)sigaddset(&set, SIGINT);
	(void)sigaddset(&set, SIGUSR1);
	(void)signal(SIGPIPE, SIG_IGN); /* who reads our output may go before us */
	if (sigprocmask(SIG_BLOCK, &set, NULL) < 0)
		return -1;
	return signalfd(-1, &set, SFD_CLOEXEC | SFD_NONBLOCK);
}

static int serve(const struct serve_options *options, const struct rig *rig, struct faults *faults)
{
	struct serving serving = {.signal_fd = -1};
	struct server *server = NULL;
	struct err err = {0};
	int code = EXIT_INTERNAL;

	if (served_new(rig, options->seed, options->defects, faults, &serving.served, &err) < 0)
		return session_exit_of(&err);
	if (!serving.served)
		return show_faults(faults);
	serving.signal_fd = open_signals();
	if (serving.signal_fd < 0)
		goto out;
	if (server_new(serving.served, rig, &server, &err) < 0 ||
	    listen_all(options, rig, server, &err) < 0) {
		code = session_exit_of(&err);
		goto out;
	}
	if (!say_ready(rig, server)) {
		code = EXIT_NO_OUTPUT;
		goto out;
	}
	code =
	    server_run(server, serving.signal_fd, on_signal, on_late, &serving) < 0 ? EXIT_INTERNAL : 0;
out:
	server_release(server);
	served_release(serving.served);
	if (serving.signal_fd >= 0)
		(void)close(serving.signal_fd);
	return code;
}

int verb_serve(int argc, char **argv)
{
	struct serve_options options = {.seed = 1};
	struct err err = {0};
	struct faults faults = {0};
	struct arena arena;
	const struct rig *rig = NULL;

	if (options_parse(argc, argv, ROWS, ROW_COUNT, take, &options, &err) < 0)
		return session_exit_of(&err);
	if (options.help)
		return show_help();
	if (options.list)
		return show_defects();
	if (!options.rig_path) {
		(void)err_set(&err, ERR_USAGE, "serve needs --rig RIG");
		return session_exit_of(&err);
	}
	arena_init(&arena, 0);
	int code;
	if (rig_load(options.rig_path, &arena, &faults, &rig, &err) < 0)
		code = session_exit_of(&err);
	else if (!rig)
		code = show_faults(&faults);
	else
		code = serve(&options, rig, &faults);
	arena_release(&arena);
	return code;
}
