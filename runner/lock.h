/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_LOCK_H
#define DRIVETRIAL_LOCK_H
/*
 * One run per rig: a lock that the kernel releases on any death of its holder.
 * The lock file stays; it names the last holder for the message.
 */
#include "err.h"

#include <stdint.h>

/*
 * name: of a rig or an endpoint. Waits up to wait_ns for the holder to end; 0:
 * not at all. *ret_fd is closed by the caller (or by death). Errors: ERR_BUSY
 * (names the holder), ERR_OUTPUT.
 */
int lock_take(const char *name, int64_t wait_ns, int *ret_fd, struct err *reterr);

#endif
