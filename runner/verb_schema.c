/* SPDX-License-Identifier: Apache-2.0 */
/*
 * `schema`: JSON Schema for editors and programs, printed whole. In a YAML file
 * the line `# yaml-language-server: $schema=rig.schema.json` leads to it.
 */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "options.h"
#include "schema_table.h"
#include "session.h"
#include "verbs.h"

static const struct option_row ROWS[] = {{"help", false, "this text"}};

static const struct {
	const char *name;
	json_t *(*make)(void);
} SCHEMAS[] = {{"rig", schema_rig}, {"suite", schema_suite}, {"results", schema_results}};

enum { SCHEMA_COUNT = sizeof SCHEMAS / sizeof SCHEMAS[0] };

struct schema_options {
	const char *name;
	bool help;
};

static int take(void *context, const struct option_row *row, const char *value, struct err *reterr)
{
	struct schema_options *options = context;
	if (row) {
		options->help = true;
		return 0;
	}
	if (options->name)
		return err_set(reterr, ERR_USAGE, "schema takes one name: rig, suite or results");
	options->name = value;
	return 0;
}

static int show_help(void)
{
	(void)fputs("drivetrial schema rig|suite|results prints a JSON Schema (2020-12): what an "
	            "editor needs\nto complete and check rig and suite files, and what programs may "
	            "rely on in results.json.\nNames, units of channels and command limits are beyond "
	            "a schema; the loaders check them.\n\n"
	            "  drivetrial schema rig > rig.schema.json\n"
	            "  drivetrial schema suite > suite.schema.json\n\n"
	            "The first line of a file then leads an editor to it:\n"
	            "  # yaml-language-server: $schema=rig.schema.json\n",
	            stdout);
	return fflush(stdout) == 0 ? 0 : EXIT_NO_OUTPUT;
}

static int print(json_t *schema)
{
	char *bytes = schema ? json_dumps(schema, JSON_INDENT(2) | JSON_REAL_PRECISION(15)) : NULL;
	int code = EXIT_INTERNAL;
	json_decref(schema);
	if (bytes)
		code = puts(bytes) >= 0 && fflush(stdout) == 0 ? 0 : EXIT_NO_OUTPUT;
	free(bytes);
	return code;
}

int verb_schema(int argc, char **argv)
{
	struct schema_options options = {0};
	struct err err = {0};
	const char *names[SCHEMA_COUNT];
	if (options_parse(argc, argv, ROWS, 1, take, &options, &err) < 0)
		return session_exit_of(&err);
	if (options.help)
		return show_help();
	for (size_t i = 0; i < SCHEMA_COUNT; i++) {
		names[i] = SCHEMAS[i].name;
		if (options.name && strcmp(options.name, names[i]) == 0)
			return print(SCHEMAS[i].make());
	}
	const char *nearest = options.name ? text_nearest(options.name, names, SCHEMA_COUNT) : NULL;
	if (nearest)
		(void)err_set(&err, ERR_USAGE, "there is no schema '%s'; did you mean '%s'?", options.name,
		              nearest);
	else
		(void)err_set(&err, ERR_USAGE, "schema of what: rig, suite or results");
	return session_exit_of(&err);
}
