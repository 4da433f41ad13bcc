/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Brings a file into memory, whole: faults are shown with their source line. A
 * mapped file was rejected, since an editor that cuts it short while it is read
 * would end the program with SIGBUS.
 */
#include "yaml_tree.h"

#include <errno.h>
#include <fcntl.h>
#include <stdlib.h>
#include <unistd.h>

/* Up to one byte more than is allowed, so that the caller sees "too large". */
static int read_all(const char *path, char *buffer, size_t *ret_length, struct err *reterr)
{
	int fd = open(path, O_RDONLY | O_CLOEXEC);
	if (fd < 0)
		return err_set_at(reterr, ERR_FILE, path, 0, 0, "cannot be opened: %m");
	size_t length = 0;
	while (length <= YAML_BYTES_MOST) {
		ssize_t got = read(fd, buffer + length, YAML_BYTES_MOST + 1 - length);
		if (got < 0 && errno == EINTR)
			continue;
		if (got < 0) {
			(void)err_set_at(reterr, ERR_FILE, path, 0, 0, "cannot be read: %m");
			close(fd);
			return -1;
		}
		if (got == 0)
			break;
		length += (size_t)got;
	}
	close(fd);
	*ret_length = length;
	return 0;
}

int yaml_load(const char *path, struct arena *arena, struct faults *faults,
              const struct yaml_file **ret_file, struct yaml_node **ret_root, struct err *reterr)
{
	char *buffer = malloc(YAML_BYTES_MOST + 1);
	if (!buffer)
		return err_set_at(reterr, ERR_NOMEM, path, 0, 0, "memory ran out while reading");
	size_t length = 0;
	int rc = read_all(path, buffer, &length, reterr);
	if (rc == 0)
		rc = yaml_load_bytes(path, buffer, length, arena, faults, ret_file, ret_root, reterr);
	free(buffer);
	return rc;
}
