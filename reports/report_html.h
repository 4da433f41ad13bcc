/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_REPORT_HTML_H
#define DRIVETRIAL_REPORT_HTML_H
/* The parts of report.html. Private to this folder. */
#include "report_text.h"
#include "xml_out.h"

/* reports/report.css, as CMake put it into the program. */
extern const char report_css[];
extern const size_t report_css_length;

/* The root element, left open; and the whole <head>. */
void html_begin(struct xml_out *out);
void html_head(struct xml_out *out, const char *title);
/* What was run: rig, suites, devices, instruments, links. */
void html_identity(struct xml_out *out, const struct run_result *run);
/* Whether a calibration had ended when the run began. */
bool html_out_of_date(const struct run_facts *facts, const struct accuracy *accuracy);
/* What a reader should know before the good news: whatever was not as it should be. */
void html_abnormal(struct xml_out *out, const struct run_result *run);
/* What did not pass, with its reason, and the picture of each of the first of them. */
enum { FAILURE_PLOTS_MOST = 40 };
void html_failures(struct xml_out *out, const struct run_result *run, int chart_columns);
/* Requirement -> tests -> worst verdict. Nothing where no test names one. */
void html_requirements(struct xml_out *out, const struct run_result *run);
/* Margins over the points of each sweep. */
void html_sweeps(struct xml_out *out, const struct run_result *run);
/* Lines for names and dates; the stylesheet shows them in print only. */
void html_sign_off(struct xml_out *out, const struct run_result *run);
/* A name that may be broken after '[' and ','. */
void html_name(struct xml_out *out, const char *name);
/* A link to the section of a test, with its name. */
void html_test_link(struct xml_out *out, size_t suite, size_t test, const char *name);
void html_verdict(struct xml_out *out, const char *element, enum verdict verdict);
/* The table of all tests. */
void html_tests(struct xml_out *out, const struct run_result *run);
/* A section a test; sections of passed tests are cut short where the page grows too large. */
void html_each_test(struct xml_out *out, const struct run_result *run, int chart_columns);

#endif
