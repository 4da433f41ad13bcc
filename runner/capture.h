/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_CAPTURE_H
#define DRIVETRIAL_CAPTURE_H
/*
 * Main's side of the rings: puts rows into samples/ and events into the
 * journal while the run goes on. Main's thread only. A failure to write (a
 * full disk) raises `stop`, so that the bench goes to rest; what follows is
 * then thrown away, since the way to rest must not wait for a disk.
 */
#include "conductor.h"
#include "samples_file.h"

struct capture {
	struct conductor *conductor;
	const struct run_folder *folder;
	struct journal *journal;
	const struct rig *rig;
	struct suite *const *suites;
	struct stop *stop;
	struct samples_writer **writers; /* of the present test, by block */
	int writer_count, writer_room;
	int generation; /* of the present test; -1 none */
	uint64_t rows;
	int64_t flushed_ns, heartbeat_ns;
	bool failed;
	bool verbose;   /* what happens is told on stderr too, one line an event */
	struct err err; /* the first failure */
};

int capture_init(struct capture *capture, struct conductor *conductor,
                 const struct run_folder *folder, struct journal *journal, const struct rig *rig,
                 struct suite *const *suites, size_t suite_count, struct stop *stop,
                 struct err *reterr);
/* Empties the rings. Nothing blocks but the disk. */
void capture_drain(struct capture *capture, int64_t now_ns);
/* Puts what was drained into the files, so that a reader sees it. */
void capture_flush(struct capture *capture);
/* Drains, and closes the sample files. */
void capture_close(struct capture *capture, int64_t now_ns);
void capture_release(struct capture *capture);

#endif
