/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_STEP_WORK_H
#define DRIVETRIAL_STEP_WORK_H
/*
 * What step_response.c and step_levels.c share: the fields of the check, and
 * what is found out of one step on the way. Each function that returns false
 * has said in `why` what is wrong and what to do.
 */
#include "response.h"
#include "window.h"

enum { OF_STEP, OF_RATED };

struct step_response {
	int channel, from, command, percent_of;
	int64_t for_ns, initial_ns, final_ns;
	double rise_from, rise_to, dead_level, band;
};

struct step_work {
	const struct check_input *in;
	const struct step_response *params;
	const struct channel_info *channel;
	struct metric *metrics;
	struct rows rows;
	size_t initial_count, final_begin;
	int64_t origin_ns;
	const struct mark *mark;
	struct steadiness initial, final;
	double final_limit; /* limits of error of the final value */
	struct budget final_budget, initial_budget;
	struct response response;
	char why[224];
};

/* Which rows lie before the mark, and which are of the last part. False: too few. */
bool step_split(struct step_work *work);
/* Levels, step and noise, which may still prove unsteady; fills work->response. */
bool step_levels(struct step_work *work);
/* Whether the values moved by more than noise and errors explain. */
bool step_moved(struct step_work *work);
/* Whether a level surely drifts by less than a quarter of the band; which: "initial", "final". */
bool step_steady(struct step_work *work, const struct steadiness *steadiness, const char *which);
/* The commanded value, in the channel's unit. */
bool step_commanded(struct step_work *work, double *ret_value);
/* The nameplate's rated value for a channel's dimension, in its unit; NaN: there is none. */
double step_rated(const struct machine *machine, const struct channel_info *channel);

#endif
