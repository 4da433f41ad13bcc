/* SPDX-License-Identifier: Apache-2.0 */
/* `run` and `rehearse`: the same options but for the bench; see session.h. */
#include <errno.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "options.h"
#include "session.h"
#include "verbs.h"

static const struct option_row RUN_ROWS[] = {
    {"rig", true, "the rig file (needed)"},
    {"out", true, "the run folder; default runs/<UTC time>-<rig>; never overwritten"},
    {"set", true, "NAME=VALUE: replaces a value of the suite; may be given often"},
    {"only", true, "TEST or a pattern with *: runs these tests only; may be given often"},
    {"tag", true, "TAG: runs the tests with this tag only; may be given often"},
    {"part", true, "I/N: runs the I-th of N parts of about equal duration"},
    {"link", true, "LINK=ADDRESS: another address, tcp:HOST:PORT or rtu:/dev/PATH"},
    {"realtime", false, "real-time scheduling and locked memory, as far as they are allowed"},
    {"quiet", false, "no progress"},
    {"verbose", false, "each step, command, mark and fault on stderr as it happens"},
    {"help", false, "this text"},
};

static const struct option_row REHEARSE_ROWS[] = {
    {"rig", true, "the rig file (needed); it must have a model: section"},
    {"out", true, "the run folder; default runs/<UTC time>-<rig>; never overwritten"},
    {"set", true, "NAME=VALUE: replaces a value of the suite; may be given often"},
    {"only", true, "TEST or a pattern with *: runs these tests only; may be given often"},
    {"tag", true, "TAG: runs the tests with this tag only; may be given often"},
    {"part", true, "I/N: runs the I-th of N parts of about equal duration"},
    {"defect", true, "NAME: builds the controller wrong in a named way; 'list' shows them"},
    {"seed", true, "N: of noise and timing; default 1"},
    {"quiet", false, "no progress"},
    {"verbose", false, "each step, command, mark and fault on stderr as it happens"},
    {"help", false, "this text"},
};

static int take_override(struct run_options *options, const char *value, struct err *reterr)
{
	const char *equals = strchr(value, '=');
	if (!equals || equals == value)
		return err_set(reterr, ERR_USAGE, "--set wants NAME=VALUE, not '%s'", value);
	if (options->override_count == OVERRIDES_MOST)
		return err_set(reterr, ERR_USAGE, "more than %d --set", OVERRIDES_MOST);
	char *name = strndup(value, (size_t)(equals - value));
	if (!name)
		return err_set(reterr, ERR_NOMEM, "no memory");
	options->overrides[options->override_count++] = (struct override){name, equals + 1, false};
	return 0;
}

static int take_link(struct run_options *options, const char *value, struct err *reterr)
{
	const char *equals = strchr(value, '=');
	if (!equals || equals == value)
		return err_set(reterr, ERR_USAGE, "--link wants LINK=ADDRESS, not '%s'", value);
	if (options->address_count == sizeof options->addresses / sizeof options->addresses[0])
		return err_set(reterr, ERR_USAGE, "too many --link");
	char *name = strndup(value, (size_t)(equals - value));
	if (!name)
		return err_set(reterr, ERR_NOMEM, "no memory");
	options->addresses[options->address_count++] = (struct link_address){name, equals + 1};
	return 0;
}

static int take_part(struct run_options *options, const char *value, struct err *reterr)
{
	int used = 0;
	if (sscanf(value, "%3d/%3d%n", &options->part, &options->parts, &used) != 2 ||
	    value[used] != '\0' || options->part < 1 || options->part > options->parts)
		return err_set(reterr, ERR_USAGE, "--part wants I/N such as 2/5, not '%s'", value);
	return 0;
}

static int take_listed(const char **list, size_t *count, const char *value, const char *name,
                       struct err *reterr)
{
	if (*count == SELECT_MOST)
		return err_set(reterr, ERR_USAGE, "more than %d --%s", SELECT_MOST, name);
	list[(*count)++] = value;
	return 0;
}

static int take_seed(struct run_options *options, const char *value, struct err *reterr)
{
	char *end;
	errno = 0;
	options->seed = strtoull(value, &end, 10);
	if (*value < '0' || *value > '9' || *end != '\0' || errno != 0)
		return err_set(reterr, ERR_USAGE, "--seed wants a whole number, not '%s'", value);
	return 0;
}

static int take_wait(struct run_options *options, const char *value, struct err *reterr)
{
	struct quantity quantity;
	struct err err = {0};
	if (quantity_parse(value, strlen(value), NULL, &DIM_TIME, &quantity, &err) < 0 ||
	    quantity_ns(quantity, &options->wait_ns, &err) < 0)
		return err_set(reterr, ERR_USAGE, "--wait %s: %.600s", value, err.message);
	return 0;
}

int run_option_take(struct run_options *options, const char *name, const char *value,
                    struct err *reterr)
{
	if (!name) {
		if (options->suite_count == SUITES_MOST)
			return err_set(reterr, ERR_USAGE, "more than %d suites", SUITES_MOST);
		options->suite_paths[options->suite_count++] = value;
		return 0;
	}
	if (strcmp(name, "rig") == 0)
		options->rig_path = value;
	else if (strcmp(name, "out") == 0)
		options->out = value;
	else if (strcmp(name, "defect") == 0)
		options->defect = value;
	else if (strcmp(name, "quiet") == 0)
		options->quiet = true;
	else if (strcmp(name, "verbose") == 0)
		options->verbose = true;
	else if (strcmp(name, "realtime") == 0)
		options->realtime = true;
	else if (strcmp(name, "wait") == 0)
		return take_wait(options, value, reterr);
	else if (strcmp(name, "set") == 0)
		return take_override(options, value, reterr);
	else if (strcmp(name, "link") == 0)
		return take_link(options, value, reterr);
	else if (strcmp(name, "part") == 0)
		return take_part(options, value, reterr);
	else if (strcmp(name, "seed") == 0)
		return take_seed(options, value, reterr);
	else if (strcmp(name, "only") == 0)
		return take_listed(options->only, &options->only_count, value, name, reterr);
	else if (strcmp(name, "tag") == 0)
		return take_listed(options->tags, &options->tag_count, value, name, reterr);
	return 0;
}

void run_options_free(struct run_options *options)
{
	for (size_t i = 0; i < options->override_count; i++)
		free((void *)(uintptr_t)options->overrides[i].name);
	for (size_t i = 0; i < options->address_count; i++)
		free((void *)(uintptr_t)options->addresses[i].link);
	free(options);
}

struct taking {
	struct run_options *options;
	bool help;
};

static int take(void *context, const struct option_row *row, const char *value, struct err *reterr)
{
	struct taking *taking = context;
	if (row && strcmp(row->name, "help") == 0) {
		taking->help = true;
		return 0;
	}
	return run_option_take(taking->options, row ? row->name : NULL, value, reterr);
}

static void help(bool rehearse)
{
	struct text text;
	text_init(&text, 0);
	if (rehearse)
		text_puts(&text,
		          "drivetrial rehearse --rig RIG SUITE... runs suites on the modelled bench, in "
		          "this\nprocess and in virtual time. Nothing moves.\n\n");
	else
		text_puts(
		    &text,
		    "drivetrial run --rig RIG SUITE... drives the bench, judges what it measures and "
		    "writes\nthe run folder.\n\n"
		    "CAUTION  It makes a shaft turn. Keep clear of rotating parts; the DC link stays\n"
		    "         charged after switch-off. It is no safety function: rely on the\n"
		    "         hard-wired emergency stop, local codes and qualified persons.\n\n");
	options_describe(rehearse ? REHEARSE_ROWS : RUN_ROWS,
	                 rehearse ? sizeof REHEARSE_ROWS / sizeof REHEARSE_ROWS[0]
	                          : sizeof RUN_ROWS / sizeof RUN_ROWS[0],
	                 &text);
	text_puts(&text, rehearse
	                     ? "\n  drivetrial rehearse --rig rigs/model-spm.yaml suites/smoke.yaml\n"
	                       "  drivetrial rehearse --rig rigs/model-spm.yaml --defect "
	                       "encoder-offset suites/release.yaml\n"
	                     : "\n  drivetrial run --rig rigs/bench.yaml suites/release.yaml\n"
	                       "  drivetrial run --rig rigs/bench.yaml --only 'SPD-*' "
	                       "suites/release.yaml\n");
	(void)fputs(text_string(&text), stdout);
	text_release(&text);
}

static int list_defects(void)
{
	size_t count;
	const struct model_defect *defects = model_defects(&count);
	for (size_t i = 0; i < count; i++)
		(void)printf("%s\t%s\n", defects[i].name, defects[i].text);
	return 0;
}

static int carry_out(const struct run_options *options)
{
	struct session *session = malloc(sizeof *session);
	if (!session) {
		(void)fprintf(stderr, "drivetrial: no memory\n");
		return EXIT_INTERNAL;
	}
	session_init(session, options);
	int code = session_load(session);
	if (code == 0)
		code = session_connect(session);
	if (code == 0) {
		if (!options->rehearse)
			engine_hold_signals();
		code = session_record(session);
	}
	if (code == 0) {
		code = options->rehearse ? engine_virtual(session) : engine_real(session);
		if (code == 0)
			code = session_finish(session);
	}
	session_release(session);
	free(session);
	return code;
}

static int run_or_rehearse(int argc, char **argv, bool rehearse)
{
	struct run_options *options = calloc(1, sizeof *options);
	struct err err = {0};
	if (!options)
		return EXIT_INTERNAL;
	options->rehearse = rehearse;
	options->seed = 1;
	struct taking taking = {.options = options};
	const struct option_row *rows = rehearse ? REHEARSE_ROWS : RUN_ROWS;
	size_t count = rehearse ? sizeof REHEARSE_ROWS / sizeof REHEARSE_ROWS[0]
	                        : sizeof RUN_ROWS / sizeof RUN_ROWS[0];
	int code = EXIT_USAGE;
	if (options_parse(argc, argv, rows, count, take, &taking, &err) < 0) {
		session_print_error(&err);
	} else if (taking.help) {
		help(rehearse);
		code = 0;
	} else if (options->defect && strcmp(options->defect, "list") == 0) {
		code = list_defects();
	} else if (!options->rig_path || options->suite_count == 0) {
		(void)fprintf(stderr, "drivetrial %s: %s; see 'drivetrial %s --help'\n", argv[0],
		              options->rig_path ? "no suite is given" : "--rig is missing", argv[0]);
	} else {
		code = carry_out(options);
	}
	run_options_free(options);
	return code;
}

int verb_run(int argc, char **argv)
{
	return run_or_rehearse(argc, argv, false);
}

int verb_rehearse(int argc, char **argv)
{
	return run_or_rehearse(argc, argv, true);
}
