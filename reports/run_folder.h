/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_RUN_FOLDER_H
#define DRIVETRIAL_RUN_FOLDER_H
/*
 * The folder of one run: made, never overwritten, closed with SHA256SUMS.
 *
 * Every finished output is written whole or not at all: to a temporary name in
 * the folder, flushed to the disk, then renamed. Samples and the journal grow
 * while the run goes on and are readable when cut at any moment.
 * Single-threaded: main only. Errors: ERR_OUTPUT with the path and the cause.
 */
#include <stdint.h>

#include "err.h"
#include "text.h"

struct run_folder {
	char path[1024];
	int fd; /* of the folder; outputs are opened below it */
};

/* path NULL: runs/<utc>-<rig> below the current folder. Refuses an existing one. */
int run_folder_new(const char *path, const char *utc, const char *rig,
                   struct run_folder *ret_folder, struct err *reterr);
void run_folder_close(struct run_folder *folder);
/* name: relative, of [A-Za-z0-9._/-], no "..". Makes folders on the way. */
int run_folder_write(const struct run_folder *folder, const char *name, const char *bytes,
                     size_t length, struct err *reterr);
/* Writes SHA256SUMS over every file in the folder (sorted by name). */
int run_folder_seal(const struct run_folder *folder, struct err *reterr);
/* Compares with SHA256SUMS: writes what was changed, missing or added; *ret_clean. */
int run_folder_verify(const char *path, struct text *out, bool *ret_clean, struct err *reterr);
/* A name made safe for files: characters outside [A-Za-z0-9._-] become '_', at most 100. */
void file_name_clean(const char *name, char *buffer, size_t size);

#endif
