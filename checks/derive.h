/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_DERIVE_H
#define DRIVETRIAL_DERIVE_H
/*
 * Derived channels: quantities computed from others of the same sample, by
 * named kinds in a table. A kind maps up to DERIVE_INPUTS_MOST values (SI) and
 * the nameplate to one value (SI), and says of which dimension it is.
 *
 * Evidence: one self-reported input makes the result self-reported.
 * Uncertainty: derive_series() carries the inputs' limits of error and
 * resolutions through by finite differences (worst case, linear), and where
 * inputs come from different blocks, the skew of the two rows times the rate
 * of change, into series.extra.
 *
 * Own code on purpose: these formulas are what the checks exist for, and they
 * share nothing with rigs/model.
 */
#include "check.h"

enum { DERIVE_INPUTS_MOST = 4 };

struct derive_kind {
	const char *name;                       /* "angle_of" */
	const char *text;                       /* one line with the formula */
	const char *inputs[DERIVE_INPUTS_MOST]; /* keys: "x", "y"; NULL ends */
	size_t required;                        /* how many of them must be given: the first ones */
	/*
	 * Checks the inputs' dimensions (count of them given) and gives that of
	 * the result; -1 with a message where they do not fit.
	 */
	int (*dimension)(const struct dimension *inputs, size_t count, struct dimension *ret,
	                 struct err *reterr);
	/* values: SI, NaN where an optional input is not given. */
	double (*value)(const double *values, const struct machine *machine, double offset);
	bool circular; /* the result is an angle in (-pi, pi] */
};

struct derivation {
	const struct derive_kind *kind;
	int inputs[DERIVE_INPUTS_MOST]; /* channel indices; -1 not given */
	double offset; /* SI, in the result's dimension: subtracted; field `offset` of the rig file */
};

const struct derive_kind *const *derive_table(size_t *ret_count);
const struct derive_kind *derive_find(const char *name, size_t length);

/*
 * One value in the unit of `channel`, from input values in their own units.
 * inputs_info and input_values are in the derivation's order. NaN where an
 * input that is given has no value.
 */
double derive_value(const struct derivation *derivation, const struct channel_info *inputs_info,
                    const double *input_values, const struct channel_info *channel,
                    const struct machine *machine);

/*
 * The whole series, in arena memory. inputs: the series of the inputs in the
 * derivation's order (NULL where not given). Rows are those of the first
 * input; others of the same block are taken row by row, those of another
 * block are interpolated between the two nearest rows.
 * channel: the info of the derived channel. Errors: ERR_NOMEM.
 */
int derive_series(const struct derivation *derivation, const struct series *const *inputs,
                  const struct channel_info *channel, const struct machine *machine,
                  struct arena *arena, struct series *ret_series, struct err *reterr);

#endif
