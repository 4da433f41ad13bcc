/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Reads samples in place. Only the layout that samples_file.c writes is taken:
 * a general reader of NumPy's headers would have to parse Python, and a file
 * of another layout is not one of ours. The number of rows comes from the size
 * of the file, so that a cut file gives what is whole in it.
 */
#include "samples_file.h"

#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/mman.h>
#include <sys/stat.h>
#include <unistd.h>

enum { CHANNELS_MOST = 4000 };

static int refuse(const char *path, const char *what, struct err *reterr)
{
	return err_set_at(reterr, ERR_FILE, path, 0, 0, "is no samples file of a run: %s", what);
}

/* Steps over `word` where it stands at *at. */
static bool skip(const char **at, const char *end, const char *word)
{
	size_t length = strlen(word);
	if ((size_t)(end - *at) < length || memcmp(*at, word, length) != 0)
		return false;
	*at += length;
	return true;
}

/* ", ('NAME', '<f8')" again and again; fills names where they are not NULL. */
static bool parse_channels(const char **at, const char *end, char (*names)[65], size_t *ret_count)
{
	size_t count = 0;
	while (skip(at, end, ", ('")) {
		const char *name = *at;
		const char *quote = memchr(name, '\'', (size_t)(end - name));
		if (!quote || !text_is_name(name, (size_t)(quote - name)) || count >= CHANNELS_MOST)
			return false;
		if (names)
			(void)snprintf(names[count], sizeof names[count], "%.*s", (int)(quote - name), name);
		count++;
		*at = quote;
		if (!skip(at, end, "', '<f8')"))
			return false;
	}
	*ret_count = count;
	return true;
}

/* The literal after the fixed part; header[0..length). */
static const char *parse_header(const char *header, size_t length, struct samples_map *map)
{
	const char *at = header, *end = header + length;
	size_t count = 0;
	if (!skip(&at, end, "{'descr': [('earliest', '<i8'), ('latest', '<i8')"))
		return "its columns do not begin with earliest and latest";
	const char *columns = at;
	if (!parse_channels(&at, end, NULL, &count) ||
	    !skip(&at, end, "], 'fortran_order': False, 'shape': ("))
		return "its columns are not those of samples";
	size_t digits = 0;
	while (at < end && *at >= '0' && *at <= '9' && digits < 20) {
		at++;
		digits++;
	}
	while (at < end && *at == ' ')
		at++;
	if (digits == 0 || !skip(&at, end, ",), }"))
		return "its header has no row count";
	while (at < end && *at == ' ')
		at++;
	if (at + 1 != end || *at != '\n')
		return "its header does not end as it should";
	map->names = calloc(count + 1, sizeof *map->names);
	if (!map->names)
		return "memory ran out";
	map->channel_count = count;
	(void)parse_channels(&columns, end, map->names, &count);
	return NULL;
}

static const char *parse(struct samples_map *map)
{
	const unsigned char *bytes = map->mapping;
	size_t fixed = 10, length = 0;
	if (map->mapped_bytes < 12 || memcmp(bytes, "\x93NUMPY", 6) != 0)
		return "it does not begin as a NumPy file does";
	if (bytes[7] != 0 || (bytes[6] != 1 && bytes[6] != 2))
		return "it is of another version of NumPy's format";
	if (bytes[6] == 2)
		fixed = 12;
	for (size_t i = fixed; i > 8; i--)
		length = length << 8 | bytes[i - 1];
	if (length > map->mapped_bytes - fixed)
		return "it was cut inside its header";
	if ((fixed + length) % 64 != 0)
		return "its rows do not begin where they should";
	const char *fault = parse_header((const char *)bytes + fixed, length, map);
	if (fault)
		return fault;
	map->stride = 16 + 8 * map->channel_count;
	map->row0 = bytes + fixed + length;
	map->rows = (map->mapped_bytes - fixed - length) / map->stride;
	return NULL;
}

int samples_map_open(const char *path, struct samples_map *ret_map, struct err *reterr)
{
	struct samples_map map = {0};
	struct stat status;
	int fd = open(path, O_RDONLY | O_CLOEXEC | O_NONBLOCK);
	if (fd < 0)
		return err_set_at(reterr, ERR_FILE, path, 0, 0, "cannot be opened: %s", strerror(errno));
	const char *fault = NULL;
	if (fstat(fd, &status) < 0 || !S_ISREG(status.st_mode))
		fault = "it is no file";
	else if (status.st_size == 0)
		fault = "it is empty";
	if (!fault) {
		map.mapped_bytes = (size_t)status.st_size;
		map.mapping = mmap(NULL, map.mapped_bytes, PROT_READ, MAP_PRIVATE, fd, 0);
		if (map.mapping == MAP_FAILED) {
			map.mapping = NULL;
			fault = "it cannot be mapped";
		}
	}
	(void)close(fd);
	if (!fault)
		fault = parse(&map);
	if (fault) {
		samples_map_release(&map);
		return refuse(path, fault, reterr);
	}
	*ret_map = map;
	return 0;
}

void samples_map_release(struct samples_map *map)
{
	if (!map)
		return;
	if (map->mapping)
		(void)munmap(map->mapping, map->mapped_bytes);
	free(map->names);
	*map = (struct samples_map){0};
}
