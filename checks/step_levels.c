/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The levels of a step response: which rows belong to them, what their means
 * are worth, whether they are steady, and what was commanded.
 *
 * Steadiness is the bound of a fitted line's drift, with the standard error
 * widened by autocorrelation: it proves that a drift is small, where a test
 * for "no significant slope" would call every short noisy stretch steady.
 */
#include <stdio.h>

#include "check.h"
#include "step_work.h"

enum { FINAL_ROWS_LEAST = 5, INITIAL_ROWS_LEAST = 3 };

/* The rows before the mark, between, and of the last part. False: too few; work->why says which. */
bool step_split(struct step_work *work)
{
	const struct step_response *params = work->params;
	const struct rows *rows = &work->rows;
	size_t count = 0;
	while (count < rows->count &&
	       series_latest(&rows->series, rows->first + count) <= work->mark->earliest_ns)
		count++;
	work->initial_count = count;
	double initial_ms = (double)params->initial_ns / 1e6;
	if (count < INITIAL_ROWS_LEAST) {
		(void)snprintf(
		    work->why, sizeof work->why,
		    "only %zu samples of %s in the stimulus before the mark %s: hold %.4g ms before it",
		    count, work->channel->name, work->mark->name, initial_ms);
		return false;
	}
	int64_t to = rows->span.to_ns, judged = to - work->mark->latest_ns;
	int64_t part = params->final_ns > 0 ? params->final_ns : judged / 5;
	size_t begin = rows->count;
	while (begin > count && series_earliest(&rows->series, rows->first + begin - 1) >= to - part)
		begin--;
	work->final_begin = begin;
	if (rows->count - begin < FINAL_ROWS_LEAST) {
		(void)snprintf(work->why, sizeof work->why,
		               "only %zu samples of %s in the last %.4g ms: sample faster or hold longer",
		               rows->count - begin, work->channel->name, (double)part / 1e6);
		return false;
	}
	return true;
}

/* What is known of a mean over a steady stretch. */
static void mean_budget(const struct step_work *work, const struct steadiness *steady,
                        struct budget *ret_budget)
{
	*ret_budget = (struct budget){0};
	double nu = steady->independent - 1;
	budget_random(ret_budget, steady->noise / sqrt(steady->independent), nu);
	/* A drift that noise does not explain: the value may go on by as much. */
	double square = steady->drift * steady->drift - steady->drift_se * steady->drift_se;
	budget_other(ret_budget, square > 0 ? sqrt(square / 3) : 0);
	budget_other(ret_budget, rounding_bias(work->channel->resolution, steady->noise) / sqrt(3));
}

double step_rated(const struct machine *machine, const struct channel_info *channel)
{
	const struct dimension dimension = channel->unit->dimension;
	double value = (double)NAN;
	if (dimension_agrees(dimension, DIM_SPEED_MECH))
		value = machine->rated_speed.value;
	else if (dimension_agrees(dimension, DIM_TORQUE))
		value = machine->rated_torque.value;
	else if (dimension_agrees(dimension, DIM_CURRENT_AMPLITUDE))
		value = machine->rated_current.value;
	else if (dimension_agrees(dimension, DIM_VOLTAGE))
		value = machine->dc_voltage.value;
	return value / channel->unit->scale;
}

enum { EXTENT_ROWS = 256 };

/* For long recordings; without memory for it searches look at every row. */
static void find_extents(struct step_work *work, struct extents *ret)
{
	const struct rows *rows = &work->rows;
	size_t blocks = (rows->count + EXTENT_ROWS - 1) / EXTENT_ROWS;
	*ret = (struct extents){0};
	if (rows->count < 16 * EXTENT_ROWS)
		return;
	double *least = arena_array(work->in->scratch, blocks, sizeof *least);
	double *most = arena_array(work->in->scratch, blocks, sizeof *most);
	if (!least || !most)
		return;
	for (size_t b = 0; b < blocks; b++) {
		size_t begin = b * EXTENT_ROWS, end = begin + EXTENT_ROWS;
		end = end < rows->count ? end : rows->count;
		double low = series_value(&rows->series, rows->first + begin), high = low;
		for (size_t i = begin + 1; i < end; i++) {
			double value = series_value(&rows->series, rows->first + i);
			low = value < low ? value : low;
			high = value > high ? value : high;
		}
		least[b] = low;
		most[b] = high;
	}
	*ret = (struct extents){least, most, EXTENT_ROWS, blocks};
}

/* Levels, step and noise, from stretches that may still prove unsteady. */
bool step_levels(struct step_work *work)
{
	const struct rows *rows = &work->rows;
	double resolution = work->channel->resolution;
	struct stretch before = rows_stretch(rows, 0, work->initial_count, work->origin_ns);
	struct stretch after = rows_stretch(rows, work->final_begin, rows->count, work->origin_ns);
	if (!steadiness_of(&before, resolution, &work->initial) ||
	    !steadiness_of(&after, resolution, &work->final)) {
		(void)snprintf(work->why, sizeof work->why, "the samples of %s all bear the same time",
		               work->channel->name);
		return false;
	}
	mean_budget(work, &work->initial, &work->initial_budget);
	mean_budget(work, &work->final, &work->final_budget);
	struct response *response = &work->response;
	double initial_limit = rows_error_limit(rows, 0, work->initial_count);
	work->final_limit = rows_error_limit(rows, work->final_begin, rows->count);
	struct budget initial = work->initial_budget, final = work->final_budget;
	budget_other(&initial, initial_limit / sqrt(3));
	budget_other(&final, work->final_limit / sqrt(3));
	double step = work->final.line.mean_y - work->initial.line.mean_y;
	const struct steadiness *noisier =
	    work->initial.noise > work->final.noise ? &work->initial : &work->final;
	double rounding = resolution / sqrt(12);
	bool rounded = noisier->noise < rounding;
	*response = (struct response){
	    .rows = rows_stretch(rows, 0, rows->count, work->origin_ns),
	    .mark_half = (double)(work->mark->latest_ns - work->mark->earliest_ns) / 2e9,
	    .direction = step > 0 ? 1 : -1,
	    .initial = work->initial.line.mean_y,
	    .initial_u = budget_expanded(&initial) / 2,
	    .final = work->final.line.mean_y,
	    .final_u = budget_expanded(&final) / 2,
	    .noise = rounded ? rounding : noisier->noise,
	    .nu = rounded ? (double)INFINITY : noisier->independent - 1,
	    .independent = noisier->independent / (double)noisier->line.n,
	    .resolution = resolution,
	    .hundred = work->params->percent_of == OF_RATED
	                   ? step_rated(work->in->machine, work->channel)
	                   : fabs(step),
	    .of_step = work->params->percent_of != OF_RATED,
	    .error_limit = fmax(initial_limit, work->final_limit),
	    .gap_most = rows_gap_limit(work->in, rows),
	};
	if (!(response->hundred >= 0)) {
		(void)snprintf(work->why, sizeof work->why,
		               "percent_of: rated, but the machine has no rated value for %s",
		               work->channel->name);
		return false;
	}
	find_extents(work, &response->extents);
	response_pace(response);
	return true;
}

/* The commanded value in the channel's unit; false with work->why. */
bool step_commanded(struct step_work *work, double *ret_value)
{
	const struct check_input *in = work->in;
	const struct command *found = NULL;
	for (size_t i = 0; i < in->command_count; i++) {
		const struct command *command = &in->commands[i];
		if (command->earliest_ns > work->mark->latest_ns)
			continue;
		bool at_mark = command->latest_ns >= work->mark->earliest_ns;
		bool fits = dimension_agrees(in->channels[command->channel].unit->dimension,
		                             work->channel->unit->dimension);
		if (work->params->command >= 0 ? command->channel == work->params->command
		                               : at_mark && fits)
			found = command;
	}
	if (!found) {
		(void)snprintf(work->why, sizeof work->why,
		               "no command in the unit of %s is made at the mark %s: say command",
		               work->channel->name, work->mark->name);
		return false;
	}
	*ret_value =
	    found->value * in->channels[found->channel].unit->scale / work->channel->unit->scale;
	return true;
}

/* Whether the values moved by more than noise and errors explain; else work->why says so. */
bool step_moved(struct step_work *work)
{
	const struct response *response = &work->response;
	double step = fabs(response->final - response->initial);
	double doubt = 2 * hypot(response->initial_u, response->final_u);
	if (step > 3 * doubt && step > 6 * response->noise)
		return true;
	(void)snprintf(
	    work->why, sizeof work->why,
	    "no step: %s went from %.4g to %.4g %s, and noise and errors leave +-%.2g in doubt",
	    work->channel->name, response->initial, response->final, work->channel->unit->name,
	    fmax(doubt, 2 * response->noise));
	return false;
}

bool step_steady(struct step_work *work, const struct steadiness *steadiness, const char *which)
{
	/* Where nothing moved, the step that was commanded says what matters. */
	double target, hundred = work->response.hundred;
	if (work->response.of_step && step_commanded(work, &target))
		hundred = fmax(hundred, fabs(target - work->response.initial));
	double tolerance = work->params->band * hundred;
	if (steadiness->bound < tolerance / 4)
		return true;
	(void)snprintf(work->why, sizeof work->why,
	               "the %s value of %s is not proven steady: over %.4g ms it may drift by %.3g %s, "
	               "a quarter of the band (%.3g) would do; hold longer",
	               which, work->channel->name, steadiness->duration * 1e3, steadiness->bound,
	               work->channel->unit->name, tolerance / 4);
	return false;
}
