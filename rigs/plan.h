/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_PLAN_H
#define DRIVETRIAL_PLAN_H
/*
 * Read planning: the channels that are needed become transactions. A value of
 * several registers is never torn. Registers between two channels are read
 * across where the device allows gaps and that is cheaper (rigs/links/timing).
 * Pure.
 */
#include "rig.h"
#include "timing.h"

struct read_block {
	int device, link;
	enum place place;
	uint16_t address, count;
	int *channels; /* read in this transaction, ascending */
	size_t channel_count;
	int id; /* number of the block in the plan */
};

struct read_plan {
	struct read_block *blocks; /* of all links, in the order link, device, place, address */
	size_t count;
};

/*
 * needed: a byte per channel of the rig; derived channels are ignored (see
 * rig_channel_needs). Text and identification channels are ignored too.
 * Errors: ERR_NOMEM.
 */
int plan_reads(const struct rig *rig, const unsigned char *needed, struct arena *arena,
               struct read_plan *ret_plan, struct err *reterr);

/* The request that reads a block, and one value out of its reply. */
void block_request(const struct rig *rig, const struct read_block *block,
                   struct link_request *ret_request);
double block_value(const struct rig *rig, const struct read_block *block, int channel,
                   const struct link_reply *reply);

/* How a link of the rig behaves, as far as the rig file says. */
struct timing rig_link_timing(const struct rig *rig, int link);

/*
 * The request that writes a channel. words_before: what stands there now, for
 * masked fields, or NULL. Errors: ERR_REFUSED where the value is outside
 * `between` or the coding. This is the only place where commands are made.
 */
int command_request(const struct rig *rig, int channel, double value, const uint16_t *words_before,
                    struct link_request *ret_request, struct err *reterr);
/* The same without the limits, for `attempt` only; the caller has asked attempt_allowed(). */
int attempt_request(const struct rig *rig, const struct attempt *attempt,
                    struct link_request *ret_request, struct err *reterr);
bool attempt_allowed(const struct rig *rig, const struct attempt *attempt);

#endif
