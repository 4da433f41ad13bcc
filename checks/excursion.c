/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Overshoot, peak time and swing back.
 *
 * The largest of many noisy samples reads high: with noise of 0.2 % of the
 * step an overshoot of 16.3 % reads as 17.1 %. So the peak is the top of a
 * parabola through rows around it, over a stretch so long that the parabola
 * falls by four standard deviations of the noise at its ends: shorter keeps
 * the noise, longer leaves the parabola. Without noise the largest sample is
 * the value, and the interval reaches up to what may lie between samples.
 * Subtracting an expected maximum was rejected: it needs the number of rows
 * that compete, which is what one does not know.
 */
#include "response.h"

#include <stdio.h>

/* By the closed form 0.78 to 1.45 for a damping of 0.05 to 0.97. */
static const double CURVED = 2;

struct excursion {
	bool found;    /* a parabola stands out of the noise, or there is no noise */
	bool exact;    /* the latter */
	size_t row;    /* index of the middle */
	double height; /* beyond the final value, channel's unit; may be negative */
	double random_u, model_u, rounding_u;
	double competing; /* allowance for having picked the largest of several */
	double above;     /* what may lie between samples, or hide in noise */
	double t, t_low, t_high, t_random_u, t_model_u;
};

struct search {
	const struct response *response;
	size_t begin, end; /* rows */
	int sign;          /* side of the excursion */
	double sigma;      /* of a row, at least that of rounding */
	double shortest;   /* s: nothing in the answer is shorter */
};

static double height(const struct search *search, size_t row)
{
	return search->sign * (stretch_value(&search->response->rows, row) - search->response->final);
}

struct scan {
	size_t half;
	double largest;
	size_t best; /* middle row of the largest mean */
	bool counts; /* second pass: how many means are at least `least` */
	double least;
	size_t rivals;
};

/* All windows of 2 half + 1 rows that lie in [begin, end). */
static void scan_rows(const struct search *search, size_t begin, size_t end, struct scan *scan)
{
	size_t width = 2 * scan->half + 1;
	double n = (double)width, sum = 0;
	for (size_t row = begin; row < end; row++) {
		sum += height(search, row);
		if (row >= begin + width)
			sum -= height(search, row - width);
		if (row + 1 < begin + width)
			continue;
		double mean = sum / n;
		if (scan->counts) {
			scan->rivals += mean >= scan->least;
		} else if (mean > scan->largest) {
			scan->largest = mean;
			scan->best = row - scan->half;
		}
	}
}

/* What no height in a block exceeds. */
static double block_height(const struct search *search, size_t block)
{
	const struct response *response = search->response;
	return search->sign > 0 ? response->extents.most[block] - response->final
	                        : response->final - response->extents.least[block];
}

/*
 * The same, but only around blocks that reach `least`: a mean is no larger than
 * the largest value in it.
 */
static void scan_blocks(const struct search *search, double least, struct scan *scan)
{
	const struct extents *extents = &search->response->extents;
	size_t reach = 2 * scan->half, from = 0, to = 0;
	for (size_t block = search->begin / extents->rows; block * extents->rows < search->end;
	     block++) {
		if (block_height(search, block) < least)
			continue;
		size_t begin = block * extents->rows, end = begin + extents->rows + reach;
		begin = begin > search->begin + reach ? begin - reach : search->begin;
		end = end < search->end ? end : search->end;
		if (begin > to || from == to) {
			scan_rows(search, from, to, scan);
			from = begin;
		}
		to = end;
	}
	scan_rows(search, from, to, scan);
}

/* The neighbourhood of the block that reaches highest: a lower bound of the largest mean. */
static void scan_highest(const struct search *search, struct scan *scan)
{
	const struct extents *extents = &search->response->extents;
	size_t highest = search->begin / extents->rows;
	for (size_t block = highest; block * extents->rows < search->end; block++)
		if (block_height(search, block) > block_height(search, highest))
			highest = block;
	size_t reach = 2 * scan->half, begin = highest * extents->rows;
	size_t end = begin + extents->rows + reach;
	begin = begin > search->begin + reach ? begin - reach : search->begin;
	scan_rows(search, begin, end < search->end ? end : search->end, scan);
}

/* Row with the largest mean of 2 half + 1 rows, that mean, and how many are near it. */
static size_t largest_mean(const struct search *search, size_t half, double near, double *ret_mean,
                           double *ret_rivals)
{
	bool blocks = search->response->extents.blocks > 0;
	struct scan scan = {.half = half, .largest = -(double)INFINITY, .best = search->begin};
	if (blocks) {
		scan_highest(search, &scan);
		scan_blocks(search, scan.largest, &scan);
	} else {
		scan_rows(search, search->begin, search->end, &scan);
	}
	scan.counts = true;
	scan.least = scan.largest - near;
	if (blocks)
		scan_blocks(search, scan.least, &scan);
	else
		scan_rows(search, search->begin, search->end, &scan);
	*ret_rivals = (double)scan.rivals / (double)(2 * half + 1);
	*ret_mean = scan.largest;
	return scan.best;
}

/* The row of the largest value; of several that are equal the middle one. */
static size_t largest_row(const struct search *search, double *ret_height)
{
	size_t best = search->begin, ties = 0;
	double largest = -(double)INFINITY;
	for (size_t row = search->begin; row < search->end; row++) {
		double here = height(search, row);
		if (here > largest) {
			largest = here;
			best = row;
			ties = 0;
		}
		ties += here == largest;
	}
	*ret_height = largest;
	return ties > 1 && height(search, best + ties / 2) == largest ? best + ties / 2 : best;
}

/* Without noise: the largest sample; a parabola says how much may lie beside it. */
static void without_noise(const struct search *search, struct excursion *ret)
{
	const struct stretch *rows = &search->response->rows;
	size_t row = largest_row(search, &ret->height);
	ret->found = ret->exact = true;
	ret->row = row;
	ret->t = stretch_time(rows, row);
	ret->t_low = ret->t - stretch_time_u(rows, row) * sqrt(3);
	ret->t_high = ret->t + stretch_time_u(rows, row) * sqrt(3);
	if (row == search->begin || row + 1 >= search->end)
		return;
	ret->t_low = stretch_time(rows, row - 1) - stretch_time_u(rows, row - 1) * sqrt(3);
	ret->t_high = stretch_time(rows, row + 1) + stretch_time_u(rows, row + 1) * sqrt(3);
	struct stretch three = *rows;
	three.first += row - 1;
	three.count = 3;
	struct parabola parabola;
	if (!parabola_fit(&three, &parabola) || !(search->sign * parabola.c < 0))
		return;
	double sd, top = parabola_value(&parabola, -parabola.b / (2 * parabola.c), &sd);
	double beyond = search->sign * (top - search->response->final) - ret->height;
	ret->above = beyond > 0 ? 2 * beyond : 0; /* twice: the answer is not quite a parabola */
}

/* One width of stretch: true where its parabola is deep enough. */
static bool try_width(const struct search *search, size_t half, struct excursion *ret)
{
	const struct response *response = search->response;
	double mean, rivals, share = response->independent > 0 ? response->independent : 1;
	double rows_in = (double)(2 * half + 1) * share;
	double mean_sd = search->sigma / sqrt(rows_in > 1 ? rows_in : 1);
	size_t row = largest_mean(search, half, 4 * mean_sd, &mean, &rivals);
	struct stretch part = response->rows;
	part.first += row - half;
	part.count = 2 * half + 1;
	struct parabola parabola;
	*ret = (struct excursion){.row = row, .height = mean, .random_u = mean_sd};
	ret->competing = rivals > 1 ? mean_sd * sqrt(2 * log(rivals)) : 0;
	if (!parabola_fit(&part, &parabola))
		return false;
	double depth = -search->sign * parabola.c;
	double top = -parabola.b / (2 * parabola.c);
	if (!(depth >= 4 * search->sigma) || !(fabs(top) <= 1))
		return false;
	/* A row's doubt in time is one in value where the parabola falls (mean slope about 1.2 depth).
	 */
	double time_u = stretch_time_u(&part, half) * 1.2 * depth / parabola.reach;
	double row_sd = hypot(search->sigma, time_u);
	double sd, c2 = 4 * parabola.c * parabola.c, widen = 1 / sqrt(share);
	ret->found = true;
	ret->height = search->sign * (parabola_value(&parabola, top, &sd) - response->final);
	ret->random_u = row_sd * sd * widen;
	ret->competing = rivals > 1 ? ret->random_u * sqrt(2 * log(rivals)) : 0;
	ret->t = parabola.centre + parabola.reach * top;
	double variance = (parabola.inverse[1][1] + 4 * top * parabola.inverse[1][2] +
	                   4 * top * top * parabola.inverse[2][2]) /
	                  c2;
	ret->t_random_u = row_sd * widen * parabola.reach * sqrt(variance > 0 ? variance : 0);
	/*
	 * A damped oscillation is no parabola. Near a peak of height A its third
	 * derivative is -2 decay times the second, and the decay of a second-order
	 * answer is ln(step/A) / t. The odd part moves the top by decay reach^2/3
	 * at most and its height by 0.26 decay reach depth; the fourth order lifts
	 * it by 3/35 depth^2/(6 A). All as limits of error.
	 */
	double tall = fmax(ret->height, depth);
	double step = fabs(response->final - response->initial);
	double decay = ret->t > 0 ? fmax(log(step / tall), 0.5) / ret->t : 0;
	double odd = 0.26 * decay * parabola.reach * depth, even = depth * depth / (60 * tall);
	ret->model_u = hypot(odd, even) / sqrt(3);
	ret->t_model_u = decay * parabola.reach * parabola.reach / 3 / sqrt(3);
	ret->rounding_u = rounding_bias(response->resolution, response->noise) / sqrt(3) /
	                  sqrt(1 + depth / fmax(response->resolution, 1e-300));
	ret->t_low = stretch_time(&part, 0);
	ret->t_high = stretch_time(&part, part.count - 1);
	return true;
}

static void find(const struct search *search, struct excursion *ret)
{
	*ret = (struct excursion){0};
	size_t count = search->end - search->begin;
	const struct stretch *rows = &search->response->rows;
	/* Rounding of the arithmetic is no noise. */
	double step = fabs(search->response->final - search->response->initial);
	if (search->sigma <= 1e-9 * step || count < 3) {
		without_noise(search, ret);
		return;
	}
	double interval = (stretch_time(rows, search->end - 1) - stretch_time(rows, search->begin)) /
	                  (double)(count - 1);
	double highest = -(double)INFINITY;
	for (size_t half = 1; 2 * half + 1 <= count && half <= count / 3; half += (half + 1) / 2) {
		if (try_width(search, half, ret))
			return;
		if ((double)half * interval >= search->shortest)
			highest = fmax(highest, ret->height + 2 * ret->random_u);
	}
	if (highest > ret->height)
		ret->above = highest - ret->height;
	/* A peak of a sample or two: no wider stretch stands out, but the sample itself does. */
	struct excursion narrow = {0};
	without_noise(search, &narrow);
	double picked = search->sigma * sqrt(2 * log((double)count));
	if (narrow.height - picked <= fmax(ret->height, 3 * search->sigma))
		return;
	*ret = narrow;
	ret->random_u = search->sigma;
	ret->competing = picked;
}

/*
 * How far a peak may stand out unseen, where samples are missing on the way:
 * a chord over a gap g lies at most -y'' g^2 / 8 below the answer, and -y'' of
 * a second-order answer is at most CURVED steps a rise time (10 to 90 %)
 * squared, whatever its damping. *ret_gap: the widest gap, s.
 */
static double hidden_height(const struct response *response, double *ret_gap)
{
	const struct stretch *rows = &response->rows;
	double widest = 0;
	for (size_t row = 0; row + 1 < rows->count; row++) {
		size_t at = rows->first + row;
		int64_t gap = series_received(rows->series, at + 1) - series_received(rows->series, at);
		if (stretch_time(rows, row) > response->busy_until)
			break;
		if (stretch_time(rows, row + 1) > 0 && gap > response->gap_most)
			widest = fmax(widest, (double)gap / 1e9);
	}
	*ret_gap = widest;
	double share = widest > 0 ? widest / response->rise : 0;
	return CURVED / 8 * share * share * fabs(response->final - response->initial);
}

static void percent(const struct response *response, const struct excursion *excursion,
                    struct measured *ret)
{
	double share = response->of_step ? excursion->height / response->hundred : 0;
	struct budget budget = {0};
	budget_random(&budget, excursion->random_u, response->nu);
	budget_other(&budget, excursion->model_u);
	budget_other(&budget, excursion->rounding_u);
	budget_other(&budget, response->error_limit / sqrt(3));
	budget_other(&budget, (1 + share) * response->final_u);
	budget_other(&budget, share * response->initial_u);
	double expanded = budget_expanded(&budget);
	double scale = 100 / response->hundred;
	ret->known = true;
	ret->coverage = 0.95;
	ret->low = fmax(0, scale * (excursion->height - expanded - excursion->competing));
	ret->high = fmax(0, scale * (excursion->height + expanded + excursion->above));
	ret->value = fmin(fmax(scale * excursion->height, ret->low), ret->high);
	ret->at_low = excursion->t_low;
	ret->at_high = excursion->t_high;
}

static void peak_time(const struct response *response, const struct excursion *peak,
                      const struct measured *over, struct measured *ret)
{
	*ret = (struct measured){.level = over->level};
	if (!peak->found || !(over->low > 0)) {
		(void)snprintf(ret->why, sizeof ret->why,
		               "no peak beyond the final value stands out of the noise");
		return;
	}
	struct budget budget = {0};
	budget_random(&budget, peak->t_random_u, response->nu);
	budget_other(&budget, peak->t_model_u);
	budget_other(&budget, stretch_time_u(&response->rows, peak->row));
	budget_other(&budget, response->mark_half / sqrt(3));
	double expanded = budget_expanded(&budget), half = response->mark_half;
	bool exact = peak->exact;
	double low = exact ? peak->t_low - half : fmax(peak->t_low - half, peak->t - expanded);
	double high = exact ? peak->t_high + half : fmin(peak->t_high + half, peak->t + expanded);
	ret->known = true;
	ret->value = peak->t;
	ret->low = fmax(0, low);
	ret->high = high;
	ret->coverage = 0.95;
	ret->at_low = peak->t_low;
	ret->at_high = peak->t_high;
}

static void excursion_level(const struct response *response, const struct excursion *excursion,
                            int sign, struct measured *ret)
{
	*ret = (struct measured){.level = response->final + sign * excursion->height};
	percent(response, excursion, ret);
}

void response_peak(const struct response *response, struct measured *ret_over,
                   struct measured *ret_time, struct measured *ret_under)
{
	*ret_over = *ret_time = *ret_under = (struct measured){0};
	double step = response->final - response->initial;
	struct crossing_query query = {
	    .rows = response->rows,
	    .level = response->initial + step / 2,
	    .direction = response->direction,
	    .sure = 3 * response->noise,
	};
	struct crossing half;
	crossing_first(&query, &half);
	if (!half.found) {
		(void)snprintf(ret_over->why, sizeof ret_over->why,
		               "no passage of half of the step stands out of the noise");
		*ret_time = *ret_under = *ret_over;
		return;
	}
	double rounding = response->resolution / sqrt(12);
	struct search search = {
	    .response = response,
	    .begin = half.after,
	    .end = response->rows.count,
	    .sign = response->direction,
	    .sigma = fmax(response->noise, rounding),
	    .shortest = fmax(half.value, 0) / 10,
	};
	struct excursion peak, back;
	double gap, hidden = hidden_height(response, &gap);
	find(&search, &peak);
	peak.above += hidden;
	if (hidden > 0) {
		/* A parabola across a gap may stand higher than the answer: a sample does not. */
		struct excursion sample = {0};
		without_noise(&search, &sample);
		peak.competing += fmax(0, peak.height - sample.height);
	}
	excursion_level(response, &peak, search.sign, ret_over);
	if (hidden > 0)
		(void)snprintf(ret_time->why, sizeof ret_time->why,
		               "no sample for %.3f ms, where the peak may lie", gap * 1e3);
	else
		peak_time(response, &peak, ret_over, ret_time);
	search.begin = peak.row;
	search.sign = -search.sign;
	find(&search, &back);
	back.above += hidden;
	excursion_level(response, &back, search.sign, ret_under);
	if (hidden > 0)
		(void)snprintf(ret_over->why, sizeof ret_over->why,
		               "widened by what may lie in %.3f ms without a sample", gap * 1e3);
}

void response_excursion(const struct response *response, size_t begin, size_t end, int sign,
                        double shortest, struct measured *ret_height, struct measured *ret_time)
{
	*ret_height = *ret_time = (struct measured){0};
	struct search search = {
	    .response = response,
	    .begin = begin,
	    .end = end,
	    .sign = sign,
	    .sigma = fmax(response->noise, response->resolution / sqrt(12)),
	    .shortest = shortest,
	};
	struct excursion excursion;
	find(&search, &excursion);
	excursion_level(response, &excursion, sign, ret_height);
	peak_time(response, &excursion, ret_height, ret_time);
}
