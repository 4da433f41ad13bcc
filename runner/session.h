/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_SESSION_H
#define DRIVETRIAL_SESSION_H
/*
 * One run from the command line to the reports: what `run` and `rehearse`
 * share. The two differ in links and clock only: sockets and serial lines with
 * CLOCK_MONOTONIC, or the modelled bench and a number.
 *
 *   session_load      files, selection, demands of an unattended run
 *   session_connect   links, identity; nothing is commanded
 *   session_record    lock, run folder, journal
 *   engine_real / engine_virtual   the run itself, until rest
 *   session_finish    verdicts, reports, SHA256SUMS, summary; the exit code
 */
#include <time.h>

#include "capture.h"
#include "served.h"

enum { SUITES_MOST = 16, OVERRIDES_MOST = 64, SELECT_MOST = 64 };

enum exit_code {
	EXIT_ALL_PASS = 0,
	EXIT_TEST_FAILED = 1,
	EXIT_UNDECIDED = 2,
	EXIT_ABORTED = 3,
	EXIT_NOT_AT_REST = 4,
	EXIT_USAGE = 64,
	EXIT_FILE = 65,
	EXIT_NO_RIG = 69,
	EXIT_INTERNAL = 70,
	EXIT_NO_OUTPUT = 73,
	EXIT_IN_USE = 75,
};

struct link_address { /* --link LINK=ADDRESS */
	const char *link, *address;
};

struct run_options {
	bool rehearse;
	const char *rig_path;
	const char *suite_paths[SUITES_MOST];
	size_t suite_count;
	const char *out;
	struct override overrides[OVERRIDES_MOST];
	size_t override_count;
	const char *only[SELECT_MOST], *tags[SELECT_MOST];
	size_t only_count, tag_count;
	int part, parts;
	struct link_address addresses[16];
	size_t address_count;
	uint64_t seed;
	int64_t wait_ns; /* for a rig that is in use */
	const char *defect;
	bool quiet, verbose, yes, realtime;
};

struct session {
	const struct run_options *options;
	struct arena arena;
	const struct rig *rig;
	struct suite *suites[SUITES_MOST];
	size_t suite_count;
	struct faults faults;
	/* time */
	struct virtual_clock virtual_clock;
	struct clock base, clock; /* clock: ns since the start of the run */
	int64_t origin_ns;
	/* the bench */
	struct served *served; /* rehearse */
	/* Rehearse, for tests of the ways out: whether a wire is cut at that time; NULL: never. */
	bool (*is_cut)(void *context, int link, int64_t at_ns);
	void *is_cut_context;
	struct link **links;
	struct link_reply reply; /* of requests before and after the run */
	struct stop stop;
	struct conductor *conductor;
	struct run_facts facts;
	int *locks; /* descriptors; 0: not taken */
	size_t lock_count;
	/* the record */
	struct run_folder folder;
	bool folder_made;
	struct journal *journal;
	struct capture capture;
};

/* One option or operand (name NULL) of the verbs that take a rig and suites; verb_run.c. */
int run_option_take(struct run_options *options, const char *name, const char *value,
                    struct err *reterr);
/* With what the options hold; for those made by calloc. */
void run_options_free(struct run_options *options);

void session_init(struct session *session, const struct run_options *options);
void session_release(struct session *session);
/* Each returns 0, or an exit code after a message on stderr. */
int session_load(struct session *session);
/* The first half of session_connect: locks are taken, links made, and none opened yet. */
int session_reach(struct session *session);
int session_connect(struct session *session);
int session_record(struct session *session);
int session_finish(struct session *session);
/* The bench is proven once a run, by the first suite: the others lose their bench tests. */
void session_drop_bench_tests(struct suite *suite);
/*
 * Before the first command: reads identities and parameters, and adds a fault
 * for each that is not what suite or rig expect. Errors: ERR_LINK, ERR_NOMEM.
 */
int session_identify(struct session *session, struct err *err);
/*
 * After the threads have ended: reads them again. False, with a sentence in
 * why, where one is not what it was before the run.
 */
bool session_drive_same(struct session *session, char *why, size_t size);
/* Judges one bench test from what was recorded so far; for the gates. */
void session_answer_gate(struct session *session);
void session_print_error(const struct err *err);
/* Prints them and gives the exit code that belongs to wrong files. */
int session_print_faults(const struct faults *faults);
/* Prints it and gives the exit code that belongs to it. */
int session_exit_of(const struct err *err);

/*
 * engine_*.c: drive the conductor until the run has ended. From
 * engine_hold_signals() on, signals wait for engine_real(): a run folder that
 * was begun is then always ended in order.
 */
void engine_hold_signals(void);
int engine_real(struct session *session);
int engine_virtual(struct session *session);
/*
 * In virtual time: ticks everybody at the present instant until all wait for a
 * later one, and returns the earliest of those (of the virtual clock).
 */
int64_t engine_settle(struct session *session);

/* progress.c */
struct progress_line {
	bool terminal, quiet;
	int suite, test;
	int64_t shown_ns;
	bool drawn;
};
void progress_init(struct progress_line *line, bool quiet);
void progress_show(struct progress_line *line, struct session *session, int64_t now_ns);
void progress_clear(struct progress_line *line);

#endif
