/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_FAULT_WORK_H
#define DRIVETRIAL_FAULT_WORK_H
/*
 * What fault_reaction.c (seen, and torque off) and fault_states.c (held,
 * refused, cleared) share: the fields of the check, its metrics, and what is
 * known of one fault.
 */
#include "event.h"

struct fault_reaction {
	int from, indication, torque, gone, restart, reset, again, running;
	double code, torque_below;
	int64_t torque_for_ns;
};

enum {
	DETECTION_TIME,
	CODE_RIGHT,
	TORQUE_OFF_TIME,
	STAYS_LATCHED,
	RESTART_REFUSED,
	RESET_CLEARS,
	RESTARTS_CLEAN,
	FAULT_METRICS,
};

extern const struct metric_kind fault_metrics[FAULT_METRICS];

struct fault_work {
	const struct check_input *in;
	const struct fault_reaction *params;
	struct metric *metrics;
	struct err *reterr;
	const struct mark *from, *gone, *restart, *reset, *again; /* NULL: not given or not reached */
	struct rows indication;
	double idle;   /* what the indication showed before the cause */
	double raised; /* what it changed to; NaN: nothing */
	struct latency detection;
};

/* Fill a metric of work->metrics. */
void fault_unknown(struct fault_work *work, size_t metric, const char *why);
void fault_answer(struct fault_work *work, size_t metric, bool yes, const char *note);
enum evidence fault_evidence(const struct fault_work *work, size_t metric);
/* "encoder_loss (3)" or "3" in buffer, which is returned. */
const char *fault_code_text(const struct fault_work *work, double code, char *buffer, size_t size);

/* Each fills its metric; -1 with work->reterr where memory ran out. */
void fault_stays_latched(struct fault_work *work);
int fault_restart_refused(struct fault_work *work);
int fault_reset_clears(struct fault_work *work);
int fault_restarts_clean(struct fault_work *work);

#endif
