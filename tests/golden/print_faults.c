/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Prints what is wrong with rig.yaml, and with suite.yaml where there is one,
 * of the current folder: the text that a user sees. Golden cases compare it. A
 * rig that says `unattended` is also asked whether it is ready for that. The
 * file `set`, where there is one, holds lines NAME=VALUE, as --set takes them.
 */
#include <stdio.h>
#include <string.h>
#include <unistd.h>

#include "suite.h"

enum { OVERRIDES_MOST = 8 };

struct settings {
	char text[1024];
	struct override items[OVERRIDES_MOST];
	size_t count;
};

static void read_settings(struct settings *settings)
{
	FILE *file = fopen("set", "r");
	if (!file)
		return;
	settings->text[fread(settings->text, 1, sizeof settings->text - 1, file)] = '\0';
	(void)fclose(file);
	char *rest = settings->text, *line;
	while ((line = strsep(&rest, "\n")) && settings->count < OVERRIDES_MOST) {
		char *value = strchr(line, '=');
		if (!value)
			continue;
		*value = '\0';
		settings->items[settings->count++] = (struct override){.name = line, .value = value + 1};
	}
}

static int load(struct arena *arena, struct faults *faults, struct err *reterr)
{
	static struct settings settings;
	const struct rig *rig = NULL;
	struct suite *suite = NULL;
	if (rig_load("rig.yaml", arena, faults, &rig, reterr) < 0)
		return -1;
	if (!rig)
		return 0;
	if (access("suite.yaml", F_OK) != 0) {
		if (rig->unattended)
			(void)rig_unattended_ready(rig, faults);
		return 0;
	}
	read_settings(&settings);
	return suite_load("suite.yaml", rig, settings.items, settings.count, arena, faults, &suite,
	                  reterr);
}

int main(void)
{
	static struct faults faults;
	struct arena arena;
	struct err err = {0};
	struct text out;
	arena_init(&arena, 0);
	text_init(&out, 0);
	int rc = load(&arena, &faults, &err);
	faults_print(&faults, &out);
	if (rc < 0)
		printf("%s: %s\n", err.file, err.message);
	else if (faults_total(&faults) == 0)
		printf("no faults\n");
	else
		fputs(text_string(&out), stdout);
	text_release(&out);
	arena_release(&arena);
	return fflush(stdout) == 0 ? 0 : 1;
}
