/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_SUITE_H
#define DRIVETRIAL_SUITE_H
/*
 * The suite: what is commanded and what is judged, as one YAML file describes
 * it, bound to a rig. Sweeps and repeats are expanded while loading, so a
 * struct test is one test case. Lives in one arena, never changes after
 * loading.
 */
#include "decision.h"
#include "rig.h"

struct sample_group {
	int64_t every_ns; /* 0: as fast as the link allows */
	int *channels;
	size_t channel_count;
	int64_t decimate; /* of so many rows one is recorded; 0 is as 1 */
};

struct check_use {
	const struct check_kind *kind;
	const char *name; /* unique in the test: the kind, or kind-2 ... */
	struct position at;
	void *params;
	struct limit *limits;
	size_t limit_count;
};

/*
 * How repeats are judged together. Shared by the cases of one point of a sweep,
 * which stand side by side.
 */
enum repeats_judge { REPEATS_EACH = 0, REPEATS_TOLERANCE_INTERVAL, REPEATS_WORST_CASE };
struct population {
	enum repeats_judge judge;
	double coverage, confidence; /* shares, of the tolerance interval */
	size_t times;
};

/* A value of a sweep, as the name and the report show it. */
struct sweep_value {
	const char *name;  /* "speed" */
	const char *shown; /* "1500 rpm" */
};

struct test {
	const char *name;  /* unique: "SPD-01", "ANG-02[speed=1500rpm,load=1.2Nm]", "SPD-01[3]" */
	const char *base;  /* as in the file: "SPD-01" */
	const char *title; /* "" where none */
	struct position at;
	const char **requirements;
	size_t requirement_count;
	const char **tags;
	size_t tag_count;
	bool continues; /* goes on from where the test before it ended */
	struct sample_group *groups;
	size_t group_count;
	struct step *stimulus, *restore;
	size_t stimulus_count, restore_count;
	struct check_use *checks;
	size_t check_count;
	struct mark_names marks;
	struct sweep_value *sweep;
	size_t sweep_count;
	const struct population *population; /* of repeats judged together; NULL: each by itself */
	bool bench;                          /* bench/watchdog and bench/direction: made from the rig */
	bool selected;
};

struct expectation {
	const char *key;  /* "firmware" */
	const char *text; /* what the identity must be */
	struct position at;
};

struct override { /* --set half_speed='1200 rpm' */
	const char *name, *value;
	bool used;
};

struct suite_value { /* values: as used in this run */
	const char *name, *shown;
	bool overridden;
};

struct suite {
	const char *name, *note;
	const struct yaml_file *file;
	struct expectation *expect;
	size_t expect_count;
	struct suite_value *values;
	size_t value_count;
	enum decision_rule rule;
	struct test *tests; /* bench tests first */
	size_t test_count;
	int64_t duration_ns; /* expected, stimulus and restore of the selected tests */
};

/*
 * Loads a suite against a rig. Faults are collected; *ret_suite is NULL where
 * there were any. overrides: from --set; an unused one is a fault without a
 * position (file NULL).
 */
int suite_load(const char *path, const struct rig *rig, struct override *overrides,
               size_t override_count, struct arena *arena, struct faults *faults,
               struct suite **ret_suite, struct err *reterr);

struct selection {
	const char *const *only; /* names, base names or globs with * */
	size_t only_count;
	const char *const *tags;
	size_t tag_count;
	int part, parts; /* --part 2/5; 0/0: all */
};
/*
 * Sets `selected`. Chains of continuing tests are one unit. Bench tests are
 * always selected. Errors: ERR_USAGE where a name or tag matches nothing.
 */
int suite_select(struct suite *suite, const struct selection *selection, struct err *reterr);
/* How many tests are selected, bench tests not counted; *ret_all: of how many. */
size_t suite_selected(const struct suite *suite, size_t *ret_all);

/*
 * Makes the test cases bench/watchdog:DEVICE and bench/direction (numbered where
 * there are several) from the rig. suite_load() puts them before the tests of
 * every suite; a run drops those of its second and later suites. Errors:
 * ERR_NOMEM, ERR_FILE where the rig's own words cannot make them.
 */
int bench_tests_make(const struct rig *rig, struct arena *arena, struct test **ret_tests,
                     size_t *ret_count, struct err *reterr);

/* The channels that a test needs to be read: sampled, awaited, interlocks, life counters.
 * set: a byte per channel of the rig. */
void test_channels(const struct rig *rig, const struct test *test, unsigned char *set);
/* The same for the time between tests: interlocks, safe state, life counters. */
void idle_channels(const struct rig *rig, unsigned char *set);

/* Names of all fields for the reference and the schema. */
const struct field_table *suite_fields(void);
const struct field_table *sample_fields(void); /* `sample` */
const struct field_table *test_fields(void);
const struct field_table *check_fields(void);  /* beside the fields of the check's kind */
const struct field_table *window_fields(void); /* a check's `window` */
const struct field_table *limit_fields(void);  /* beside the options of the metric */

#endif
