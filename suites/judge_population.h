/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_JUDGE_POPULATION_H
#define DRIVETRIAL_JUDGE_POPULATION_H
/*
 * Verdicts over all repeats of a test, for judge.c. The cases of a population
 * stand side by side in the suite. Pure.
 */
#include "judge.h"

enum { POPULATION_LEAST = 3 };

/* Replaces the verdicts of all tests that belong to a population by those of the whole. */
void judge_populations(struct suite_result *suite);
/* judge.c: verdict and reason of a test out of the verdicts of its limits. */
void judge_conclude(struct test_result *result);

#endif
