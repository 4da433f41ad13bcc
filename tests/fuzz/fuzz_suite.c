/* SPDX-License-Identifier: Apache-2.0 */
/* Any bytes as a suite of a fixed rig; no command of a suite that is taken leaves its range. */
#include <unistd.h>

#include "fuzz.h"
#include "judge.h"

#define RIG SOURCE_DIR "/tests/golden/suite-everything/rig.yaml"

static void use_steps(const struct rig *rig, const struct step *steps, size_t count)
{
	for (size_t i = 0; i < count; i++) {
		const struct step *step = &steps[i];
		char text[256];
		fuzz_readable(step_text(step, rig, text, sizeof text));
		if (step->kind != STEP_SET && step->kind != STEP_RAMP)
			continue;
		for (size_t j = 0; j < step->assign_count; j++) {
			const struct rig_channel *channel = &rig->channels[step->assigns[j].channel];
			demand(channel->command);
			demand(step->assigns[j].value >= channel->least);
			demand(step->assigns[j].value <= channel->most);
		}
	}
}

static void use(const struct rig *rig, const struct suite *suite, struct arena *arena)
{
	demand(suite->test_count > 0);
	for (size_t i = 0; i < suite->test_count; i++) {
		struct test_result result;
		struct err err = {0};
		const struct test *test = &suite->tests[i];
		fuzz_readable(test->name);
		use_steps(rig, test->stimulus, test->stimulus_count);
		use_steps(rig, test->restore, test->restore_count);
		/* A memory limit may end it; a verdict without a recording is never "pass". */
		if (judge_test(rig, suite, test, NULL, arena, &result, &err) == 0)
			demand(result.verdict != VERDICT_PASS);
		else
			demand(err.code == ERR_NOMEM);
	}
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
	const struct rig *rig = fuzz_rig(RIG);
	struct arena arena;
	struct faults faults = {0};
	struct err err = {0};
	struct suite *suite = NULL;
	char path[64];
	int fd = fuzz_file(data, size, path, sizeof path);
	arena_init(&arena, 64 << 20);
	int rc = suite_load(path, rig, NULL, 0, &arena, &faults, &suite, &err);
	fuzz_loaded(rc, suite, &faults, &err);
	if (rc == 0 && suite)
		use(rig, suite, &arena);
	arena_release(&arena);
	(void)close(fd);
	return 0;
}
