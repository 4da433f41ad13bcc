/* SPDX-License-Identifier: Apache-2.0 */
/*
 * flock on a file in /run/lock (or /tmp where that is not to be had), since
 * the kernel drops it with the process. A file whose existence means "taken"
 * was rejected: it survives a killed runner and then locks the bench for ever.
 */
#include "lock.h"

#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <string.h>
#include <sys/file.h>
#include <sys/stat.h>
#include <time.h>
#include <unistd.h>

static int open_lock(const char *name, char *path, size_t size)
{
	static const char *const folders[] = {"/run/lock", "/tmp"};
	for (size_t i = 0; i < 2; i++) {
		(void)snprintf(path, size, "%s/drivetrial-%s.lock", folders[i], name);
		int fd = open(path, O_RDWR | O_CREAT | O_NOFOLLOW | O_CLOEXEC, 0666);
		if (fd >= 0) {
			(void)fchmod(fd, 0666); /* another user's run must see it too */
			return fd;
		}
		if (errno == EACCES && access(path, F_OK) == 0) {
			fd = open(path, O_RDONLY | O_NOFOLLOW | O_CLOEXEC);
			if (fd >= 0)
				return fd;
		}
	}
	return -1;
}

/* flock has no timeout and must not be interrupted by a signal handler's accident: it is asked. */
static int take(int fd, int64_t wait_ns)
{
	const struct timespec pause = {.tv_nsec = 100000000};
	while (flock(fd, LOCK_EX | LOCK_NB) < 0) {
		if (wait_ns <= 0)
			return -1;
		(void)nanosleep(&pause, NULL);
		wait_ns -= pause.tv_nsec;
	}
	return 0;
}

int lock_take(const char *name, int64_t wait_ns, int *ret_fd, struct err *reterr)
{
	char path[160], holder[96] = "";
	int fd = open_lock(name, path, sizeof path);
	if (fd < 0)
		return err_set(reterr, ERR_OUTPUT, "cannot make the lock of %s: %s", name, strerror(errno));
	if (take(fd, wait_ns) < 0) {
		ssize_t length = pread(fd, holder, sizeof holder - 1, 0);
		holder[length > 0 ? length : 0] = '\0';
		holder[strcspn(holder, "\n")] = '\0';
		for (char *c = holder; *c; c++)
			if (*c < ' ' || *c > '~')
				*c = '?';
		(void)close(fd);
		return err_set(reterr, ERR_BUSY,
		               "%s is in use by %s; wait for it to end, or queue with --wait", name,
		               holder[0] ? holder : "another run");
	}
	int length = snprintf(holder, sizeof holder, "process %ld\n", (long)getpid());
	if (ftruncate(fd, 0) == 0)
		(void)!pwrite(fd, holder, (size_t)length, 0);
	*ret_fd = fd;
	return 0;
}
