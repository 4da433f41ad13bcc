/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_LOADING_H
#define DRIVETRIAL_LOADING_H
/*
 * The state of loading one suite file, shared by the files suite*.c and by
 * nobody else. Faults are added and reading goes on; memory is the only error.
 */
#include "bind.h"
#include "suite.h"

enum {
	SWEEP_KEYS_MOST = 8,
	CASES_MOST = 1000,       /* of one test, by sweep and repeat */
	SUITE_CASES_MOST = 5000, /* of one suite */
	SUITE_VALUES_MOST = 256,
	GROUPS_MOST = 16,
	ID_MOST = 100, /* bytes of a requirement */
};

struct sweep;

/* What `$name` stands for. */
struct value {
	const char *name;
	const struct yaml_node *node;
	const char *override; /* of --set; NULL: the file's */
	bool used;
};

struct loading {
	const struct rig *rig;
	struct arena *arena;
	struct faults *faults;
	struct err *reterr;
	bool out_of_memory;
	struct suite *suite;
	struct binder binder; /* context: this object */
	struct value *values; /* of the suite, then those of the sweep at hand */
	size_t value_count, suite_value_count;
	struct sample_group *groups; /* of the suite */
	size_t group_count;
	bool groups_known; /* false: the suite's `sample` has faults */
	/* while a test is read */
	struct test *test;
	const struct sweep *sweep;           /* of the test; NULL between tests */
	const struct population *population; /* of the repeats at hand */
	size_t population_left;              /* cases that still belong to it */
	bool sample_known,
	    stimulus_known;      /* false: it has faults, and what follows from them is no news */
	enum decision_rule rule; /* of the test */
	unsigned char *sampled;  /* a byte per channel of the rig */
	const struct yaml_node *check_map; /* fields of the check at hand */
};

/* Marks the memory as gone; returns NULL. */
void *loading_no_memory(struct loading *l);

/* suite_values.c */

/* Gives what to read instead of `$name`; NULL after a fault. context: struct loading. */
const struct yaml_node *values_substitute(void *context, const struct yaml_node *node);
/* A text with every `$name` in it replaced; NULL after a fault. */
const char *values_text(struct loading *l, const struct yaml_node *node);
/* Reads `values:`; overrides from --set replace what the file says. */
void values_load(struct loading *l, const struct yaml_node *mapping, struct override *overrides,
                 size_t override_count);
void overrides_check(struct loading *l, const struct override *overrides, size_t count);

/* suite_sweep.c */

struct sweep_key {
	const char *name;
	const struct yaml_node **items;
	const char **shown; /* "1500 rpm" */
	size_t count;
};

struct sweep {
	struct sweep_key keys[SWEEP_KEYS_MOST];
	size_t key_count;
	size_t points;  /* 1 where there is no sweep */
	int64_t repeat; /* 0: not repeated */
	size_t cases;   /* points times repeats */
};

/* Reads `sweep` and `repeat` of a test; false after a fault. */
bool sweep_load(struct loading *l, const struct yaml_node *test, struct sweep *ret_sweep);
/* Enters the values of a case (0 to cases - 1) and names the test after it. */
bool sweep_enter(struct loading *l, const struct sweep *sweep, size_t number, const char *base,
                 struct test *test);
/* Takes the values of the sweep away again, and refuses those that nobody used. */
void sweep_leave(struct loading *l, const struct sweep *sweep, const struct yaml_node *test);

/* suite_tables.c */

/* The node with every table over the sweep replaced by its entry at hand; NULL after a fault. */
const struct yaml_node *tables_resolve(struct loading *l, const struct yaml_node *node);

/* suite_sample.c */

/* Reads `sample`: a mapping or a list of them. False after a fault. */
bool sample_load(struct loading *l, const struct yaml_node *node, struct sample_group **ret_groups,
                 size_t *ret_count);
/* A channel by name; -1 after a fault: there is none, or it is text. */
int number_channel_load(struct loading *l, const struct yaml_node *node);
/*
 * Refuses a level that the coding of a channel cannot show, be it as a value or
 * as a difference of two; false after a fault.
 */
bool level_possible(struct loading *l, const struct yaml_node *node, int channel, double level);
/* What the step loader needs, with the values of this suite; no marks. */
struct step_context loading_steps(struct loading *l);

/* suite_checks.c */

/* Reads `checks` of the test at hand. */
void checks_load(struct loading *l, const struct yaml_node *list);
/* Stores fields of the kinds that need the rig or the test; for struct binder. */
bool checks_resolve(void *context, const struct field_table *table, const struct field *field,
                    const struct yaml_node *mapping, const struct yaml_node *node, void *target);

/* suite_limits.c */

void limits_load(struct loading *l, const struct yaml_node *mapping, struct check_use *use);

/* suite_tests.c */

/* Reads `tests`; fills suite->tests behind the first `before` rows, which are the bench's. */
void tests_load(struct loading *l, const struct yaml_node *list, const struct test *bench,
                size_t bench_count);
/* A list of texts, or one text: requirements, tags. */
bool texts_load(struct loading *l, const struct yaml_node *node, bool names, const char *what,
                const char ***ret_texts, size_t *ret_count);

#endif
