/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Feeds every file of the folders named on the command line to a fuzz target,
 * without libFuzzer: so every compiler and sanitizer sees the corpora in the
 * ordinary tests. Fails where a folder holds nothing.
 */
#include <dirent.h>
#include <string.h>

#include "fuzz.h"

enum { INPUT_MOST = 1 << 21 };

static void feed(const char *folder, const char *name)
{
	char path[1200];
	(void)snprintf(path, sizeof path, "%.900s/%.255s", folder, name);
	FILE *file = fopen(path, "rb");
	demand(file);
	uint8_t *buffer = malloc(INPUT_MOST);
	demand(buffer);
	size_t length = fread(buffer, 1, INPUT_MOST, file);
	(void)fclose(file);
	/* A copy of the exact size, so that a sanitizer sees a read past the end. */
	uint8_t *exact = malloc(length ? length : 1);
	demand(exact);
	memcpy(exact, buffer, length);
	free(buffer);
	(void)LLVMFuzzerTestOneInput(exact, length);
	free(exact);
}

static size_t feed_folder(const char *folder)
{
	size_t count = 0;
	DIR *dir = opendir(folder);
	const struct dirent *entry;
	if (!dir)
		return 0;
	while ((entry = readdir(dir)))
		if (entry->d_name[0] != '.') {
			feed(folder, entry->d_name);
			count++;
		}
	(void)closedir(dir);
	return count;
}

int main(int argc, char **argv)
{
	for (int i = 1; i < argc; i++) {
		size_t count = feed_folder(argv[i]);
		printf("%s: %zu inputs\n", argv[i], count);
		if (count == 0)
			return 1;
	}
	return argc > 1 ? 0 : 1;
}
