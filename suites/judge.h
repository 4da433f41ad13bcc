/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_JUDGE_H
#define DRIVETRIAL_JUDGE_H
/*
 * From what was recorded to verdicts. Pure: the same recording and the same
 * files give the same result.
 *
 * A test passes only if it was completed, every limit passed, and it had at
 * least one limit. An expired `await` is a fail if the samples prove that the
 * condition did not come true, else an error.
 */
#include "recorded.h"

struct limit_result {
	const struct limit *limit;
	enum verdict verdict;
	char reason[512];
};

struct metric_result {
	struct metric metric;
	struct limit_result *limits; /* of this metric; may be none */
	size_t limit_count;
};

struct check_result {
	const struct check_use *use;
	enum verdict verdict; /* worst of its limits; VERDICT_SKIPPED where it was not evaluated */
	struct metric_result *metrics;
	size_t metric_count;
};

struct test_result {
	const struct test *test;
	const struct recorded_test *recorded; /* NULL: not selected or not reached */
	enum verdict verdict;
	char reason[768]; /* one sentence a person can act on */
	struct check_result *checks;
	size_t check_count;
	/* The series that the checks saw, one per channel of the rig, for plots. */
	struct series *series;
};

struct run_totals {
	size_t tests, pass, fail, inconclusive, error, skipped;
};

/* What a run was, beside its verdicts. Filled from journal and command line. */
struct identity_read {
	const char *device, *key, *text;
};

struct link_counts {
	const char *link;
	uint64_t requests, timeouts, garbled, exceptions, reconnects;
};

/*
 * What went wrong on the way, and what was done on purpose that weakens the
 * watch over the bench: from the journal, in its order. Equal ones are one.
 */
enum run_event_kind { RUN_EVENT_LINK = 0, RUN_EVENT_INTERLOCK, RUN_EVENT_REST, RUN_EVENT_NOTE };
enum { RUN_EVENTS_MOST = 100 };
struct run_event {
	enum run_event_kind kind;
	const char *where; /* link or channel; "" */
	const char *text;
	int64_t first_ns, last_ns;
	size_t count;
};

struct run_facts {
	const struct rig *rig;
	char tool_version[64];
	char started_utc[32]; /* YYYY-MM-DDTHH:MM:SS */
	char host[128];
	bool rehearsal;     /* on the modelled bench */
	const char *defect; /* rehearsed defect, or NULL */
	uint64_t seed;
	int64_t duration_ns;
	bool aborted;
	char abort_reason[256];
	bool rest_confirmed;
	char rest_reason[256]; /* how it was confirmed, or why not */
	bool rest_was_needed;  /* false: nothing was commanded */
	struct identity_read *identities;
	size_t identity_count;
	struct link_counts *links;
	size_t link_count;
	struct run_event *events;
	size_t event_count;
	size_t events_left_out; /* beyond RUN_EVENTS_MOST different ones */
	bool partial;
	char realtime[128]; /* what was obtained of the scheduler */
};

struct suite_result {
	const struct suite *suite;
	struct test_result *tests; /* in the order of suite->tests */
	size_t test_count;
	struct run_totals totals;
};

struct run_result {
	struct run_facts facts;
	struct suite_result *suites;
	size_t suite_count;
	struct run_totals totals;
	int exit_code; /* section "exit codes" of the README */
};

/* Everything is allocated in `arena`. recorded may be NULL (not reached or not selected). */
int judge_test(const struct rig *rig, const struct suite *suite, const struct test *test,
               const struct recorded_test *recorded, struct arena *arena,
               struct test_result *ret_result, struct err *reterr);
/* Judges populations of repeats, names instruments past their calibration, counts, and finds the
 * exit code: the highest ranking of 4, 3, 1, 2, 0 that applies. */
void judge_totals(struct run_result *run);

#endif
