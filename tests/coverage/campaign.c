/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Whether intervals hold the truth, in how many cases, and whether verdicts on
 * limits near the truth are wrong: a table of all metrics with a closed-form
 * truth. `campaign DRAWS` prints it and ends with 1 where a line is not as
 * demanded: the truth held in at least 95 % (unless chance explains it: binomial
 * test at 99 %), always where bounds are guaranteed; median half-width at most
 * 2.5 times the 95 % quantile of the errors; wrong verdicts at most 2.5 % at
 * every distance (binomial test at 99 %).
 */
#include "tally.h"
#include "tolerance.h"

/* Some metrics have a closed-form truth in a part of the draws only. */
enum { ROUNDS_MOST = 6 };

static bool enough(const struct campaign *campaign, size_t first)
{
	for (size_t i = first; i < campaign->count; i++)
		if (campaign->tallies[i].draws < campaign->draws)
			return false;
	return true;
}

static struct tally *tally_of(struct campaign *campaign, const char *check, const char *metric)
{
	for (size_t i = 0; i < campaign->count; i++)
		if (strcmp(campaign->tallies[i].check, check) == 0 &&
		    strcmp(campaign->tallies[i].metric, metric) == 0)
			return &campaign->tallies[i];
	assert_true(campaign->count < TALLIES);
	struct tally *tally = &campaign->tallies[campaign->count++];
	*tally = (struct tally){.check = check, .metric = metric, .guaranteed = true};
	tally->errors = calloc(ROUNDS_MOST * campaign->draws, sizeof(double));
	tally->widths = calloc(ROUNDS_MOST * campaign->draws, sizeof(double));
	assert_non_null(tally->errors);
	assert_non_null(tally->widths);
	return tally;
}

static void judge_near(struct campaign *campaign, struct tally *tally, const struct metric *metric,
                       double truth)
{
	static const double edges[BINS + 1] = {0, 0.25, 0.5, 1, 1.5, 2.5};
	double distance = random_between(&campaign->random, -2.5, 2.5);
	double limit = truth + distance * tally->scale;
	int bin = 0;
	while (fabs(distance) > edges[bin + 1])
		bin++;
	enum verdict verdict = decided(metric, -(double)INFINITY, limit);
	if (truth > limit) {
		tally->violating[bin]++;
		tally->passed[bin] += verdict == VERDICT_PASS;
	} else {
		tally->conforming[bin]++;
		tally->failed[bin] += verdict == VERDICT_FAIL;
	}
}

void tally_add(struct campaign *campaign, const struct used_check *use, const char *name,
               double truth)
{
	const struct metric *metric = check_metric(use, name);
	struct tally *tally = tally_of(campaign, use->kind->name, name);
	tally->draws++;
	if (isnan(metric->value) || isinf(metric->high) || isinf(metric->low))
		return;
	if (!(metric->low <= metric->value && metric->value <= metric->high))
		fail_msg("%s %s: %g not in [%g, %g]", tally->check, name, metric->value, metric->low,
		         metric->high);
	size_t at = tally->known++;
	double rounding = 1e-9 * (1 + fabs(truth));
	tally->guaranteed = tally->guaranteed && metric->coverage == 1;
	tally->held += metric->low - rounding <= truth && truth <= metric->high + rounding;
	if (tally->guaranteed && !(metric->low - rounding <= truth && truth <= metric->high + rounding))
		fprintf(stderr, "%s %s: truth %.9g not in [%.9g, %.9g]: %s\n", tally->check, name, truth,
		        metric->low, metric->high, metric->note);
	tally->errors[at] = fabs(metric->value - truth);
	tally->widths[at] = (metric->high - metric->low) / 2;
	if (tally->scale > 0)
		judge_near(campaign, tally, metric, truth);
	tally->scale += (tally->widths[at] - tally->scale) / (double)tally->known;
}

static int by_size(const void *a, const void *b)
{
	double x = *(const double *)a, y = *(const double *)b;
	return (x > y) - (x < y);
}

/* Whether more than `share` of n is beyond chance. */
static bool surely_more(size_t x, size_t n, double share)
{
	return n > 0 && x > 0 && binomial_at_least(n, x, share) < 0.01;
}

static bool print_tally(struct tally *tally)
{
	qsort(tally->errors, tally->known, sizeof(double), by_size);
	qsort(tally->widths, tally->known, sizeof(double), by_size);
	size_t n = tally->known;
	if (n < tally->draws / 2) {
		printf("%-14s %-22s known in %zu of %zu only\n", tally->check, tally->metric, n,
		       tally->draws);
		return false;
	}
	double half = tally->widths[n / 2], error = tally->errors[(size_t)(0.95 * (double)n)];
	bool good = tally->guaranteed ? tally->held == n : !surely_more(n - tally->held, n, 0.05);
	bool narrow = half <= 2.5 * error || half <= 1e-9;
	double worst_pass = 0, worst_fail = 0;
	bool right = true;
	for (int bin = 0; bin < BINS; bin++) {
		right = right && !surely_more(tally->passed[bin], tally->violating[bin], 0.025) &&
		        !surely_more(tally->failed[bin], tally->conforming[bin], 0.025);
		if (tally->violating[bin])
			worst_pass =
			    fmax(worst_pass, (double)tally->passed[bin] / (double)tally->violating[bin]);
		if (tally->conforming[bin])
			worst_fail =
			    fmax(worst_fail, (double)tally->failed[bin] / (double)tally->conforming[bin]);
	}
	printf("%-14s %-22s %6zu %6zu  %7.3f %% %s %6.2f  %6.2f %%  %6.2f %%%s%s%s\n", tally->check,
	       tally->metric, tally->draws, n, 100 * (double)tally->held / (double)n,
	       tally->guaranteed ? "always" : "95 %  ", error > 0 ? half / error : 0, 100 * worst_pass,
	       100 * worst_fail, good ? "" : "  MISSES", narrow ? "" : "  WIDE",
	       right ? "" : "  WRONG");
	return good && narrow && right;
}

int main(int argc, char **argv)
{
	static struct campaign campaign;
	campaign.draws = argc > 1 ? (size_t)strtoul(argv[1], NULL, 10) : 20000;
	campaign.random.state = argc > 2 ? strtoul(argv[2], NULL, 10) : 1;
	bool good = true;
	printf("%-14s %-22s %6s %6s  %9s %6s %6s  %8s  %8s\n", "check", "metric", "draws", "known",
	       "held", "claim", "width", "passes", "fails");
	printf("(width: median half-width over the 95 %% quantile of the errors; passes, fails: wrong "
	       "ones, at the worst distance)\n");
	for (size_t g = 0; g < generator_count; g++) {
		size_t before = campaign.count;
		for (size_t i = 0; i < ROUNDS_MOST * campaign.draws; i++) {
			if (i >= campaign.draws && enough(&campaign, before))
				break;
			generators[g](&campaign);
		}
		for (size_t i = before; i < campaign.count; i++) {
			good = print_tally(&campaign.tallies[i]) && good;
			free(campaign.tallies[i].errors);
			free(campaign.tallies[i].widths);
		}
		(void)fflush(stdout);
	}
	return good ? 0 : 1;
}
