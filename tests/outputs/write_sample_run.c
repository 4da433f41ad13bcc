/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Writes the folder of a run made by hand (tests/unit/reports/synthetic.h), so
 * that programs in other languages can look at it: write_sample_run DIR TEXT.
 * The name of each test ends in TEXT's first 60 bytes, and every title, reason
 * and identity is TEXT, byte for byte.
 */
#include <stdio.h>
#include <string.h>

#include "synthetic.h"

static int write_run(const char *path, const char *text, struct err *err)
{
	static struct synthetic made;
	struct run_folder folder;
	char name[61];
	(void)snprintf(name, sizeof name, "%.60s", text);
	synthetic_make(&made, name, text);
	if (run_folder_new(path, "", "bench", &folder, err) < 0)
		return -1;
	int rc = synthetic_record(&made, &folder, err);
	rc |= reports_write(&made.run, &folder, err);
	rc |= run_folder_write(&folder, "rig.yaml", "rig: invented\n", 14, err);
	rc |= run_folder_seal(&folder, err);
	run_folder_close(&folder);
	synthetic_release(&made);
	return rc;
}

int main(int argc, char **argv)
{
	struct err err = {0};
	if (argc != 3) {
		(void)fputs("usage: write_sample_run DIR TEXT\n", stderr);
		return 64;
	}
	if (write_run(argv[1], argv[2], &err) < 0) {
		(void)fprintf(stderr, "%s: %s\n", err.file, err.message);
		return 73;
	}
	return 0;
}
