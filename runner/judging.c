/* SPDX-License-Identifier: Apache-2.0 */
/* One loop over suites and tests; what judging means is in suites/judge.h. */
#include "judging.h"

int judge_recording(const struct rig *rig, const struct suite *const *suites, size_t suite_count,
                    const struct recording *recording, struct arena *arena,
                    struct run_result *ret_run, struct err *reterr)
{
	*ret_run = (struct run_result){.facts = recording->facts, .suite_count = suite_count};
	ret_run->suites = arena_array(arena, suite_count, sizeof *ret_run->suites);
	if (!ret_run->suites)
		return err_set(reterr, ERR_NOMEM, "no memory for the verdicts");
	for (size_t s = 0; s < suite_count; s++) {
		struct suite_result *result = &ret_run->suites[s];
		result->suite = suites[s];
		result->test_count = suites[s]->test_count;
		result->tests = arena_array(arena, result->test_count, sizeof *result->tests);
		if (!result->tests)
			return err_set(reterr, ERR_NOMEM, "no memory for the verdicts");
		for (size_t t = 0; t < result->test_count; t++)
			if (judge_test(rig, suites[s], &suites[s]->tests[t], recording->tests[s][t], arena,
			               &result->tests[t], reterr) < 0)
				return -1;
	}
	judge_totals(ret_run);
	return 0;
}
