/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_VERBS_H
#define DRIVETRIAL_VERBS_H
/*
 * One file per verb, one row each in the table of main.c. argv[0] is the
 * verb's own name. Each returns the exit code of the program.
 */
int verb_run(int argc, char **argv);
int verb_rehearse(int argc, char **argv);
int verb_plan(int argc, char **argv);
int verb_survey(int argc, char **argv);
int verb_schema(int argc, char **argv);
int verb_help(int argc, char **argv);
int verb_serve(int argc, char **argv);
int verb_report(int argc, char **argv);
int verb_compare(int argc, char **argv);

#endif
