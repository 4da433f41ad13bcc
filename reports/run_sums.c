/* SPDX-License-Identifier: Apache-2.0 */
/*
 * SHA256SUMS: written when a run is complete, compared when somebody asks
 * whether the files are still the ones that were written. The format is that
 * of coreutils' sha256sum, so that no copy of this program is needed to check.
 *
 * Rejected: a hash inside results.json (it cannot cover itself), and a list
 * made while files are written (it would not show a file that came from
 * elsewhere).
 */
#include "folder.h"

#include <dirent.h>
#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#include "sha256.h"

enum { FILES_MOST = 200000, DEPTH_MOST = 8, SUMS_MOST = 64 << 20 };

/* Files of a folder, relative names. */
struct name_list {
	char **names;
	size_t count, room;
};

/* errno says why where it fails; ENOENT: there is no such file. */
static int hash_file(int folder, const char *name, char hex[SHA256_HEX_SIZE])
{
	/* Non-blocking, so that a pipe put in a file's place cannot hold us. */
	int fd = openat(folder, name, O_RDONLY | O_NOFOLLOW | O_CLOEXEC | O_NONBLOCK);
	if (fd < 0)
		return -1;
	int rc = sha256_of_file(fd, hex), cause = errno == ENOENT ? EIO : errno;
	(void)close(fd);
	errno = cause;
	return rc;
}

int run_folder_hash(const char *path, const char *name, char *hex, size_t size, struct err *reterr)
{
	char own[SHA256_HEX_SIZE];
	int folder = open(path, O_RDONLY | O_DIRECTORY | O_CLOEXEC);
	int rc = folder < 0 ? -1 : hash_file(folder, name, own);
	int cause = errno;
	if (folder >= 0)
		(void)close(folder);
	if (rc < 0)
		return err_set(reterr, ERR_FILE, "%s/%s: %s", path, name, strerror(cause));
	(void)snprintf(hex, size, "%s", own);
	return 0;
}

static void list_release(struct name_list *list)
{
	for (size_t i = 0; i < list->count; i++)
		free(list->names[i]);
	free(list->names);
}

static int list_add(struct name_list *list, const char *name)
{
	if (list->count == list->room) {
		size_t room = list->room ? list->room * 2 : 64;
		char **names = room > FILES_MOST ? NULL : realloc(list->names, room * sizeof *names);
		if (!names) {
			errno = ENOMEM;
			return -1;
		}
		list->names = names;
		list->room = room;
	}
	char *copy = strdup(name);
	if (!copy)
		return -1;
	list->names[list->count++] = copy;
	return 0;
}

static int by_name(const void *a, const void *b)
{
	return strcmp(*(char *const *)a, *(char *const *)b);
}

static bool is_sums(const char *name)
{
	size_t length = sizeof FOLDER_SUMS - 1;
	return strncmp(name, FOLDER_SUMS, length) == 0 && (name[length] == '\0' || name[length] == '.');
}

/*
 * The files below `fd`, whatever their names; SHA256SUMS and what somebody put
 * beside it to sign it (SHA256SUMS.sig, say) are left out. What is neither
 * file nor folder (a link, a pipe) is listed as it stands, and then refused or
 * reported by name. Takes the descriptor.
 */
static int list_files(int fd, const char *before, int depth, struct name_list *list)
{
	DIR *dir = fdopendir(fd);
	if (!dir) {
		(void)close(fd);
		return -1;
	}
	int rc = -1;
	struct dirent *entry;
	while (errno = 0, (entry = readdir(dir)) != NULL) {
		char name[FOLDER_NAME_MOST + 260];
		if (strcmp(entry->d_name, ".") == 0 || strcmp(entry->d_name, "..") == 0 ||
		    (depth == 0 && is_sums(entry->d_name)))
			continue;
		(void)snprintf(name, sizeof name, "%s%s", before, entry->d_name);
		struct stat status;
		if (fstatat(dirfd(dir), entry->d_name, &status, AT_SYMLINK_NOFOLLOW) < 0)
			goto out;
		if (!S_ISDIR(status.st_mode)) {
			if (list_add(list, name) < 0)
				goto out;
			continue;
		}
		errno = ELOOP;
		if (depth + 1 >= DEPTH_MOST || strlen(name) + 2 >= FOLDER_NAME_MOST)
			goto out;
		int below =
		    openat(dirfd(dir), entry->d_name, O_RDONLY | O_DIRECTORY | O_NOFOLLOW | O_CLOEXEC);
		if (below < 0)
			goto out;
		(void)snprintf(name, sizeof name, "%s%s/", before, entry->d_name);
		if (list_files(below, name, depth + 1, list) < 0)
			goto out;
	}
	rc = errno ? -1 : 0;
out:
	(void)closedir(dir);
	return rc;
}

/* The same, sorted, of a folder that stays open. */
static int list_sorted(int folder, struct name_list *list)
{
	int fd = openat(folder, ".", O_RDONLY | O_DIRECTORY | O_CLOEXEC);
	if (fd < 0 || list_files(fd, "", 0, list) < 0)
		return -1;
	if (list->count)
		qsort(list->names, list->count, sizeof *list->names, by_name);
	return 0;
}

int run_folder_seal(const struct run_folder *folder, struct err *reterr)
{
	struct name_list list = {0};
	struct text sums;
	text_init(&sums, SUMS_MOST);
	int rc = -1;
	if (list_sorted(folder->fd, &list) < 0) {
		(void)folder_cannot(reterr, folder->path, "", "list the folder");
		goto out;
	}
	for (size_t i = 0; i < list.count; i++) {
		char hex[SHA256_HEX_SIZE];
		struct stat status;
		if (!folder_name_safe(list.names[i]) ||
		    fstatat(folder->fd, list.names[i], &status, AT_SYMLINK_NOFOLLOW) < 0 ||
		    !S_ISREG(status.st_mode)) {
			(void)err_set_at(reterr, ERR_OUTPUT, folder->path, 0, 0,
			                 "holds something that is not of the run, so that it was not closed "
			                 "with SHA256SUMS");
			goto out;
		}
		if (hash_file(folder->fd, list.names[i], hex) < 0) {
			(void)folder_cannot(reterr, folder->path, list.names[i], "read back");
			goto out;
		}
		text_printf(&sums, "%s  %s\n", hex, list.names[i]);
	}
	if (sums.cut) {
		(void)err_set(reterr, ERR_NOMEM, "memory ran out while SHA256SUMS was made");
		goto out;
	}
	rc = run_folder_write(folder, FOLDER_SUMS, text_string(&sums), sums.length, reterr);
out:
	list_release(&list);
	text_release(&sums);
	return rc;
}

static char *read_whole(int fd, size_t *ret_length)
{
	struct stat status;
	size_t length = 0;
	if (fstat(fd, &status) < 0 || !S_ISREG(status.st_mode) || status.st_size > SUMS_MOST)
		return NULL;
	char *bytes = malloc((size_t)status.st_size + 1);
	while (bytes && length < (size_t)status.st_size) {
		ssize_t n = read(fd, bytes + length, (size_t)status.st_size - length);
		if (n < 0 && errno == EINTR)
			continue;
		if (n <= 0)
			break;
		length += (size_t)n;
	}
	if (bytes)
		bytes[length] = '\0';
	*ret_length = length;
	return bytes;
}

/* The whole of SHA256SUMS with a NUL behind it; the caller frees. */
static char *read_sums(const char *path, int folder, struct err *reterr)
{
	size_t length = 0;
	int fd = openat(folder, FOLDER_SUMS, O_RDONLY | O_NOFOLLOW | O_CLOEXEC | O_NONBLOCK);
	if (fd < 0) {
		(void)err_set_at(reterr, ERR_FILE, path, 0, 0,
		                 "has no SHA256SUMS: the run was cut before its end, or this is no run "
		                 "folder");
		return NULL;
	}
	char *bytes = read_whole(fd, &length);
	(void)close(fd);
	if (!bytes) {
		(void)err_set_at(reterr, ERR_FILE, path, 0, 0, "SHA256SUMS cannot be read");
	} else if (strlen(bytes) != length) {
		(void)err_set_at(reterr, ERR_FILE, path, 0, 0, "SHA256SUMS is damaged: it holds a NUL");
		free(bytes);
		bytes = NULL;
	}
	return bytes;
}

/* One line "HEX  NAME"; the line is cut after the hash. */
static bool parse_sum(char *line, const char **ret_name)
{
	size_t hex = strspn(line, "0123456789abcdef");
	if (hex != SHA256_HEX_SIZE - 1 || line[hex] != ' ' ||
	    (line[hex + 1] != ' ' && line[hex + 1] != '*'))
		return false;
	line[hex] = '\0';
	*ret_name = line + hex + 2;
	return folder_name_safe(*ret_name);
}

/* Compares every file that SHA256SUMS names, and enters its name. Cuts up `sums`. */
static int compare_named(const char *path, int folder, char *sums, struct name_list *named,
                         struct text *out, struct folder_changes *changes, struct err *reterr)
{
	char *save = NULL;
	int line = 0;
	for (char *at = strtok_r(sums, "\n", &save); at; at = strtok_r(NULL, "\n", &save)) {
		const char *name;
		char hex[SHA256_HEX_SIZE];
		line++;
		if (!parse_sum(at, &name))
			return err_set_at(reterr, ERR_FILE, path, 0, 0,
			                  "line %d of SHA256SUMS is none that this program writes", line);
		if (list_add(named, name) < 0)
			return err_set(reterr, ERR_NOMEM, "memory ran out");
		if (hash_file(folder, name, hex) < 0) {
			text_printf(out, "%s %s\n", errno == ENOENT ? "missing" : "unreadable", name);
			changes->missing++;
		} else if (strcmp(hex, at) != 0) {
			text_printf(out, "changed %s\n", name);
			changes->changed++;
		}
	}
	if (named->count)
		qsort(named->names, named->count, sizeof *named->names, by_name);
	return 0;
}

int run_folder_compare(const char *path, struct text *out, struct folder_changes *ret_changes,
                       struct err *reterr)
{
	struct name_list present = {0}, named = {0};
	struct folder_changes changes = {0};
	char *sums = NULL;
	int rc = -1;
	int folder = open(path, O_RDONLY | O_DIRECTORY | O_CLOEXEC);
	if (folder < 0)
		return err_set_at(reterr, ERR_FILE, path, 0, 0, "cannot be opened: %s", strerror(errno));
	if (!(sums = read_sums(path, folder, reterr)))
		goto out;
	if (list_sorted(folder, &present) < 0) {
		(void)err_set_at(reterr, ERR_FILE, path, 0, 0, "cannot be listed: %s", strerror(errno));
		goto out;
	}
	if (compare_named(path, folder, sums, &named, out, &changes, reterr) < 0)
		goto out;
	for (size_t i = 0; i < present.count; i++) {
		char *name = present.names[i];
		if (named.count &&
		    bsearch(&name, named.names, named.count, sizeof *named.names, by_name) != NULL)
			continue;
		text_puts(out, "added ");
		text_add_clean(out, name, strlen(name));
		text_puts(out, "\n");
		changes.added++;
	}
	*ret_changes = changes;
	rc = 0;
out:
	list_release(&present);
	list_release(&named);
	free(sums);
	(void)close(folder);
	return rc;
}

int run_folder_verify(const char *path, struct text *out, bool *ret_clean, struct err *reterr)
{
	struct folder_changes changes;
	if (run_folder_compare(path, out, &changes, reterr) < 0)
		return -1;
	*ret_clean = changes.changed + changes.missing + changes.added == 0;
	return 0;
}
