/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_YAML_READING_H
#define DRIVETRIAL_YAML_READING_H
/*
 * Between the files of this folder: what is said about bytes that are no YAML
 * at all, and about YAML that libyaml refuses.
 */
#include "yaml_tree.h"

/*
 * Looks for bytes that no YAML file may hold, and for line ends that an editor
 * and libyaml would count differently. False after adding a fault.
 */
bool yaml_bytes_check(const struct yaml_file *file, struct faults *faults);

/* What libyaml said, with its two positions. */
struct yaml_problem {
	const char *problem, *context;
	struct position at, context_at;
};

/* Adds one fault that says what to do about it. */
void yaml_explain(const struct yaml_problem *problem, struct faults *faults);

#endif
