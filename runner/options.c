/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Forty lines of own parsing. getopt_long was rejected: its abbreviations
 * cannot be switched off, its state is global (so that two parses in one test
 * process disturb each other), and it prints on its own.
 */
#include "options.h"

#include <string.h>

static const struct option_row *find(const struct option_row *rows, size_t count, const char *name,
                                     size_t length)
{
	for (size_t i = 0; i < count; i++)
		if (strlen(rows[i].name) == length && memcmp(rows[i].name, name, length) == 0)
			return &rows[i];
	return NULL;
}

static int unknown(const struct option_row *rows, size_t count, const char *verb,
                   const char *argument, size_t length, struct err *reterr)
{
	const char *names[64] = {0};
	char word[64];
	size_t known = count < 64 ? count : 64;
	for (size_t i = 0; i < known; i++)
		names[i] = rows[i].name;
	size_t kept = length < sizeof word - 1 ? length : sizeof word - 1;
	memcpy(word, argument, kept);
	word[kept] = '\0';
	const char *nearest = text_nearest(word, names, known);
	for (size_t i = 0; !nearest && kept > 0 && i < known; i++)
		if (strncmp(names[i], word, kept) == 0)
			nearest = names[i]; /* an abbreviation */
	if (nearest)
		return err_set(reterr, ERR_USAGE, "unknown option --%s of %s; did you mean --%s?", word,
		               verb, nearest);
	return err_set(reterr, ERR_USAGE, "unknown option --%s of %s; try 'drivetrial %s --help'", word,
	               verb, verb);
}

/* One option at argv[*at]; moves *at past its value. */
static int parse_option(int argc, char **argv, int *at, const struct option_row *rows, size_t count,
                        options_take *take, void *context, struct err *reterr)
{
	const char *name = argv[*at] + 2;
	const char *equals = strchr(name, '=');
	const char *value = equals ? equals + 1 : NULL;
	size_t length = equals ? (size_t)(equals - name) : strlen(name);
	const struct option_row *row = find(rows, count, name, length);

	if (!row)
		return unknown(rows, count, argv[0], name, length, reterr);
	if (!row->value && value)
		return err_set(reterr, ERR_USAGE, "--%s takes no value", row->name);
	if (row->value && !value) {
		if (*at + 1 >= argc || strncmp(argv[*at + 1], "--", 2) == 0)
			return err_set(reterr, ERR_USAGE, "--%s needs a value", row->name);
		value = argv[++*at];
	}
	return take(context, row, value, reterr);
}

int options_parse(int argc, char **argv, const struct option_row *rows, size_t count,
                  options_take *take, void *context, struct err *reterr)
{
	bool operands_only = false;
	for (int at = 1; at < argc; at++) {
		const char *argument = argv[at];
		int rc;
		if (operands_only || argument[0] != '-' || argument[1] == '\0') {
			rc = take(context, NULL, argument, reterr);
		} else if (strcmp(argument, "--") == 0) {
			operands_only = true;
			rc = 0;
		} else if (argument[1] == '-') {
			rc = parse_option(argc, argv, &at, rows, count, take, context, reterr);
		} else if (strcmp(argument, "-h") == 0 && find(rows, count, "help", 4)) {
			rc = take(context, find(rows, count, "help", 4), NULL, reterr);
		} else {
			rc = err_set(reterr, ERR_USAGE, "unknown option %s of %s; options are written --name",
			             argument, argv[0]);
		}
		if (rc < 0)
			return -1;
	}
	return 0;
}

void options_describe(const struct option_row *rows, size_t count, struct text *out)
{
	size_t widest = 0;
	for (size_t i = 0; i < count; i++) {
		size_t width = strlen(rows[i].name) + (rows[i].value ? 4 : 0);
		widest = width > widest ? width : widest;
	}
	for (size_t i = 0; i < count; i++) {
		const char *value = rows[i].value ? " ..." : "";
		int width = (int)(widest - strlen(rows[i].name));
		text_printf(out, "  --%s%-*s  %s\n", rows[i].name, width, value, rows[i].text);
	}
}
