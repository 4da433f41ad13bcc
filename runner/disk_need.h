/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_DISK_NEED_H
#define DRIVETRIAL_DISK_NEED_H
/*
 * What the samples of a run take on the disk, said before it begins: an hour
 * into a soak test is the wrong time to learn that the disk is full. Counted
 * from the same plans as the run, for the case that no await waits: less than
 * that it surely is not.
 */
#include "session.h"

struct disk_need {
	uint64_t rows, bytes; /* of the sample files */
	uint64_t csv_bytes;   /* of the CSV beside them, about */
	uint64_t available;   /* where the run folder will lie; UINT64_MAX: not known */
};

/* Errors: ERR_NOMEM, and what making the plans refuses. */
int disk_need_of(const struct session *session, struct disk_need *ret_need, struct err *reterr);
/* Says it on stderr where it is worth a word. Errors: ERR_OUTPUT where it surely does not fit. */
int disk_need_check(const struct session *session, struct err *reterr);

#endif
