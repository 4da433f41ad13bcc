/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_RIG_LOADER_H
#define DRIVETRIAL_RIG_LOADER_H
/*
 * Between the files that load a rig. The order matters, since later sections
 * name things of earlier ones: links, devices, machine, channels, then what
 * refers to channels. A section with faults does not stop the later ones: a
 * channel that has faults itself keeps info.unit NULL, and what refers to it is
 * passed over silently.
 */
#include "bind.h"
#include "rig.h"

struct rig_loader {
	struct rig *rig;
	struct arena *arena;
	struct faults *faults;
	struct binder binder;
	struct step_context steps; /* rig, arena, faults; `allowed` is set by who loads a list */
	struct err *reterr;
};

/* All of them: faults are added; -1 only where memory ran out. node: never NULL. */
int rig_links_load(struct rig_loader *loader, const struct yaml_node *node);
int rig_devices_load(struct rig_loader *loader, const struct yaml_node *node);
void rig_machine_load(struct rig_loader *loader, const struct yaml_node *node);
int rig_channels_load(struct rig_loader *loader, const struct yaml_node *node);
/* Identity, life and watchdog: after the channels. */
int rig_devices_finish(struct rig_loader *loader, const struct yaml_node *node);
int rig_before_load(struct rig_loader *loader, const struct yaml_node *node);
int rig_interlocks_load(struct rig_loader *loader, const struct yaml_node *node);
int rig_safe_state_load(struct rig_loader *loader, const struct yaml_node *node);
int rig_directions_load(struct rig_loader *loader, const struct yaml_node *node);
int rig_attempts_load(struct rig_loader *loader, const struct yaml_node *node);
int rig_parameters_load(struct rig_loader *loader, const struct yaml_node *node);
int rig_model_load(struct rig_loader *loader, const struct yaml_node *node);

/* What a channel says and one field holds; the rest is read from its node. */
struct rig_channel_fields {
	int type, words, bytes, calibration;
	double scale;
	bool reversed, command;
	int64_t refresh_ns, registers;
};

/* How it is coded. The unit is known. False after a fault. */
bool rig_coding_load(struct rig_loader *loader, const struct yaml_node *node,
                     const struct rig_channel_fields *fields, struct rig_channel *channel);
/* Named values, and what an instrument's data sheet and certificate say. */
int rig_names_load(struct rig_loader *loader, const struct yaml_node *node,
                   struct rig_channel *channel);
void rig_accuracy_load(struct rig_loader *loader, const struct yaml_node *node,
                       const struct rig_channel_fields *fields, struct rig_channel *channel);
/* between, slew, takes_effect. */
void rig_command_load(struct rig_loader *loader, const struct yaml_node *node,
                      struct rig_channel *channel);
/* [a, b], or b alone for [0, b]. */
void rig_span_load(struct rig_loader *loader, const struct yaml_node *node, int64_t *ret_least_ns,
                   int64_t *ret_most_ns);
/* A value of a channel of the rig, in its unit. */
bool rig_value_load(struct rig_loader *loader, const struct yaml_node *node,
                    const struct rig_channel *channel, double *ret_value);
/* The unit that a channel says; NULL after a fault. node NULL: a plain number. */
const struct unit *rig_unit_load(struct rig_loader *loader, const struct yaml_node *node);
/* Computes what derived channels are, once all channels are known. nodes: one a channel. */
int rig_derived_load(struct rig_loader *loader, const struct yaml_node *const *nodes);

int rig_no_memory(struct rig_loader *loader);
/* Adds a fault at a node. */
void rig_fault(struct rig_loader *loader, const struct yaml_node *node, const char *format, ...)
    __attribute__((format(printf, 3, 4)));
/* A name of this rig's kind of thing; index or -1 after a fault that suggests the nearest. */
int rig_reference(struct rig_loader *loader, const struct yaml_node *node, const char *what,
                  int (*find)(const struct rig *, const char *, size_t));

/* The field tables, for the schema and the reference. */
extern const struct field_table RIG_FIELDS, RIG_LINK_FIELDS, RIG_DEVICE_FIELDS, RIG_WATCHDOG_FIELDS,
    RIG_MACHINE_FIELDS, RIG_CHANNEL_FIELDS, RIG_DERIVED_FIELDS, RIG_ACCURACY_FIELDS,
    RIG_PRECONDITION_FIELDS, RIG_DIRECTION_FIELDS, RIG_ATTEMPT_FIELDS, RIG_MODEL_FIELDS;

#endif
