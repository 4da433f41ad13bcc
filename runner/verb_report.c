/* SPDX-License-Identifier: Apache-2.0 */
/*
 * `report`: a recorded run, judged anew from what was recorded and nothing
 * else; or only verified. It never writes into the folder that it reads. The
 * new folder holds the recording too, so that it stands for itself, and names
 * the hash of its parent.
 */
#include <dirent.h>
#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#include "judging.h"
#include "options.h"
#include "report.h"
#include "session.h"
#include "verbs.h"

static const struct option_row ROWS[] = {
    {"out", true, "the new folder (needed, but for --verify)"},
    {"suite", true,
     "FILE: judges with this suite instead of the recorded one; in the order of "
     "the run, may be given often"},
    {"verify", false, "only compares the folder with its SHA256SUMS"},
    {"help", false, "this text"},
};

struct report_options {
	const char *folder, *out;
	const char *suites[SUITES_MOST];
	size_t suite_count;
	bool verify, help;
};

static int take(void *context, const struct option_row *row, const char *value, struct err *reterr)
{
	struct report_options *options = context;
	if (!row) {
		if (options->folder)
			return err_set(reterr, ERR_USAGE, "one run folder at a time");
		options->folder = value;
	} else if (strcmp(row->name, "out") == 0) {
		options->out = value;
	} else if (strcmp(row->name, "verify") == 0) {
		options->verify = true;
	} else if (strcmp(row->name, "help") == 0) {
		options->help = true;
	} else {
		if (options->suite_count == SUITES_MOST)
			return err_set(reterr, ERR_USAGE, "more than %d suites", SUITES_MOST);
		options->suites[options->suite_count++] = value;
	}
	return 0;
}

static void help(void)
{
	struct text text;
	text_init(&text, 0);
	text_puts(&text,
	          "drivetrial report DIR --out NEW judges a recorded run anew and rebuilds every "
	          "report.\ndrivetrial report --verify DIR says what was changed, missing or "
	          "added.\n\n");
	options_describe(ROWS, sizeof ROWS / sizeof ROWS[0], &text);
	text_puts(&text, "\n  drivetrial report runs/20270104T220000Z-model-spm --out again\n"
	                 "  drivetrial report runs/20270104T220000Z-model-spm --suite "
	                 "suites/tighter.yaml --out tighter\n");
	(void)fputs(text_string(&text), stdout);
	text_release(&text);
}

/* Prints what differs; *ret_sealed is false where the folder has no SHA256SUMS (a run that died).
 */
static int verify(const char *folder, bool *ret_sealed, bool print_clean)
{
	struct text text;
	struct err err = {0};
	bool clean = false;
	char sums[1100];
	(void)snprintf(sums, sizeof sums, "%s/SHA256SUMS", folder);
	*ret_sealed = access(sums, F_OK) == 0;
	text_init(&text, 0);
	int result = run_folder_verify(folder, &text, &clean, &err);
	(void)fputs(text_string(&text), result == 0 && !clean ? stderr : stdout);
	text_release(&text);
	if (result < 0) {
		session_print_error(&err);
		return EXIT_FILE;
	}
	if (!clean)
		return EXIT_FILE;
	if (print_clean)
		(void)printf("%s: every file is as it was sealed\n", folder);
	return 0;
}

/* ---- copying the recording ---------------------------------------------------- */

static int copy_file(const char *folder, const char *name, const struct run_folder *out,
                     struct err *err)
{
	char path[2400];
	(void)snprintf(path, sizeof path, "%s/%s", folder, name);
	int from = open(path, O_RDONLY | O_CLOEXEC | O_NOFOLLOW);
	if (from < 0)
		return err_set(err, ERR_FILE, "%s: %s", path, strerror(errno));
	int to;
	if (run_folder_begin(out, name, &to, err) < 0) {
		(void)close(from);
		return -1;
	}
	static char buffer[1 << 16];
	ssize_t length;
	bool good = true;
	while (good && (length = read(from, buffer, sizeof buffer)) != 0)
		good = length > 0 && file_write_all(to, buffer, (size_t)length) == 0;
	(void)close(from);
	return run_folder_finish(out, name, to, good, err);
}

static bool is_recorded(const char *name)
{
	size_t length = strlen(name);
	return (length >= 15 && strcmp(name + length - 15, "parameters.yaml") == 0) ||
	       strcmp(name, "rig.yaml") == 0 || strcmp(name, "journal.jsonl") == 0 ||
	       (strncmp(name, "suite", 5) == 0 && strstr(name, ".yaml"));
}

/* Files of folder/below ("" or "samples") that belong to the recording. */
static int copy_folder(const char *folder, const char *below, const struct run_folder *out,
                       struct err *err)
{
	char path[2300], name[1200];
	(void)snprintf(path, sizeof path, "%s/%s", folder, below);
	DIR *dir = opendir(path);
	if (!dir)
		return *below ? 0 : err_set(err, ERR_FILE, "%s: %s", path, strerror(errno));
	int result = 0;
	const struct dirent *entry;
	while (result == 0 && (entry = readdir(dir))) {
		if (entry->d_name[0] == '.' || (!*below && !is_recorded(entry->d_name)))
			continue;
		(void)snprintf(name, sizeof name, "%s%s%s", below, *below ? "/" : "", entry->d_name);
		result = copy_file(folder, name, out, err);
	}
	(void)closedir(dir);
	return result;
}

/* Of suites that were replaced the new text is kept, beside the old one's place. */
static int copy_recording(const struct report_options *options, struct suite *const *suites,
                          size_t suite_count, const struct run_folder *out, struct err *err)
{
	if (options->suite_count == 0)
		return copy_folder(options->folder, "", out, err) < 0 ||
		               copy_folder(options->folder, "samples", out, err) < 0
		           ? -1
		           : 0;
	if (copy_file(options->folder, "rig.yaml", out, err) < 0 ||
	    copy_file(options->folder, "journal.jsonl", out, err) < 0 ||
	    copy_folder(options->folder, "samples", out, err) < 0)
		return -1;
	for (size_t i = 0; i < suite_count; i++) {
		char name[32] = "suite.yaml";
		if (i > 0)
			(void)snprintf(name, sizeof name, "suite-%zu.yaml", i + 1);
		if (run_folder_write(out, name, suites[i]->file->bytes, suites[i]->file->length, err) < 0)
			return -1;
	}
	return 0;
}

static int name_parent(const struct report_options *options, const struct run_folder *out,
                       const char *hash, struct err *err)
{
	struct text text;
	text_init(&text, 0);
	text_puts(&text, "Rebuilt from the recording of another run folder.\n");
	if (*hash)
		text_printf(&text, "SHA-256 of its SHA256SUMS: %s\n", hash);
	else
		text_puts(&text, "It had no SHA256SUMS: the run that made it did not end in order.\n");
	if (options->suite_count > 0)
		text_puts(&text, "Judged with other suite files than those of the run.\n");
	int result = run_folder_write(out, "rebuilt.txt", text_string(&text), text.length, err);
	text_release(&text);
	return result;
}

/* ---- loading and judging --------------------------------------------------------- */

static void select_recorded(struct suite *suite, const struct recorded_suite *recorded)
{
	if (!recorded->partial)
		return;
	for (size_t t = 0; t < suite->test_count; t++) {
		bool was = suite->tests[t].bench;
		for (size_t i = 0; i < recorded->selected_count; i++)
			was = was || strcmp(recorded->selected[i], suite->tests[t].name) == 0;
		suite->tests[t].selected = was;
	}
}

struct rebuilding {
	struct arena arena;
	struct faults faults;
	struct recording_head head;
	const struct rig *rig;
	struct suite *suites[SUITES_MOST];
	struct recording recording;
	struct run_result run;
};

static int load(struct rebuilding *r, const struct report_options *options, struct err *err)
{
	char path[1200];
	if (recording_head_read(options->folder, &r->arena, &r->head, err) < 0)
		return -1;
	if (r->head.suite_count > SUITES_MOST ||
	    (options->suite_count > 0 && options->suite_count != r->head.suite_count))
		return err_set(err, ERR_USAGE, "the run had %zu suites: give as many with --suite",
		               r->head.suite_count);
	(void)snprintf(path, sizeof path, "%s/rig.yaml", options->folder);
	if (rig_load(path, &r->arena, &r->faults, &r->rig, err) < 0)
		return -1;
	for (size_t i = 0; r->rig && i < r->head.suite_count; i++) {
		struct recorded_suite *recorded = &r->head.suites[i];
		(void)snprintf(path, sizeof path, i ? "%s/suite-%zu.yaml" : "%s/suite.yaml",
		               options->folder, i + 1);
		bool other = options->suite_count > 0;
		if (suite_load(other ? options->suites[i] : path, r->rig, recorded->overrides,
		               recorded->override_count, &r->arena, &r->faults, &r->suites[i], err) < 0)
			return -1;
		if (!r->suites[i])
			return 0;
		if (i > 0)
			session_drop_bench_tests(r->suites[i]);
		select_recorded(r->suites[i], recorded);
	}
	return 0;
}

static int rebuild(struct rebuilding *r, const struct report_options *options, const char *hash)
{
	struct err err = {0};
	struct run_folder out;
	const struct suite *const *suites = (const struct suite *const *)r->suites;
	if (load(r, options, &err) < 0)
		return session_exit_of(&err);
	if (r->faults.count > 0) {
		struct text text;
		text_init(&text, 0);
		faults_print(&r->faults, &text);
		(void)fputs(text_string(&text), stderr);
		text_release(&text);
		return EXIT_FILE;
	}
	if (recording_open(options->folder, r->rig, suites, r->head.suite_count, &r->arena,
	                   &r->recording, &err) < 0 ||
	    judge_recording(r->rig, suites, r->head.suite_count, &r->recording, &r->arena, &r->run,
	                    &err) < 0 ||
	    run_folder_new(options->out, NULL, r->rig->name, &out, &err) < 0)
		return session_exit_of(&err);
	int code = r->run.exit_code;
	out.together = true;
	if (copy_recording(options, r->suites, r->head.suite_count, &out, &err) < 0 ||
	    run_folder_sync(&out, &err) < 0 || name_parent(options, &out, hash, &err) < 0 ||
	    reports_write(&r->run, &out, &err) < 0 || run_folder_seal(&out, &err) < 0)
		code = session_exit_of(&err);
	else
		summary_print(&r->run, isatty(STDOUT_FILENO) && !getenv("NO_COLOR"), stdout);
	(void)printf("reports: %s\n", out.path);
	run_folder_close(&out);
	return code;
}

int verb_report(int argc, char **argv)
{
	struct report_options options = {0};
	struct err err = {0};
	if (options_parse(argc, argv, ROWS, sizeof ROWS / sizeof ROWS[0], take, &options, &err) < 0)
		return session_exit_of(&err);
	if (options.help) {
		help();
		return 0;
	}
	if (!options.folder || (!options.verify && !options.out)) {
		(void)fprintf(stderr, "drivetrial report: %s; see 'drivetrial report --help'\n",
		              options.folder ? "--out is missing" : "no run folder is given");
		return EXIT_USAGE;
	}
	bool sealed;
	if (options.verify)
		return verify(options.folder, &sealed, true);
	char hash[80] = "", sums[1100];
	(void)snprintf(sums, sizeof sums, "%s/SHA256SUMS", options.folder);
	if (access(sums, F_OK) == 0) {
		int code = verify(options.folder, &sealed, false);
		if (code != 0) {
			(void)fprintf(stderr,
			              "drivetrial: %s is not as it was sealed: no report is made from it\n",
			              options.folder);
			return code;
		}
		if (run_folder_hash(options.folder, "SHA256SUMS", hash, sizeof hash, &err) < 0)
			return session_exit_of(&err);
	}
	struct rebuilding *r = calloc(1, sizeof *r);
	if (!r)
		return EXIT_INTERNAL;
	arena_init(&r->arena, 0);
	int code = rebuild(r, &options, hash);
	recording_release(&r->recording);
	arena_release(&r->arena);
	free(r);
	return code;
}
