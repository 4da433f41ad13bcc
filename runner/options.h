/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_OPTIONS_H
#define DRIVETRIAL_OPTIONS_H
/*
 * The command line of a verb, by a table of its options.
 *
 *   --name VALUE, --name=VALUE, --name, operands in between, -- ends options
 *
 * Names must be written out: an abbreviation that works today means something
 * else once an option is added, and CI scripts live long. `-h` is `--help`
 * where the table has it. There is no global state.
 *
 *     static const struct option_row rows[] = {
 *         {"rig", true, "the rig file"},
 *         {"help", false, "this text"},
 *     };
 *     if (options_parse(argc, argv, rows, 2, take, &wanted, &err) < 0) ... exit 64
 */
#include <stdbool.h>
#include <stddef.h>

#include "err.h"
#include "text.h"

struct option_row {
	const char *name; /* without the dashes */
	bool value;       /* takes one */
	const char *text; /* one line for --help */
};

/*
 * Called for each option in order, and for each operand with row NULL. value:
 * NULL where the option takes none; borrowed from argv. Returns -1 to end the
 * parse, after setting reterr (ERR_USAGE).
 */
typedef int options_take(void *context, const struct option_row *row, const char *value,
                         struct err *reterr);

/* argv[0] is the verb. Errors: ERR_USAGE with a suggestion where one is near. */
int options_parse(int argc, char **argv, const struct option_row *rows, size_t count,
                  options_take *take, void *context, struct err *reterr);

/* Adds a line for each option to `out`. */
void options_describe(const struct option_row *rows, size_t count, struct text *out);

#endif
