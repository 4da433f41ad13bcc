/* SPDX-License-Identifier: Apache-2.0 */
/*
 * See session.h. Everything that can be refused is refused here, before the
 * first command: files, selection, the demands of an unattended run, links,
 * identities. Identities are read with plain requests before the workers
 * start, so that a wrong firmware never sees a command.
 */
#include "session.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "lock.h"

void session_print_error(const struct err *err)
{
	struct text text;
	text_init(&text, 0);
	if (err->file[0] && err->line > 0)
		text_printf(&text, "%s:%d:%d: %s", err->file, err->line, err->column, err->message);
	else
		text_printf(&text, "%s: %s", err->file[0] ? err->file : "drivetrial", err->message);
	/* Paths and words of the command line come as they are, and a CI job's may be anybody's. */
	struct text clean;
	text_init(&clean, 0);
	text_add_line(&clean, text_string(&text), text.length);
	(void)fprintf(stderr, "%s\n", text_string(&clean));
	text_release(&clean);
	text_release(&text);
}

static int64_t since_start(void *context)
{
	struct session *session = context;
	return clock_now(&session->base) - session->origin_ns;
}

void session_init(struct session *session, const struct run_options *options)
{
	memset(session, 0, sizeof *session);
	session->options = options;
	arena_init(&session->arena, 0);
	stop_init(&session->stop);
	session->base = options->rehearse ? clock_virtual(&session->virtual_clock) : clock_real();
	session->origin_ns = clock_now(&session->base);
	session->clock = (struct clock){.now = since_start, .context = session};
}

void session_release(struct session *session)
{
	capture_release(&session->capture);
	conductor_free(session->conductor);
	for (size_t i = 0; session->links && i < session->rig->link_count; i++)
		link_release(session->links[i]);
	served_release(session->served);
	(void)journal_close(session->journal, NULL);
	if (session->folder_made)
		run_folder_close(&session->folder);
	for (size_t i = 0; i < session->lock_count; i++)
		if (session->locks[i] > 0)
			(void)close(session->locks[i]);
	stop_release(&session->stop);
	arena_release(&session->arena);
}

/* ---- files ---------------------------------------------------------------- */

int session_print_faults(const struct faults *faults)
{
	struct text text;
	text_init(&text, 0);
	faults_print(faults, &text);
	(void)fputs(text_string(&text), stderr);
	text_release(&text);
	return EXIT_FILE;
}

int session_exit_of(const struct err *err)
{
	session_print_error(err);
	switch (err->code) {
	case ERR_USAGE:
		return EXIT_USAGE;
	case ERR_FILE:
		return EXIT_FILE;
	case ERR_LINK:
		return EXIT_NO_RIG;
	case ERR_OUTPUT:
		return EXIT_NO_OUTPUT;
	case ERR_BUSY:
		return EXIT_IN_USE;
	default:
		return EXIT_INTERNAL;
	}
}

static bool has_faults(const struct session *session)
{
	return session->faults.count > 0;
}

/* The bench is proven once a run, by the first suite. */
void session_drop_bench_tests(struct suite *suite)
{
	while (suite->test_count > 0 && suite->tests[0].bench) {
		suite->tests++;
		suite->test_count--;
	}
}

static int load_files(struct session *session, struct err *err)
{
	const struct run_options *options = session->options;
	if (rig_load(options->rig_path, &session->arena, &session->faults, &session->rig, err) < 0)
		return -1;
	if (has_faults(session) || !session->rig)
		return 0;
	struct override *overrides =
	    arena_array(&session->arena, options->override_count + 1, sizeof *overrides);
	if (!overrides)
		return err_set(err, ERR_NOMEM, "no memory for the files");
	memcpy(overrides, options->overrides, options->override_count * sizeof *overrides);
	for (size_t i = 0; i < options->suite_count; i++) {
		struct suite *suite = NULL;
		if (suite_load(options->suite_paths[i], session->rig, overrides, options->override_count,
		               &session->arena, &session->faults, &suite, err) < 0)
			return -1;
		if (!suite)
			continue;
		if (session->suite_count > 0)
			session_drop_bench_tests(suite);
		session->suites[session->suite_count++] = suite;
	}
	return 0;
}

static int select_tests(struct session *session, struct err *err)
{
	const struct run_options *options = session->options;
	struct selection selection = {.only = options->only,
	                              .only_count = options->only_count,
	                              .tags = options->tags,
	                              .tag_count = options->tag_count,
	                              .part = options->part,
	                              .parts = options->parts};
	for (size_t i = 0; i < session->suite_count; i++) {
		size_t all;
		if (suite_select(session->suites[i], &selection, err) < 0)
			return -1;
		if (suite_selected(session->suites[i], &all) < all)
			session->facts.partial = true;
	}
	return 0;
}

/* Attended runs ask once, on a terminal; unattended ones have demands. */
static int check_attendance(struct session *session)
{
	if (session->options->rehearse)
		return 0;
	if (session->rig->unattended) {
		if (!rig_unattended_ready(session->rig, &session->faults))
			return session_print_faults(&session->faults);
		return 0;
	}
	if (!isatty(STDIN_FILENO) || !isatty(STDERR_FILENO)) {
		(void)fprintf(stderr,
		              "drivetrial: the rig %s says attendance: attended, and there is no terminal "
		              "to ask on; run it from one, or make the rig unattended\n",
		              session->rig->name);
		return EXIT_USAGE;
	}
	char answer[16] = "";
	(void)fprintf(stderr, "Is the area around the shaft clear, and somebody at the emergency stop? "
	                      "Type yes to begin: ");
	if (!fgets(answer, sizeof answer, stdin) || strncmp(answer, "yes", 3) != 0) {
		(void)fprintf(stderr, "drivetrial: not begun\n");
		return EXIT_USAGE;
	}
	return 0;
}

static void show_cautions(const struct session *session)
{
	if (session->options->rehearse || session->options->quiet)
		return;
	(void)fprintf(
	    stderr,
	    "CAUTION  %s is about to move. Keep clear of rotating parts; the DC link stays\n"
	    "         charged after switch-off. This program is no safety function: rely on\n"
	    "         the hard-wired emergency stop, on local codes and on qualified persons.\n",
	    session->rig->name);
}

int session_load(struct session *session)
{
	struct err err = {0};
	if (load_files(session, &err) < 0)
		return session_exit_of(&err);
	if (has_faults(session))
		return session_print_faults(&session->faults);
	if (select_tests(session, &err) < 0)
		return session_exit_of(&err);
	show_cautions(session);
	return check_attendance(session);
}

/* ---- links and identity ----------------------------------------------------- */

struct model_port { /* which link of the served bench a modelled link reaches */
	struct session *session;
	int link;
};

static size_t execute(void *context, uint8_t unit, const uint8_t *pdu, size_t length, int64_t at_ns,
                      uint8_t *ret_reply)
{
	struct model_port *port = context;
	struct served *served = port->session->served;
	model_advance(served_model(served), at_ns);
	if (port->session->is_cut &&
	    port->session->is_cut(port->session->is_cut_context, port->link, at_ns))
		return 0;
	return served_answer(served, port->link, unit, pdu, length, ret_reply);
}

/* tcp:HOST:PORT or rtu:PATH, from --link. */
static int override_address(struct session *session, const char *address,
                            struct link_config *config, struct err *err)
{
	char *copy = arena_strdup(&session->arena, address);
	if (!copy)
		return err_set(err, ERR_NOMEM, "no memory for an address");
	if (strncmp(copy, "rtu:", 4) == 0 && copy[4] == '/') {
		config->tcp_host = NULL;
		config->serial_path = copy + 4;
		if (config->baud == 0) {
			config->baud = 115200;
			config->parity = PARITY_EVEN;
			config->stop_bits = 1;
		}
		return 0;
	}
	char *colon = strrchr(copy, ':');
	char *end = NULL;
	long port = colon ? strtol(colon + 1, &end, 10) : 0;
	if (strncmp(copy, "tcp:", 4) != 0 || !colon || colon <= copy + 4 || port < 1 || port > 65535 ||
	    *end != '\0')
		return err_set(err, ERR_USAGE, "'%s' is no address: write tcp:HOST:PORT or rtu:/dev/PATH",
		               address);
	*colon = '\0';
	char *host = copy + 4;
	size_t length = strlen(host);
	if (host[0] == '[' && host[length - 1] == ']') {
		host[length - 1] = '\0';
		host++;
	}
	config->tcp_host = host;
	config->tcp_port = (uint16_t)port;
	config->serial_path = NULL;
	return 0;
}

static int apply_addresses(struct session *session, int link, struct link_config *config,
                           struct err *err)
{
	for (size_t i = 0; i < session->options->address_count; i++) {
		const struct link_address *address = &session->options->addresses[i];
		if (strcmp(address->link, session->rig->links[link].name) == 0 &&
		    override_address(session, address->address, config, err) < 0)
			return -1;
	}
	return 0;
}

static int check_address_names(struct session *session, struct err *err)
{
	for (size_t i = 0; i < session->options->address_count; i++) {
		const char *name = session->options->addresses[i].link;
		if (rig_link_find(session->rig, name, strlen(name)) < 0)
			return err_set(err, ERR_USAGE, "--link: the rig %s has no link '%s'",
			               session->rig->name, name);
	}
	return 0;
}

static int make_link(struct session *session, size_t index, struct err *err)
{
	const struct rig *rig = session->rig;
	struct link_config config = rig->links[index].config;
	config.reply_timeout_ns = rig->links[index].reply_timeout_ns;
	config.clock = since_start;
	config.clock_context = session;
	if (apply_addresses(session, (int)index, &config, err) < 0)
		return -1;
	for (size_t d = 0; d < rig->device_count; d++)
		if (rig->devices[d].link == (int)index && rig->devices[d].in_flight > config.in_flight)
			config.in_flight = rig->devices[d].in_flight;
	if (!session->options->rehearse && config.tcp_host)
		return config.in_flight > 1 ? link_tcp_flight_new(&config, &session->links[index], err)
		                            : link_tcp_new(&config, &session->links[index], err);
	if (!session->options->rehearse)
		return link_rtu_new(&config, &session->links[index], err);
	struct model_port *port = arena_alloc(&session->arena, sizeof *port);
	if (!port)
		return err_set(err, ERR_NOMEM, "no memory for a link");
	*port = (struct model_port){.session = session, .link = (int)index};
	struct timing timing = rig_link_timing(rig, (int)index);
	return link_model_new(&config, &timing, session->options->seed * 64 + index, execute, port,
	                      &session->links[index], err);
}

static int make_served(struct session *session, struct err *err)
{
	uint64_t defects = 0;
	if (session->options->defect) {
		int row = model_defect_find(session->options->defect);
		if (row < 0)
			return err_set(err, ERR_USAGE,
			               "unknown defect '%s'; 'drivetrial rehearse --defect list' shows them",
			               session->options->defect);
		defects = UINT64_C(1) << row;
	}
	return served_new(session->rig, session->options->seed, defects, &session->faults,
	                  &session->served, err);
}

static int lock_endpoint(struct session *session, const struct link_config *config, struct err *err)
{
	char name[96];
	if (config->tcp_host)
		(void)snprintf(name, sizeof name, "tcp-%.60s-%u", config->tcp_host, config->tcp_port);
	else
		(void)snprintf(name, sizeof name, "serial-%.60s", config->serial_path);
	char clean[101];
	file_name_clean(name, clean, sizeof clean);
	return lock_take(clean, session->options->wait_ns, &session->locks[session->lock_count++], err);
}

/* The rig by its name, unless --link leads elsewhere, and every endpoint. */
static int take_locks(struct session *session, struct err *err)
{
	const struct rig *rig = session->rig;
	if (session->options->rehearse)
		return 0;
	session->locks = arena_array(&session->arena, rig->link_count + 1, sizeof *session->locks);
	if (!session->locks)
		return err_set(err, ERR_NOMEM, "no memory for the locks");
	if (session->options->address_count == 0 &&
	    lock_take(rig->name, session->options->wait_ns, &session->locks[session->lock_count++],
	              err) < 0)
		return -1;
	for (size_t i = 0; i < rig->link_count; i++) {
		struct link_config config = rig->links[i].config;
		if (apply_addresses(session, (int)i, &config, err) < 0 ||
		    lock_endpoint(session, &config, err) < 0)
			return -1;
	}
	return 0;
}

int session_reach(struct session *session)
{
	const struct rig *rig = session->rig;
	struct err err = {0};
	if (check_address_names(session, &err) < 0 || take_locks(session, &err) < 0)
		return session_exit_of(&err);
	if (session->options->rehearse && make_served(session, &err) < 0)
		return session_exit_of(&err);
	if (has_faults(session))
		return session_print_faults(&session->faults);
	session->links = arena_array(&session->arena, rig->link_count, sizeof(struct link *));
	if (!session->links)
		return EXIT_INTERNAL;
	for (size_t i = 0; i < rig->link_count; i++)
		if (make_link(session, i, &err) < 0)
			return session_exit_of(&err);
	return 0;
}

int session_connect(struct session *session)
{
	const struct rig *rig = session->rig;
	struct err err = {0};
	int code = session_reach(session);
	if (code != 0)
		return code;
	for (size_t i = 0; i < rig->link_count; i++) {
		struct err cause = {0};
		if (link_open(session->links[i], &cause) < 0) {
			(void)err_set(&err, ERR_LINK, "link %s: %s", rig->links[i].name, cause.message);
			return session_exit_of(&err);
		}
	}
	if (session_identify(session, &err) < 0)
		return session_exit_of(&err);
	if (has_faults(session))
		return session_print_faults(&session->faults);
	struct conductor_config config = {.rig = rig,
	                                  .suites = session->suites,
	                                  .suite_count = session->suite_count,
	                                  .links = session->links,
	                                  .clock = session->clock,
	                                  .stop = &session->stop,
	                                  .arena = &session->arena};
	if (conductor_new(&config, &session->conductor, &err) < 0)
		return session_exit_of(&err);
	return 0;
}
