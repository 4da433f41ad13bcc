/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_STEP_KIND_H
#define DRIVETRIAL_STEP_KIND_H
/*
 * Between the files that load steps. A kind of step is one function that reads
 * its value, and one row of the table in step.c.
 */
#include "bind.h"
#include "rig.h"

struct step_loader {
	const struct step_context *context;
	struct binder binder;
	struct err *reterr;
	const char *attempts[64]; /* names so far, of this list */
	size_t attempt_count;
	int passes; /* how often the steps that are read are carried out */
};

struct step_row {
	const char *name;
	const char *text;                 /* one line */
	const struct field_table *fields; /* of its mapping, or NULL */
	/* Faults are added; -1 only where memory ran out. */
	int (*load)(struct step_loader *loader, const struct yaml_node *value, struct step *ret_step);
};

/* In the order of enum step_kind; ends with a row whose name is NULL. */
const struct step_row *step_rows(void);

int step_set_load(struct step_loader *loader, const struct yaml_node *value, struct step *ret);
int step_ramp_load(struct step_loader *loader, const struct yaml_node *value, struct step *ret);
int step_hold_load(struct step_loader *loader, const struct yaml_node *value, struct step *ret);
int step_await_load(struct step_loader *loader, const struct yaml_node *value, struct step *ret);
int step_silence_load(struct step_loader *loader, const struct yaml_node *value, struct step *ret);
int step_attempt_load(struct step_loader *loader, const struct yaml_node *value, struct step *ret);
int step_cycle_load(struct step_loader *loader, const struct yaml_node *value, struct step *ret);
int step_mark_load(struct step_loader *loader, const struct yaml_node *value, struct step *ret);
extern const struct field_table STEP_RAMP_FIELDS, STEP_AWAIT_FIELDS, STEP_SILENCE_FIELDS,
    STEP_ATTEMPT_FIELDS, STEP_CYCLE_FIELDS, STEP_MARK_FIELDS;

/* The inner lists of a cycle. */
int step_list_load(struct step_loader *loader, const struct yaml_node *list,
                   struct step **ret_steps, size_t *ret_count);
/* Enters a mark; -1 after a fault. */
int step_mark_enter(struct step_loader *loader, const struct yaml_node *node);

struct binder step_binder(const struct step_context *context);
/* The device that a scalar names, or -1 after a fault. */
int step_device(struct step_loader *loader, const struct yaml_node *node);
int step_no_memory(struct step_loader *loader);
/* Whether a channel has a value that is a number at all; else a fault. */
bool channel_has_number(const struct step_context *context, int channel, struct position at);
/* One channel and one value of a command; false after a fault. past_limits: of an attempt. */
bool step_assignment(struct step_loader *loader, const struct yaml_pair *pair, bool past_limits,
                     struct assignment *ret);
/* Faults for changes that are faster than `slew`. -1 only where memory ran out. */
int steps_check_slew(struct step_loader *loader, const struct step *steps, size_t count);

#endif
