/* SPDX-License-Identifier: Apache-2.0 */
/*
 * What a run that nobody watches demands of its rig. A device is taken to be
 * able to make torque when it is under test or has a command in a register; a
 * box of relays (coils only) needs no watchdog.
 */
#include <math.h>
#include <stdio.h>

#include "rig.h"

static void check_limits(const struct rig *rig, struct faults *faults)
{
	for (size_t i = 0; i < rig->channel_count; i++) {
		const struct rig_channel *channel = &rig->channels[i];
		if (channel->command && (isinf(channel->least) || isinf(channel->most)))
			faults_add(faults, channel->at,
			           "an unattended run needs limits on every command: give '%s' a `between`",
			           channel->info.name);
	}
}

static bool can_make_torque(const struct rig *rig, size_t device)
{
	if (rig->devices[device].under_test)
		return true;
	for (size_t i = 0; i < rig->channel_count; i++)
		if (rig->channels[i].command && rig->channels[i].device == (int)device &&
		    rig->channels[i].place == PLACE_HOLDING_REGISTER)
			return true;
	return false;
}

static void check_watchdogs(const struct rig *rig, struct faults *faults)
{
	for (size_t i = 0; i < rig->device_count; i++)
		if (can_make_torque(rig, i) && !rig->devices[i].watchdog.given)
			faults_add(faults, rig->devices[i].at,
			           "an unattended run needs a watchdog on every device that can make torque: "
			           "'%s' has none",
			           rig->devices[i].name);
}

static bool confirms_independently(const struct rig *rig)
{
	for (size_t i = 0; i < rig->safe_state_count; i++) {
		const struct step *step = &rig->safe_state[i];
		if (step->kind == STEP_AWAIT &&
		    rig->channels[step->condition.channel].info.evidence == EVIDENCE_INDEPENDENT)
			return true;
	}
	return false;
}

bool rig_unattended_ready(const struct rig *rig, struct faults *faults)
{
	struct position nowhere = {.file = rig->file};
	size_t before = faults_total(faults);
	check_limits(rig, faults);
	check_watchdogs(rig, faults);
	if (rig->interlock_count == 0)
		faults_add(faults, nowhere, "an unattended run needs interlocks: the rig has none");
	if (!confirms_independently(rig))
		faults_add(faults, nowhere,
		           "an unattended run needs a safe state with an `await` on a device that is not "
		           "under test: after an encoder fault the controller's own speed is worthless");
	if (rig->direction_count == 0)
		faults_add(faults, nowhere,
		           "an unattended run needs a proof of direction: the rig has no `direction`");
	return faults_total(faults) == before;
}
