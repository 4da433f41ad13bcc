/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_REPORT_H
#define DRIVETRIAL_REPORT_H
/*
 * The outputs of a finished run: each kind one file with one descriptor, one
 * row in the table of report.c.
 */
#include <stdio.h>

#include "judge.h"
#include "run_folder.h"

struct report_kind {
	const char *name; /* "junit" */
	int (*write)(const struct run_result *run, const struct run_folder *folder, struct err *reterr);
};

extern const struct report_kind report_junit, report_html, report_results;

/* All of them, also when one fails (the first error is kept). */
int reports_write(const struct run_result *run, const struct run_folder *folder,
                  struct err *reterr);

/*
 * The summary on a console: one line a test, then the failures, each in at
 * most three lines, then counts. colour: ANSI colours.
 */
void summary_print(const struct run_result *run, bool colour, FILE *out);
/* "rise_time 96.2 ms (94.1 to 98.4), limit at most 120 ms" into buffer. */
const char *metric_text(const struct metric *metric, const struct limit *limit, char *buffer,
                        size_t size);
/* A number with as many digits as its uncertainty supports. */
const char *number_text(double value, double uncertainty, char *buffer, size_t size);

#endif
