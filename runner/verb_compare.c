/* SPDX-License-Identifier: Apache-2.0 */
/*
 * `compare`: the results of two or more runs side by side. Only folders that
 * are as they were sealed are compared: a number that somebody changed would
 * look like a change of the drive. Nothing is written into a sealed folder.
 */
#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "comparison.h"
#include "options.h"
#include "session.h"
#include "verbs.h"

static const struct option_row ROWS[] = {
    {"share", true, "of the margin that may be lost before the exit code is 1 (25 %)"},
    {"all", false, "also prints what did not change"},
    {"json", true, "FILE: everything for programs"},
    {"html", true, "FILE: a page with small plots; report.css is put beside it"},
    {"help", false, "this text"},
};

struct compare_options {
	const char *folders[COMPARED_RUNS_MOST], *json, *html;
	size_t count;
	double share;
	bool all, help;
};

static int take_share(const char *value, double *ret_share, struct err *reterr)
{
	struct quantity share;
	struct err err = {0};
	if (quantity_parse(value, strlen(value), unit_percent(), &DIM_NUMBER, &share, &err) < 0)
		return err_set(reterr, ERR_USAGE, "--share: write a part of the margin as in '25 %%'");
	*ret_share = quantity_si(share);
	if (!(*ret_share >= 0) || *ret_share > 100)
		return err_set(reterr, ERR_USAGE,
		               "--share: a part of the margin lies between 0 %% and "
		               "10000 %%");
	return 0;
}

static int take(void *context, const struct option_row *row, const char *value, struct err *reterr)
{
	struct compare_options *options = context;
	if (!row) {
		if (options->count == COMPARED_RUNS_MOST)
			return err_set(reterr, ERR_USAGE, "at most %d run folders", COMPARED_RUNS_MOST);
		options->folders[options->count++] = value;
	} else if (strcmp(row->name, "share") == 0) {
		return take_share(value, &options->share, reterr);
	} else if (strcmp(row->name, "json") == 0) {
		options->json = value;
	} else if (strcmp(row->name, "html") == 0) {
		options->html = value;
	} else if (strcmp(row->name, "all") == 0) {
		options->all = true;
	} else {
		options->help = true;
	}
	return 0;
}

static void help(void)
{
	struct text text;
	text_init(&text, 0);
	text_puts(&text,
	          "drivetrial compare OLD NEW [NEWER...] puts the results of run folders side by "
	          "side.\nA change is significant where it is larger than both uncertainties "
	          "together.\n\n");
	options_describe(ROWS, sizeof ROWS / sizeof ROWS[0], &text);
	text_puts(&text,
	          "\nExit codes: 0 nothing got worse; 1 a metric got significantly worse by more "
	          "than the share of\nits margin, or a verdict fell; 64 usage; 65 a folder is not "
	          "as it was sealed; 73 no output.\n\n"
	          "  drivetrial compare runs/release-2.4.0 runs/release-2.4.1 --html compare.html\n");
	(void)fputs(text_string(&text), stdout);
	text_release(&text);
}

static int verify(const char *folder)
{
	struct text text;
	struct err err = {0};
	bool clean = false;
	text_init(&text, 0);
	int result = run_folder_verify(folder, &text, &clean, &err);
	if (result == 0 && !clean)
		(void)fputs(text_string(&text), stderr);
	text_release(&text);
	if (result < 0)
		return session_exit_of(&err);
	if (!clean)
		(void)fprintf(stderr, "drivetrial: %s is not as it was sealed: it is not compared\n",
		              folder);
	return clean ? 0 : EXIT_FILE;
}

/* The folder of a file that is to be written, open; *ret_name borrows from path. */
static int open_place(const char *path, struct run_folder *ret_folder, const char **ret_name,
                      struct err *reterr)
{
	const char *slash = strrchr(path, '/');
	*ret_name = slash ? slash + 1 : path;
	if (!slash)
		(void)snprintf(ret_folder->path, sizeof ret_folder->path, ".");
	else
		(void)snprintf(ret_folder->path, sizeof ret_folder->path, "%.*s",
		               slash == path ? 1 : (int)(slash - path), path);
	ret_folder->fd = open(ret_folder->path, O_RDONLY | O_DIRECTORY | O_CLOEXEC);
	if (ret_folder->fd < 0)
		return err_set(reterr, ERR_OUTPUT, "%s: %s", ret_folder->path, strerror(errno));
	if (faccessat(ret_folder->fd, "SHA256SUMS", F_OK, 0) == 0) {
		(void)close(ret_folder->fd);
		return err_set(reterr, ERR_OUTPUT, "%s is a sealed run folder: nothing is written into it",
		               ret_folder->path);
	}
	return 0;
}

static int write_outputs(const struct compare_options *options, const struct comparison *comparison,
                         struct err *reterr)
{
	struct run_folder folder;
	const char *name;
	if (options->json) {
		char *bytes = comparison_json(comparison);
		if (!bytes)
			return err_set(reterr, ERR_NOMEM, "no memory for the comparison");
		int result = open_place(options->json, &folder, &name, reterr);
		if (result == 0) {
			result = run_folder_write(&folder, name, bytes, strlen(bytes), reterr);
			(void)close(folder.fd);
		}
		free(bytes);
		if (result < 0)
			return -1;
	}
	if (options->html) {
		if (open_place(options->html, &folder, &name, reterr) < 0)
			return -1;
		int result = comparison_html(comparison, &folder, name, reterr);
		(void)close(folder.fd);
		return result;
	}
	return 0;
}

static int compare(const struct compare_options *options, struct arena *arena)
{
	struct comparison comparison;
	struct err err = {0};
	for (size_t i = 0; i < options->count; i++) {
		int code = verify(options->folders[i]);
		if (code != 0)
			return code;
	}
	if (comparison_make(options->folders, options->count, options->share, arena, &comparison,
	                    &err) < 0)
		return session_exit_of(&err);
	comparison_print(&comparison, options->all, stdout);
	if (fflush(stdout) != 0)
		(void)fprintf(stderr, "drivetrial: the comparison could not be written to stdout\n");
	if (write_outputs(options, &comparison, &err) < 0)
		return session_exit_of(&err);
	return comparison_is_worse(&comparison) ? EXIT_TEST_FAILED : EXIT_ALL_PASS;
}

int verb_compare(int argc, char **argv)
{
	struct compare_options options = {.share = 0.25};
	struct err err = {0};
	struct arena arena;
	if (options_parse(argc, argv, ROWS, sizeof ROWS / sizeof ROWS[0], take, &options, &err) < 0)
		return session_exit_of(&err);
	if (options.help) {
		help();
		return 0;
	}
	if (options.count < 2) {
		(void)fprintf(stderr, "drivetrial compare: two run folders are needed; see 'drivetrial "
		                      "compare --help'\n");
		return EXIT_USAGE;
	}
	arena_init(&arena, 0);
	int code = compare(&options, &arena);
	arena_release(&arena);
	return code;
}
