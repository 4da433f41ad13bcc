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
	/* Files are not flushed one by one: run_folder_sync() does it for all. For copies, in
	 * thousands. */
	bool together;
};
/* Everything that was written goes to the disk; ends `together`. Errors: ERR_OUTPUT. */
int run_folder_sync(struct run_folder *folder, struct err *reterr);

/* path NULL: runs/<utc>-<rig> below the current folder. Refuses an existing one. */
int run_folder_new(const char *path, const char *utc, const char *rig,
                   struct run_folder *ret_folder, struct err *reterr);
void run_folder_close(struct run_folder *folder);
/* name: relative, of [A-Za-z0-9._/-], no "..". Makes folders on the way. */
int run_folder_write(const struct run_folder *folder, const char *name, const char *bytes,
                     size_t length, struct err *reterr);
/*
 * The same in pieces: the caller writes to *ret_fd (file_write_all), then
 * finishes. good false: errno says why; the temporary is removed and an error
 * given. finish always closes fd.
 */
int run_folder_begin(const struct run_folder *folder, const char *name, int *ret_fd,
                     struct err *reterr);
int run_folder_finish(const struct run_folder *folder, const char *name, int fd, bool good,
                      struct err *reterr);
/* A new file that grows while the run goes on (samples, journal). errno EEXIST: it is there. */
int run_folder_create(const struct run_folder *folder, const char *name, bool append, int *ret_fd,
                      struct err *reterr);
/* Every byte, over interruptions; -1 with errno. */
int file_write_all(int fd, const void *bytes, size_t length);
/* Writes SHA256SUMS over every file in the folder (sorted by name). */
int run_folder_seal(const struct run_folder *folder, struct err *reterr);
/*
 * Compares with SHA256SUMS: writes a line "changed NAME", "missing NAME",
 * "unreadable NAME" or "added NAME" each; *ret_clean where there is none.
 * SHA256SUMS.* (a signature) is not counted as added. Errors: ERR_FILE where
 * there is no such folder or no SHA256SUMS, or that is damaged.
 */
int run_folder_verify(const char *path, struct text *out, bool *ret_clean, struct err *reterr);
/* The same in numbers; `missing` counts unreadable files too. */
struct folder_changes {
	size_t changed, missing, added;
};
int run_folder_compare(const char *path, struct text *out, struct folder_changes *ret_changes,
                       struct err *reterr);
/* SHA-256 of one file of a folder, in hexadecimal (64 characters and a NUL). Errors: ERR_FILE. */
int run_folder_hash(const char *path, const char *name, char *hex, size_t size, struct err *reterr);
/* A name made safe for files: characters outside [A-Za-z0-9._-] become '_', at most 100. */
void file_name_clean(const char *name, char *buffer, size_t size);

#endif
