/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_RIG_H
#define DRIVETRIAL_RIG_H
/*
 * The rig: the bench as one YAML file describes it, bound and checked. It
 * lives in one arena and never changes after rig_load(), so every thread may
 * read it.
 */
#include "codec.h"
#include "derive.h"
#include "machine.h"
#include "step.h"
#include "yaml_tree.h"

enum place {
	PLACE_COIL = 0,
	PLACE_DISCRETE_INPUT,
	PLACE_INPUT_REGISTER,
	PLACE_HOLDING_REGISTER,
	PLACE_IDENTIFICATION, /* object id of function 43/14; text only */
	PLACE_DERIVED,
};

struct rig_channel {
	struct channel_info info; /* name, unit, resolution, refresh, delay, accuracy, evidence */
	struct position at;
	int device; /* -1: derived */
	enum place place;
	int address;
	struct codec codec;
	bool command;
	double least, most; /* command: `between`, in the unit; else -INFINITY, INFINITY */
	double slew;        /* command: largest rate, unit per second; 0 none */
	int64_t effect_least_ns, effect_most_ns; /* takes_effect */
	int read_back; /* channel that shows the command; own index by default; -1: none */
	struct derivation derivation; /* PLACE_DERIVED */
};

struct rig_link {
	const char *name;
	struct position at;
	struct link_config config; /* clock not filled in */
	int64_t reply_timeout_ns;
};

struct rig_watchdog {
	bool given;
	int64_t timeout_ns;
	struct step *arm, *clear; /* set, hold, await */
	size_t arm_count, clear_count;
	struct condition tripped;
};

struct identity_item {
	const char *key; /* "firmware" */
	int channel;
};

struct rig_device {
	const char *name;
	struct position at;
	int link;
	uint8_t unit;
	bool under_test;
	struct identity_item *identity;
	size_t identity_count;
	int life;               /* channel, -1 none */
	int64_t life_within_ns; /* it must move within this time; default 1 s */
	struct rig_watchdog watchdog;
	int max_registers; /* 1 to 125 */
	bool gaps_allowed; /* registers between channels may be read */
	int64_t minimum_pause_ns;
	int in_flight;
};

struct rig_direction {
	bool given;
	struct position at;
	int command;     /* channel */
	double at_value; /* in its unit */
	int *agree;      /* channels that must have the command's sign */
	size_t agree_count;
	struct step *prepare, *restore; /* steps before and after */
	size_t prepare_count, restore_count;
};

struct precondition {
	struct condition condition;
	int64_t wait_ns; /* 0: must hold at once */
	struct position at;
};

struct interlock {
	struct condition condition;
	struct position at;
};

struct allowed_attempt { /* attempts: what `attempt` may do */
	int device;
	int channel; /* writes of this channel out of range; -1: any request of `functions` */
	bool any_function;
	bool moving; /* allowed while the shaft may turn */
};

struct expected_parameter {
	int channel;
	double value; /* in the channel's unit */
	struct position at;
};

struct served_channel {
	int channel;
	const char *signal;
	struct position at;
};

struct rig {
	const char *name, *note;
	const struct yaml_file *file;
	bool unattended;
	struct rig_link *links;
	size_t link_count;
	struct rig_device *devices;
	size_t device_count;
	struct machine machine;
	struct rig_channel *channels;
	struct channel_info *infos; /* channels[i].info again, contiguous, for checks */
	size_t channel_count;
	struct precondition *before;
	size_t before_count;
	struct interlock *interlocks;
	size_t interlock_count;
	struct step *safe_state;
	size_t safe_state_count;
	int64_t rest_within_ns; /* longest time that confirming rest may take; default 30 s */
	int64_t stale_after_ns; /* a polled link may be silent for as long; default 1 s */
	struct rig_direction *directions;
	size_t direction_count;
	struct allowed_attempt *attempts;
	size_t attempt_count;
	/* parameters: what the drive must hold before and after a run */
	const char *parameters_name; /* of the file beside the rig file; NULL: none */
	const struct yaml_file *parameters_file;
	struct expected_parameter *parameters;
	size_t parameter_count;
	/* model: */
	bool has_model;
	struct served_channel *served;
	size_t served_count;
	const struct yaml_node *model_parameters; /* mapping or NULL; bound by rigs/served.c */
};

/*
 * Loads and checks a rig file. Faults are collected; *ret_rig is NULL where
 * there were any. reterr only for a file that cannot be read and for memory.
 */
int rig_load(const char *path, struct arena *arena, struct faults *faults,
             const struct rig **ret_rig, struct err *reterr);

int rig_channel_find(const struct rig *rig, const char *name, size_t length); /* -1 */
int rig_device_find(const struct rig *rig, const char *name, size_t length);  /* -1 */
int rig_link_find(const struct rig *rig, const char *name, size_t length);    /* -1 */
/*
 * Adds `channel` to a set (a byte per channel of the rig); of a derived one
 * the inputs, down to those that are read.
 */
void rig_channel_needs(const struct rig *rig, int channel, unsigned char *set);
/* The device of a channel; of a derived one that of its first read input. */
int rig_channel_device(const struct rig *rig, int channel);
/*
 * What an unattended run demands and the rig lacks: one fault each, added;
 * true where nothing is missing. (Command limits on every command, interlocks,
 * a safe state with an await on a device not under test, a direction proof, a
 * watchdog on each device with commands that can make torque.)
 */
bool rig_unattended_ready(const struct rig *rig, struct faults *faults);

#endif
