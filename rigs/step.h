/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_STEP_H
#define DRIVETRIAL_STEP_H
/*
 * What a test commands, and what the safe state commands: one grammar for both.
 *
 *   - set: {CHANNEL: VALUE, ...}          written in this order
 *   - ramp: {CHANNEL: VALUE, over: T, wait: no}   linear from the present command
 *   - hold: T
 *   - await: {channel: C, is|above|below|between: ..., for: T, timeout: T}
 *   - silence: {device: D, for: T}        nothing is sent to it; the connection stays open
 *   - attempt: {name: N, write: {C: V}, expect: illegal_data_value}
 *   - attempt: {name: N, device: D, read_input_register: A, count: N, expect: illegal_data_address}
 *   - attempt: {name: N, device: D, function: F, expect: illegal_function}
 *     expect: the name of a Modbus exception (Application Protocol V1.1b3, section 7), or any
 *   - cycle: {times: N, steps: [...]}
 *   - mark: {name: M, when: {channel: ..., above: ...}}   (no step of its own: watches)
 * Every step may carry `mark: NAME`. On a set it is the instant of the command
 * ([request sent + earliest effect, reply received + latest effect], over all
 * of its writes); on a silence the last request sent to that device before
 * it; on an await the interval in which the condition became true; else the
 * instant at which the step begins.
 */
#include "check.h"
#include "link.h"
#include "yaml_tree.h"

enum step_kind {
	STEP_SET = 0,
	STEP_RAMP,
	STEP_HOLD,
	STEP_AWAIT,
	STEP_SILENCE,
	STEP_ATTEMPT,
	STEP_CYCLE,
	STEP_MARK,
};

struct assignment {
	int channel;
	double value; /* in the channel's unit */
	struct position at;
};

/* A request that must be refused. */
struct attempt {
	const char *name;            /* unique in the test; "refused-3" where not given */
	int channel;                 /* write of a channel: its index; -1: a request of its own */
	double value;                /* in the channel's unit; encoded past `between` on purpose */
	struct link_request request; /* channel == -1; unit and device from `device` */
	int device;
	int expected_exception; /* 0: any */
};

struct step {
	enum step_kind kind;
	struct position at;
	int mark;                   /* index into the test's marks, -1 none */
	struct assignment *assigns; /* set: count; ramp: 1 */
	size_t assign_count;
	int64_t duration_ns;        /* ramp: over; hold; silence: for */
	bool wait;                  /* ramp: goes on only when it has ended (default) */
	struct condition condition; /* await, mark */
	int64_t timeout_ns;         /* await */
	int device;                 /* silence */
	struct attempt attempt;
	int times;          /* cycle */
	struct step *steps; /* cycle */
	size_t step_count;
};

struct rig;
struct mark_names {
	const char *names[64];
	size_t count;
};
/* Finds a name, or enters it; -1 where 64 are taken. */
int mark_names_find(const struct mark_names *marks, const char *name);
int mark_names_enter(struct mark_names *marks, const char *name);

/* How `$name` in a suite becomes text; NULL where there are no values. */
struct step_context {
	const struct rig *rig;
	struct arena *arena;
	struct faults *faults;
	struct mark_names *marks; /* where new names are entered; NULL: no marks here */
	unsigned allowed;         /* 1u << STEP_SET | ... */
	/* A test that goes on from another, or `restore`: what is commanded at its begin is not known.
	 * Otherwise a list begins with what the rig's safe state commands; `slew` is judged from it. */
	bool continues;
	/* Gives the node to read instead of one that says $name (with its own position), or NULL
	 * after adding a fault. */
	const struct yaml_node *(*substitute)(void *context, const struct yaml_node *node);
	void *substitute_context;
};

/*
 * Binds a list of steps. Faults: unknown channels, values that do not fit
 * unit, coding or `between`, changes faster than `slew`, a hold of zero, an
 * await without timeout, a silence that nobody watches, an attempt that the
 * rig does not allow. Errors: ERR_NOMEM only.
 */
int steps_load(const struct step_context *context, const struct yaml_node *list,
               struct step **ret_steps, size_t *ret_count, struct err *reterr);
/*
 * Binds {channel, is|above|below|between, for}. Faults are added; then
 * ret->channel is -1. also: NULL, or a table whose keys stand in the same
 * mapping; then the caller binds it with bind_mapping_beside(), condition_fields()
 * beside it, and so finds the unknown keys.
 */
void condition_load(const struct step_context *context, const struct yaml_node *mapping,
                    const struct field_table *also, struct condition *ret);
/* The fields of a condition. */
const struct field_table *condition_fields(void);
/* The channel that a scalar names, or -1 after adding a fault. */
int channel_load(const struct step_context *context, const struct yaml_node *node);
/* A value in the unit of a channel: "1500 rpm", 1500, or one of the channel's names. */
bool channel_value_load(const struct step_context *context, const struct yaml_node *node,
                        int channel, double *ret_value);

/* "set speed_command = 1500 rpm", for progress and reports; in buffer. */
const char *step_text(const struct step *step, const struct rig *rig, char *buffer, size_t size);
/* "bench_speed between -10 rpm and 10 rpm for 100 ms"; in buffer. */
const char *condition_text(const struct condition *condition, const struct rig *rig, char *buffer,
                           size_t size);
/* "1500 rpm", "link_watchdog", "1": a value of a channel as a file would say it; in buffer. */
const char *channel_value_text(const struct rig *rig, int channel, double value, char *buffer,
                               size_t size);
/*
 * Shortest and longest time that a list of steps can take, in ns; the
 * transactions of set and attempt are not counted.
 */
void steps_duration(const struct step *steps, size_t count, int64_t *ret_least, int64_t *ret_most);

#endif
