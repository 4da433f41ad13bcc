/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_GUARD_H
#define DRIVETRIAL_GUARD_H
/*
 * The last line of defence: looks at a request as it is about to go out on the
 * wire, whoever made it, and lets no write pass that the rig does not allow.
 * It decodes what the device would read, by the rig's channels, and knows
 * nothing of how the request came to be. Belongs to the thread of one link.
 */
#include "rig.h"

struct guard {
	const struct rig *rig;
	double *last;        /* by channel: the value last let through; NaN none */
	int64_t *last_at_ns; /* when */
};

/* Errors: ERR_NOMEM. */
int guard_init(struct guard *guard, const struct rig *rig, struct err *reterr);
void guard_release(struct guard *guard); /* takes a zeroed one */

/*
 * Reads pass. A write passes where every register or coil of it belongs to
 * command channels that it writes whole, each within `between`, and within
 * `slew` since its last write (but on the way to rest, where stopping is more
 * urgent than its rate). Raw requests never pass. Errors: ERR_REFUSED.
 */
int guard_pass(struct guard *guard, int device, const struct link_request *request, bool resting,
               int64_t now_ns, struct err *reterr);

#endif
