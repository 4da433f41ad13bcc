/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_REPORT_HTML_H
#define DRIVETRIAL_REPORT_HTML_H
/* The parts of report.html. Private to this folder. */
#include "report_text.h"
#include "xml_out.h"

/* reports/report.css, as CMake put it into the program. */
extern const char report_css[];
extern const size_t report_css_length;

/* What was run: rig, suites, devices, instruments, links. */
void html_identity(struct xml_out *out, const struct run_result *run);
/* Whether a calibration had ended when the run began. */
bool html_out_of_date(const struct run_facts *facts, const struct accuracy *accuracy);
/* What did not pass, with its reason. Nothing where all passed. */
void html_failures(struct xml_out *out, const struct run_result *run);
/* The table of all tests. */
void html_tests(struct xml_out *out, const struct run_result *run);
/* A section a test; sections of passed tests are cut short where the page grows too large. */
void html_each_test(struct xml_out *out, const struct run_result *run, int chart_columns);

#endif
