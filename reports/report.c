/* SPDX-License-Identifier: Apache-2.0 */
/* The table of reports. One that fails does not keep the others from being written. */
#include "report.h"

static const struct report_kind *const KINDS[] = {&report_results, &report_junit, &report_html};

int reports_write(const struct run_result *run, const struct run_folder *folder, struct err *reterr)
{
	int rc = 0;
	for (size_t i = 0; i < sizeof KINDS / sizeof *KINDS; i++)
		if (KINDS[i]->write(run, folder, reterr) < 0)
			rc = -1;
	return rc;
}
