/* SPDX-License-Identifier: Apache-2.0 */
/* Finds the verb. Each verb is a file of its own; the table is also the help. */
#include <stdio.h>
#include <string.h>

#include "session.h"
#include "text.h"
#include "verbs.h"

static const struct verb {
	const char *name, *form, *text;
	int (*run)(int argc, char **argv);
} VERBS[] = {
    {"run", "--rig RIG SUITE...", "drive the bench, judge, write the run folder", verb_run},
    {"rehearse", "--rig RIG SUITE...", "the same on the modelled bench, in virtual time",
     verb_rehearse},
    {"plan", "--rig RIG SUITE...", "touch nothing: how long, how often, which limits can be decided",
     verb_plan},
    {"survey", "--rig RIG", "look at a bench, command nothing: identity, values, times", verb_survey},
    {"schema", "rig|suite|results", "JSON Schema of the files, for editors and programs", verb_schema},
    {"serve", "--rig RIG", "the modelled bench as Modbus servers, in real time", verb_serve},
    {"help", "NAME|reference", "what a check, step, key or unit is", verb_help},
    {"report", "DIR --out NEW", "rebuild every report from a recorded run, or --verify it",
     verb_report},
    {"compare", "OLD NEW [NEWER...]", "put the results of runs side by side: what changed, what got worse",
     verb_compare},
};

enum { VERB_COUNT = sizeof VERBS / sizeof VERBS[0] };

static void usage(FILE *out)
{
	(void)fprintf(
	    out, "drivetrial %s: runs test suites on a drive's dynamometer bench, and judges them\n\n",
	    DRIVETRIAL_VERSION);
	for (size_t i = 0; i < VERB_COUNT; i++)
		(void)fprintf(out, "  drivetrial %-8s %-18s  %s\n", VERBS[i].name, VERBS[i].form,
		              VERBS[i].text);
	(void)fputs("\n`drivetrial VERB --help` shows the options of a verb.\n"
	            "`drivetrial help` NAME explains what may stand in a file.\n"
	            "\n"
	            "Exit codes of run and rehearse, the highest-ranking one that applies, ranked 4, "
	            "3, 1, 2, 0:\n"
	            "   0 all tests pass             64 the command line is wrong\n"
	            "   1 a test failed              65 a file is wrong\n"
	            "   2 inconclusive or error      69 the rig cannot be reached\n"
	            "   3 aborted, bench at rest     73 the output cannot be written\n"
	            "   4 rest could not be confirmed   75 the rig is in use\n"
	            "\n"
	            "This program is no safety function. People near a bench rely on guards, on the\n"
	            "hard-wired emergency stop, and on qualified persons and local codes.\n",
	            out);
}

int main(int argc, char **argv)
{
	if (argc < 2) {
		usage(stderr);
		return EXIT_USAGE;
	}
	if (strcmp(argv[1], "--help") == 0 || strcmp(argv[1], "-h") == 0 ||
	    (strcmp(argv[1], "help") == 0 && argc == 2)) {
		usage(stdout);
		return 0;
	}
	if (strcmp(argv[1], "--version") == 0) {
		(void)printf("drivetrial %s\n", DRIVETRIAL_VERSION);
		return 0;
	}
	const char *names[VERB_COUNT];
	for (size_t i = 0; i < VERB_COUNT; i++) {
		if (strcmp(argv[1], VERBS[i].name) == 0)
			return VERBS[i].run(argc - 1, argv + 1);
		names[i] = VERBS[i].name;
	}
	const char *nearest = text_nearest(argv[1], names, VERB_COUNT);
	(void)fprintf(stderr, "drivetrial: unknown verb '%s'%s%s%s\n", argv[1],
	              nearest ? "; did you mean '" : "; 'drivetrial --help' lists them",
	              nearest ? nearest : "", nearest ? "'?" : "");
	return EXIT_USAGE;
}
