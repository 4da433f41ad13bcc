/* SPDX-License-Identifier: Apache-2.0 */
/* `help`: what a name in a rig or suite file means, from the loaders' own tables. */
#include <stdio.h>
#include <string.h>

#include "options.h"
#include "reference.h"
#include "session.h"
#include "verbs.h"

static const struct option_row ROWS[] = {{"help", false, "this text"}};

struct help_options {
	const char *name;
	bool help;
};

static int take(void *context, const struct option_row *row, const char *value, struct err *reterr)
{
	struct help_options *options = context;
	if (row) {
		options->help = true;
		return 0;
	}
	if (options->name)
		return err_set(reterr, ERR_USAGE, "help explains one name at a time");
	options->name = value;
	return 0;
}

static int print(struct text *out)
{
	bool written = !out->cut && fputs(text_string(out), stdout) >= 0 && fflush(stdout) == 0;
	text_release(out);
	return written ? 0 : EXIT_NO_OUTPUT;
}

int verb_help(int argc, char **argv)
{
	struct help_options options = {0};
	struct err err = {0};
	struct text out;
	const char *nearest;
	if (options_parse(argc, argv, ROWS, 1, take, &options, &err) < 0)
		return session_exit_of(&err);
	text_init(&out, 0);
	if (options.help || !options.name) {
		text_puts(&out, "drivetrial help NAME explains a check, step, derived channel, key or unit "
		                "of rig and\nsuite files; `drivetrial help reference` prints all of it, "
		                "`drivetrial --help` the verbs.\n\n  drivetrial help step_response\n  "
		                "drivetrial help channel\n\n");
		reference_names(&out);
		return print(&out);
	}
	if (strcmp(options.name, "reference") == 0) {
		reference_page(&out);
		return print(&out);
	}
	if (reference_entry(options.name, &out, &nearest))
		return print(&out);
	text_release(&out);
	(void)err_set(&err, ERR_USAGE, "nothing is called '%s'%s%s%s", options.name,
	              nearest ? "; did you mean '" : "; 'drivetrial help --help' lists what is",
	              nearest ? nearest : "", nearest ? "'?" : "");
	return session_exit_of(&err);
}
