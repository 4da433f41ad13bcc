/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Any bytes as a recorded run. Input: the journal, and before what lies in
 * each samples file the line SAMPLES. A recording that is taken can be judged; one that
 * is not is refused by name.
 */
#include <fcntl.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#include "fuzz.h"
#include "recording.h"

#define RIG   SOURCE_DIR "/tests/fuzz/recording/rig.yaml"
#define SUITE SOURCE_DIR "/tests/fuzz/recording/suite.yaml"
#define MARK  "\nSAMPLES\n"

/* One of each file that the runs of the corpus name. */
static const char *const FILES[] = {"samples/STP-01.0.npy", "samples/STP-01.1.npy",
                                    "samples/STP-01.2.npy"};
static char folder[64];

static void remove_folder(void)
{
	char path[128];
	for (size_t i = 0; i < sizeof FILES / sizeof FILES[0]; i++) {
		(void)snprintf(path, sizeof path, "%s/%s", folder, FILES[i]);
		(void)unlink(path);
	}
	(void)snprintf(path, sizeof path, "%s/journal.jsonl", folder);
	(void)unlink(path);
	(void)snprintf(path, sizeof path, "%s/samples", folder);
	(void)rmdir(path);
	(void)rmdir(folder);
}

static void make_folder(void)
{
	char path[128];
	const char *base = access("/dev/shm", W_OK) == 0 ? "/dev/shm" : "/tmp";
	(void)snprintf(folder, sizeof folder, "%s/drivetrial-fuzz-XXXXXX", base);
	demand(mkdtemp(folder));
	(void)snprintf(path, sizeof path, "%s/samples", folder);
	demand(mkdir(path, 0700) == 0);
	(void)atexit(remove_folder);
}

static void put(const char *name, const uint8_t *data, size_t size)
{
	char path[128];
	(void)snprintf(path, sizeof path, "%s/%s", folder, name);
	int fd = open(path, O_WRONLY | O_CREAT | O_TRUNC | O_CLOEXEC, 0600);
	demand(fd >= 0);
	demand(write(fd, data, size) == (ssize_t)size);
	(void)close(fd);
}

/* Length of what comes before the next mark (its line end kept); *data goes behind the mark. */
static size_t part(const uint8_t **data, size_t *size)
{
	const size_t mark = sizeof MARK - 1;
	const uint8_t *begin = *data;
	const uint8_t *split = *size >= mark ? memmem(begin, *size, MARK, mark) : NULL;
	size_t length = split ? (size_t)(split - begin) + 1 : *size;
	size_t taken = split ? length - 1 + mark : *size;
	*data += taken;
	*size -= taken;
	return length;
}

static struct suite *load_suite(const struct rig *rig)
{
	static struct arena arena;
	static struct suite *suite;
	struct faults faults = {0};
	struct err err = {0};
	if (suite)
		return suite;
	arena_init(&arena, 0);
	demand(suite_load(SUITE, rig, NULL, 0, &arena, &faults, &suite, &err) == 0 && suite);
	return suite;
}

static void demand_refusal(const struct err *err)
{
	demand(err->code == ERR_FILE || err->code == ERR_NOMEM);
	demand(err->message[0] != '\0');
	demand(err->code == ERR_NOMEM || err->file[0] != '\0');
	fuzz_readable(err->message);
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
	const struct rig *rig = fuzz_rig(RIG);
	const struct suite *const suites[] = {load_suite(rig)};
	struct recording_head head = {0};
	struct recording recording = {0};
	struct arena arena;
	struct err err = {0};
	if (!folder[0])
		make_folder();
	const uint8_t *journal = data;
	put("journal.jsonl", journal, part(&data, &size));
	for (size_t i = 0; i < sizeof FILES / sizeof FILES[0]; i++) {
		const uint8_t *begin = data;
		put(FILES[i], begin, part(&data, &size));
	}
	arena_init(&arena, 256 << 20);
	if (recording_head_read(folder, &arena, &head, &err) < 0)
		demand_refusal(&err);
	err = (struct err){0};
	if (recording_open(folder, rig, suites, 1, &arena, &recording, &err) < 0) {
		demand_refusal(&err);
	} else {
		for (size_t t = 0; t < suites[0]->test_count; t++) {
			struct test_result result;
			err = (struct err){0};
			int rc = judge_test(rig, suites[0], &suites[0]->tests[t], recording.tests[0][t], &arena,
			                    &result, &err);
			demand(rc == 0 || err.code == ERR_NOMEM);
			demand(rc < 0 || result.verdict != VERDICT_PASS || recording.tests[0][t]);
			if (rc == 0)
				fuzz_readable(result.reason);
		}
	}
	recording_release(&recording);
	arena_release(&arena);
	return 0;
}
