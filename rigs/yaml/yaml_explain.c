/* SPDX-License-Identifier: Apache-2.0 */
/*
 * libyaml's own messages say what its scanner wanted; a person needs to know
 * what to change. A table maps them. Where the interesting place is where a
 * construct began (a quote that is never closed), that position is shown.
 */
#include <string.h>

#include "yaml_reading.h"

struct explanation {
	const char *problem; /* begin of libyaml's text */
	const char *context; /* part of its context; NULL: any */
	bool at_context;     /* show where the construct began */
	const char *text;
};

/* clang-format off */
static const struct explanation EXPLANATIONS[] = {
	{"mapping values are not allowed", NULL, false,
	 "a ':' cannot stand here: check the indentation of this line and the one before it, "
	 "or put a value that holds ': ' in quotes"},
	{"could not find expected ':'", "quoted", true, "a ':' is missing after this"},
	{"could not find expected ':'", NULL, true,
	 "a ':' is missing after this key, or the line belongs to the value above and is not indented"},
	{"block sequence entries are not allowed", NULL, false,
	 "a list item '-' cannot stand here: begin it on a line of its own, indented like its list"},
	{"mapping keys are not allowed", NULL, false,
	 "a key cannot stand here: check the indentation"},
	{"found unexpected end of stream", "quoted", true, "this quote is never closed"},
	{"found unexpected document indicator", "quoted", true, "this quote is never closed"},
	{"found unknown escape character", NULL, false,
	 "this escape is not known: in double quotes write \\\\ for a backslash, or use single quotes"},
	{"did not find expected hexdecimal number", NULL, false,
	 "hexadecimal digits are missing after the escape"},
	{"found invalid Unicode character escape", NULL, false,
	 "the escape is no Unicode character"},
	{"did not find expected ',' or ']'", NULL, false,
	 "a ',' or the closing ']' of the list is missing before this"},
	{"did not find expected ',' or '}'", NULL, false,
	 "a ',' or the closing '}' of the mapping is missing before this"},
	{"did not find expected key", NULL, false,
	 "a key is expected here: check the indentation, and that quotes and brackets above are closed"},
	{"did not find expected '-' indicator", NULL, false,
	 "a list item '-' is expected here: check the indentation"},
	{"did not find expected node content", NULL, false,
	 "a value is expected here"},
	{"did not find expected <document start>", NULL, false,
	 "the file should have ended before this: check the indentation"},
	{"did not find expected comment or line break", "block scalar", false,
	 "after '|' or '>' the text begins on the next line"},
	{"did not find expected comment or line break", NULL, false,
	 "this line begins with '%', which makes it a directive: put it in quotes or remove it"},
	{"found unknown directive name", NULL, false,
	 "this line begins with '%', which makes it a directive: put it in quotes or remove it"},
	{"found incompatible YAML document", NULL, false, "only YAML 1.1 and 1.2 are understood"},
	{"found undefined tag handle", NULL, false,
	 "a tag is not allowed: put a value that begins with '!' in quotes"},
	{"did not find the expected '!'", NULL, false,
	 "a tag is not allowed: put a value that begins with '!' in quotes"},
	{"did not find expected alphabetic or numeric character", "alias", true,
	 "a value that begins with '*' is an alias, which is not allowed: put it in quotes"},
	{"did not find expected alphabetic or numeric character", "anchor", true,
	 "a value that begins with '&' is an anchor, which is not allowed: put it in quotes"},
};
/* clang-format on */

static bool starts_with(const char *text, const char *start)
{
	return strncmp(text, start, strlen(start)) == 0;
}

/* The bytes of a line from its begin; NULL behind the end of the file. */
static const char *line_begin(const struct position *at)
{
	const char *bytes = at->file->bytes, *end = bytes + at->file->length;
	for (int i = 1; i < at->line; i++) {
		bytes = memchr(bytes, '\n', (size_t)(end - bytes));
		if (!bytes)
			return NULL;
		bytes++;
	}
	return bytes;
}

/* 1-based column of a tab in the indentation of that line, or 0. */
static int tab_in_indent(const struct position *at)
{
	const char *line = line_begin(at);
	for (int column = 1; line && (*line == ' ' || *line == '\t'); line++, column++)
		if (*line == '\t')
			return column;
	return 0;
}

static char character_at(const struct position *at)
{
	const char *line = line_begin(at);
	for (int column = 1; line && *line && *line != '\n'; line++) {
		if (((unsigned char)*line & 0xC0) == 0x80)
			continue; /* within a code point */
		if (column++ == at->column)
			return *line;
	}
	return '\0';
}

/* A place at the end of the file says nothing; it is moved to the last line with something in it.
 */
static struct position within_file(struct position at)
{
	const char *bytes = at.file->bytes;
	size_t length = at.file->length;
	while (length > 0 && strchr(" \t\r\n", bytes[length - 1]))
		length--;
	struct position last = {at.file, 1, 1};
	for (size_t i = 0; i < length; i++) {
		if (bytes[i] == '\n') {
			last.line++;
			last.column = 1;
		} else if (((unsigned char)bytes[i] & 0xC0) != 0x80) {
			last.column++;
		}
	}
	return at.line > last.line ? last : at;
}

void yaml_explain(const struct yaml_problem *problem, struct faults *faults)
{
	struct position at = within_file(problem->at);
	int tab = tab_in_indent(&at);
	if (tab > 0) {
		at.column = tab;
		faults_add(faults, at, "a tab cannot indent: use spaces");
		return;
	}
	if (starts_with(problem->problem, "found character that cannot start any token")) {
		char c = character_at(&at);
		if (c == '\t')
			faults_add(faults, at, "a tab cannot stand here: use spaces");
		else
			faults_add(faults, at, "'%c' cannot begin a value: put the value in quotes", c);
		return;
	}
	if (starts_with(problem->problem, "did not find expected key") && character_at(&at) == ':') {
		faults_add(faults, at, "a key is missing before this ':'");
		return;
	}
	for (size_t i = 0; i < sizeof EXPLANATIONS / sizeof EXPLANATIONS[0]; i++) {
		const struct explanation *row = &EXPLANATIONS[i];
		if (!starts_with(problem->problem, row->problem) ||
		    (row->context && !strstr(problem->context, row->context)))
			continue;
		if (strchr(row->problem, ']') || strchr(row->problem, '}'))
			faults_add(faults, at, "%s; it begins in line %d", row->text, problem->context_at.line);
		else
			faults_add(faults, row->at_context ? problem->context_at : at, "%s", row->text);
		return;
	}
	faults_add(faults, at, "this is not YAML: %s%s%s", problem->problem,
	           *problem->context ? " " : "", problem->context);
}
