/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_SCRATCH_H
#define DRIVETRIAL_SCRATCH_H
/* A folder for one group of tests, removed at its end; small helpers on files. */
#include <dirent.h>
#include <ftw.h>
#include <signal.h>
#include <stdbool.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/resource.h>
#include <sys/stat.h>
#include <unistd.h>

static char scratch[300];

static inline int scratch_make(void **state)
{
	(void)state;
	const char *top = getenv("TMPDIR");
	(void)snprintf(scratch, sizeof scratch, "%.200s/drivetrial-test-XXXXXX", top ? top : P_tmpdir);
	return mkdtemp(scratch) ? 0 : -1;
}

static inline int scratch_remove_one(const char *path, const struct stat *status, int flag,
                                     struct FTW *ftw)
{
	(void)status;
	(void)flag;
	(void)ftw;
	return remove(path);
}

static inline int scratch_remove(void **state)
{
	(void)state;
	return nftw(scratch, scratch_remove_one, 16, FTW_DEPTH | FTW_PHYS);
}

/* SCRATCH/NAME; four buffers in turn. */
static inline const char *scratch_path(const char *name)
{
	static char paths[4][512];
	static int next;
	char *path = paths[next++ % 4];
	(void)snprintf(path, sizeof paths[0], "%s/%s", scratch, name);
	return path;
}

static inline char *scratch_read(const char *path, size_t *ret_length)
{
	FILE *file = fopen(path, "rb");
	if (!file)
		return NULL;
	(void)fseek(file, 0, SEEK_END);
	long size = ftell(file);
	rewind(file);
	char *bytes = malloc((size_t)size + 1);
	size_t length = bytes ? fread(bytes, 1, (size_t)size, file) : 0;
	(void)fclose(file);
	if (bytes)
		bytes[length] = '\0';
	if (ret_length)
		*ret_length = length;
	return bytes;
}

static inline bool scratch_write(const char *path, const char *bytes, size_t length)
{
	FILE *file = fopen(path, "wb");
	if (!file)
		return false;
	bool good = fwrite(bytes, 1, length, file) == length;
	return fclose(file) == 0 && good;
}

/* How many entries a folder has, or -1. */
static inline int scratch_count(const char *path)
{
	DIR *dir = opendir(path);
	int count = -2;
	while (dir && readdir(dir))
		count++;
	if (dir)
		(void)closedir(dir);
	return dir ? count : -1;
}

/*
 * From now on files of this process cannot grow beyond `bytes`: the kernel
 * answers as it does on a full disk, with an error of write(2).
 */
static inline void scratch_disk(rlim_t bytes)
{
	struct rlimit limit;
	(void)signal(SIGXFSZ, SIG_IGN);
	(void)getrlimit(RLIMIT_FSIZE, &limit);
	limit.rlim_cur = bytes;
	(void)setrlimit(RLIMIT_FSIZE, &limit);
}

static inline void scratch_disk_again(void)
{
	scratch_disk(RLIM_INFINITY);
}

#endif
