/* SPDX-License-Identifier: Apache-2.0 */
#include "near.h"

#include <stdio.h>
#include <string.h>

#include "options.h"

static const struct option_row rows[] = {
    {"rig", true, "the rig file"},
    {"seed", true, "of the noise"},
    {"defect", true, "a named fault"},
    {"help", false, "this text"},
};

struct taken {
	char list[256];
};

static int take(void *context, const struct option_row *row, const char *value, struct err *reterr)
{
	struct taken *taken = context;
	size_t length = strlen(taken->list);
	(void)snprintf(taken->list + length, sizeof taken->list - length, "%s=%s;",
	               row ? row->name : "", value ? value : "");
	if (value && strcmp(value, "refuse") == 0)
		return err_set(reterr, ERR_USAGE, "refused");
	return 0;
}

static int parse(const char *const *arguments, struct taken *taken, struct err *err)
{
	char *argv[12] = {0};
	int argc = 0;
	for (; arguments[argc]; argc++)
		argv[argc] = (char *)(size_t)arguments[argc];
	*taken = (struct taken){0};
	*err = (struct err){0};
	return options_parse(argc, argv, rows, sizeof rows / sizeof rows[0], take, taken, err);
}

static void options_and_operands_come_in_order(void **state)
{
	(void)state;
	struct taken taken;
	struct err err;
	const char *const line[] = {"run", "--rig", "a.yaml", "one.yaml", "--seed=7",
	                            "-h",  "--",    "--seed", "-",        NULL};
	assert_int_equal(parse(line, &taken, &err), 0);
	assert_string_equal(taken.list, "rig=a.yaml;=one.yaml;seed=7;help=;=--seed;=-;");
}

static void wrong_lines_are_refused_with_a_hint(void **state)
{
	(void)state;
	const struct {
		const char *line[4];
		const char *message;
	} wrong[] = {
	    {{"run", "--rgi", "x", NULL}, "unknown option --rgi of run; did you mean --rig?"},
	    {{"run", "--see=1", NULL}, "unknown option --see of run; did you mean --seed?"},
	    {{"run", "--def", "x", NULL}, "unknown option --def of run; did you mean --defect?"},
	    {{"run", "--nonsense", NULL},
	     "unknown option --nonsense of run; try 'drivetrial run --help'"},
	    {{"run", "--rig", NULL}, "--rig needs a value"},
	    {{"run", "--rig", "--seed", NULL}, "--rig needs a value"},
	    {{"run", "--help=now", NULL}, "--help takes no value"},
	    {{"run", "-x", NULL}, "unknown option -x of run; options are written --name"},
	    {{"run", "--rig", "refuse", NULL}, "refused"},
	};
	for (size_t i = 0; i < sizeof wrong / sizeof wrong[0]; i++) {
		struct taken taken;
		struct err err;
		assert_int_equal(parse(wrong[i].line, &taken, &err), -1);
		assert_int_equal(err.code, ERR_USAGE);
		assert_string_equal(err.message, wrong[i].message);
	}
}

static void every_option_is_described(void **state)
{
	(void)state;
	struct text out;
	text_init(&out, 0);
	options_describe(rows, sizeof rows / sizeof rows[0], &out);
	assert_string_equal(text_string(&out), "  --rig ...     the rig file\n"
	                                       "  --seed ...    of the noise\n"
	                                       "  --defect ...  a named fault\n"
	                                       "  --help        this text\n");
	text_release(&out);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(options_and_operands_come_in_order),
	    cmocka_unit_test(wrong_lines_are_refused_with_a_hint),
	    cmocka_unit_test(every_option_is_described),
	};
	return RUN_GROUP(tests);
}
