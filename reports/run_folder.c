/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The folder of a run. Everything is opened below one file descriptor, so that
 * a folder that is renamed or replaced while the run goes on cannot send
 * outputs elsewhere. Names are of a small alphabet: SHA256SUMS then needs no
 * escapes, and coreutils reads it as it stands.
 *
 * Rejected: writing in place and truncating on failure (a reader can see half
 * a report), and a temporary folder renamed at the end (a killed run would
 * leave nothing where people look).
 */
#include "folder.h"

#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

int folder_cannot(struct err *reterr, const char *folder, const char *name, const char *what)
{
	char path[256];
	int cause = errno;
	(void)snprintf(path, sizeof path, "%.150s%s%.100s", folder, *name ? "/" : "", name);
	(void)err_set_at(reterr, ERR_OUTPUT, path, 0, 0, "cannot %s: %s", what, strerror(cause));
	errno = cause;
	return -1;
}

static bool safe_char(char c)
{
	return (c >= 'a' && c <= 'z') || (c >= 'A' && c <= 'Z') || (c >= '0' && c <= '9') || c == '.' ||
	       c == '_' || c == '-';
}

/* Relative, of the alphabet, no empty part, no "." or "..". */
bool folder_name_safe(const char *name)
{
	size_t length = strlen(name), part = 0;
	if (length == 0 || length >= FOLDER_NAME_MOST)
		return false;
	for (size_t i = 0; i <= length; i++) {
		if (name[i] != '/' && name[i] != '\0') {
			if (!safe_char(name[i]))
				return false;
			continue;
		}
		size_t size = i - part;
		if (size == 0 || (size == 1 && name[part] == '.') ||
		    (size == 2 && name[part] == '.' && name[part + 1] == '.'))
			return false;
		part = i + 1;
	}
	return true;
}

void file_name_clean(const char *name, char *buffer, size_t size)
{
	size_t most = size > 101 ? 101 : size, used = 0;
	if (size == 0)
		return;
	for (size_t i = 0; name[i] && used + 1 < most; i++) {
		bool safe = safe_char(name[i]) && !(used == 0 && (name[i] == '.' || name[i] == '-'));
		buffer[used++] = safe ? name[i] : '_';
	}
	if (used == 0 && most > 1)
		buffer[used++] = '_';
	buffer[used] = '\0';
}

/* mkdir -p of everything before the last part of path. */
static int make_parents(const char *path, struct err *reterr)
{
	char part[sizeof((struct run_folder *)0)->path];
	(void)snprintf(part, sizeof part, "%s", path);
	for (char *slash = strchr(part + 1, '/'); slash; slash = strchr(slash + 1, '/')) {
		*slash = '\0';
		if (mkdir(part, 0777) < 0 && errno != EEXIST)
			return folder_cannot(reterr, part, "", "make the folder");
		*slash = '/';
	}
	return 0;
}

/* runs/2026-12-01T093817Z-RIG, with -2, -3 ... where a run began in the same second. */
static int make_default(const char *utc, const char *rig, struct run_folder *folder,
                        struct err *reterr)
{
	char name[101], stamp[32];
	size_t used = 0;
	for (size_t i = 0; utc[i] && used + 2 < sizeof stamp; i++)
		if (utc[i] != ':' && utc[i] != 'Z')
			stamp[used++] = utc[i];
	(void)snprintf(stamp + used, sizeof stamp - used, "Z");
	char both[256];
	(void)snprintf(both, sizeof both, "%s-%.200s", stamp, rig);
	file_name_clean(both, name, sizeof name);
	if (make_parents("runs/", reterr) < 0)
		return -1;
	for (int i = 1; i < 1000; i++) {
		(void)snprintf(folder->path, sizeof folder->path, i == 1 ? "runs/%s" : "runs/%s-%d", name,
		               i);
		if (mkdir(folder->path, 0777) == 0)
			return 0;
		if (errno != EEXIST)
			break;
	}
	return folder_cannot(reterr, folder->path, "", "make the folder");
}

int run_folder_new(const char *path, const char *utc, const char *rig,
                   struct run_folder *ret_folder, struct err *reterr)
{
	struct run_folder folder = {.fd = -1};
	if (!path) {
		if (make_default(utc, rig, &folder, reterr) < 0)
			return -1;
	} else {
		size_t length = strlen(path);
		while (length > 1 && path[length - 1] == '/')
			length--;
		if (length == 0 || length >= sizeof folder.path)
			return err_set(reterr, ERR_OUTPUT, "the path of the run folder is %s",
			               length ? "too long" : "empty");
		memcpy(folder.path, path, length);
		if (make_parents(folder.path, reterr) < 0)
			return -1;
		if (mkdir(folder.path, 0777) < 0 && errno == EEXIST)
			return err_set_at(reterr, ERR_OUTPUT, path, 0, 0,
			                  "exists already, and a run folder is never overwritten; "
			                  "name another one");
		else if (access(folder.path, F_OK) < 0)
			return folder_cannot(reterr, folder.path, "", "make the folder");
	}
	folder.fd = open(folder.path, O_RDONLY | O_DIRECTORY | O_CLOEXEC);
	if (folder.fd < 0)
		return folder_cannot(reterr, folder.path, "", "open the folder");
	*ret_folder = folder;
	return 0;
}

void run_folder_close(struct run_folder *folder)
{
	if (!folder)
		return;
	if (folder->fd >= 0)
		(void)close(folder->fd);
	folder->fd = -1;
}

/* Checks a name, makes the folders before its last part, refuses a sealed folder. */
static int prepare_name(const struct run_folder *folder, const char *name, struct err *reterr)
{
	errno = EINVAL; /* for those who go by it, whatever happened before */
	if (!folder_name_safe(name))
		return err_set(reterr, ERR_STATE, "'%.100s' is no name for a file of a run folder", name);
	if (faccessat(folder->fd, FOLDER_SUMS, F_OK, 0) == 0)
		return err_set_at(reterr, ERR_OUTPUT, folder->path, 0, 0,
		                  "is closed with SHA256SUMS: nothing is written into it any more");
	char part[FOLDER_NAME_MOST];
	(void)snprintf(part, sizeof part, "%s", name);
	for (char *slash = strchr(part, '/'); slash; slash = strchr(slash + 1, '/')) {
		*slash = '\0';
		if (mkdirat(folder->fd, part, 0777) < 0 && errno != EEXIST)
			return folder_cannot(reterr, folder->path, part, "make the folder");
		*slash = '/';
	}
	return 0;
}

int run_folder_create(const struct run_folder *folder, const char *name, bool append, int *ret_fd,
                      struct err *reterr)
{
	if (prepare_name(folder, name, reterr) < 0)
		return -1;
	int flags = O_RDWR | O_CREAT | O_EXCL | O_NOFOLLOW | O_CLOEXEC | (append ? O_APPEND : 0);
	int fd = openat(folder->fd, name, flags, 0666);
	if (fd < 0)
		return folder_cannot(reterr, folder->path, name, "create");
	*ret_fd = fd;
	return 0;
}

int file_write_all(int fd, const void *bytes, size_t length)
{
	const char *next = bytes;
	while (length > 0) {
		ssize_t n = write(fd, next, length);
		if (n < 0 && errno == EINTR)
			continue;
		if (n <= 0) {
			if (n == 0)
				errno = EIO;
			return -1;
		}
		next += n;
		length -= (size_t)n;
	}
	return 0;
}

/* The temporary name of an output, in the same folder as the output. */
static void part_name(const char *name, char *buffer, size_t size)
{
	const char *slash = strrchr(name, '/');
	int before = slash ? (int)(slash + 1 - name) : 0;
	(void)snprintf(buffer, size, "%.*s.part-%s", before, name, name + before);
}

int run_folder_begin(const struct run_folder *folder, const char *name, int *ret_fd,
                     struct err *reterr)
{
	char part[FOLDER_NAME_MOST + 8];
	if (prepare_name(folder, name, reterr) < 0)
		return -1;
	part_name(name, part, sizeof part);
	(void)unlinkat(folder->fd, part, 0);
	int fd = openat(folder->fd, part, O_WRONLY | O_CREAT | O_EXCL | O_NOFOLLOW | O_CLOEXEC, 0666);
	if (fd < 0)
		return folder_cannot(reterr, folder->path, name, "create");
	*ret_fd = fd;
	return 0;
}

int run_folder_finish(const struct run_folder *folder, const char *name, int fd, bool good,
                      struct err *reterr)
{
	char part[FOLDER_NAME_MOST + 8];
	part_name(name, part, sizeof part);
	int rc = good ? 0 : -1, cause = errno;
	if (good && !folder->together && fsync(fd) < 0) {
		rc = -1;
		cause = errno;
	}
	if (close(fd) < 0 && rc == 0) {
		rc = -1;
		cause = errno;
	}
	if (rc == 0 && renameat(folder->fd, part, folder->fd, name) < 0) {
		rc = -1;
		cause = errno;
	}
	if (rc < 0) {
		(void)unlinkat(folder->fd, part, 0);
		errno = cause;
		return folder_cannot(reterr, folder->path, name, "write");
	}
	if (!folder->together)
		(void)fsync(folder->fd); /* the name itself; where a file system cannot, nothing is lost */
	return 0;
}

int run_folder_sync(struct run_folder *folder, struct err *reterr)
{
	folder->together = false;
	return syncfs(folder->fd) < 0 ? folder_cannot(reterr, folder->path, "samples", "flush") : 0;
}

int run_folder_write(const struct run_folder *folder, const char *name, const char *bytes,
                     size_t length, struct err *reterr)
{
	int fd;
	if (run_folder_begin(folder, name, &fd, reterr) < 0)
		return -1;
	bool good = file_write_all(fd, bytes, length) == 0;
	return run_folder_finish(folder, name, fd, good, reterr);
}
