/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Derived channels over whole series: the value of each row, how uncertain the
 * inputs leave it, and what it costs where inputs were not read together.
 *
 * Uncertainty is carried by moving one input after the other by its limit and
 * adding up what the result moves: the worst case. Partial derivatives by hand
 * for each kind were rejected; a mistake in one would show nowhere.
 */
#include "derive.h"

#include <string.h>

#include "statistics.h"

#define PI 3.14159265358979323846

const struct derive_kind *derive_find(const char *name, size_t length)
{
	size_t count;
	const struct derive_kind *const *table = derive_table(&count);
	for (size_t i = 0; i < count; i++)
		if (strlen(table[i]->name) == length && memcmp(table[i]->name, name, length) == 0)
			return table[i];
	return NULL;
}

double derive_value(const struct derivation *derivation, const struct channel_info *inputs_info,
                    const double *input_values, const struct channel_info *channel,
                    const struct machine *machine)
{
	double si[DERIVE_INPUTS_MOST];
	for (int i = 0; i < DERIVE_INPUTS_MOST; i++) {
		bool given = derivation->inputs[i] >= 0;
		si[i] = given ? input_values[i] * inputs_info[i].unit->scale : (double)NAN;
		if (given && isnan(si[i]))
			return (double)NAN; /* missing, not left out */
	}
	return derivation->kind->value(si, machine, derivation->offset) / channel->unit->scale;
}

/* One input at one instant: value and half-width of its doubt, in its own unit. */
struct reading {
	double value, doubt;
};

struct builder {
	const struct derivation *derivation;
	const struct series *const *inputs;
	const struct channel_info *channel;
	const struct machine *machine;
	double turn;                   /* of the result, in the channel's unit; 0: not an angle */
	size_t at[DERIVE_INPUTS_MOST]; /* where each other block was left */
};

static double middle(const struct series *series, size_t row)
{
	return ((double)series_earliest(series, row) + (double)series_latest(series, row)) / 2;
}

static double half_width(const struct series *series, size_t row)
{
	return ((double)series_latest(series, row) - (double)series_earliest(series, row)) / 2;
}

static bool together(const struct series *a, const struct series *b)
{
	return a->block == b->block && a->rows == b->rows;
}

static struct reading read_row(const struct series *series, size_t row)
{
	return (struct reading){
	    .value = series_value(series, row),
	    .doubt = series_error_limit(series, row) + series->channel->resolution / 2,
	};
}

/* A full turn or the modulus of an input, in its unit; 0 where it does not wrap. */
static double modulus(const struct channel_info *channel)
{
	if (channel->wraps > 0)
		return channel->wraps;
	const struct dimension angle = channel->unit->dimension;
	return dimension_agrees(angle, DIM_ANGLE) ? 2 * PI / channel->unit->scale : 0;
}

/*
 * A series of another block at the instant of `row` of the first input: on the
 * straight line between the two nearest rows. The doubt grows by the rate of
 * change times what the two instants may be apart. NaN beside the rows and in
 * gaps, where a line would be invented.
 */
static struct reading read_between(struct builder *builder, int input, size_t row)
{
	const struct series *first = builder->inputs[0], *series = builder->inputs[input];
	const struct reading none = {(double)NAN, 0};
	double t = middle(first, row);
	size_t *at = &builder->at[input];
	while (*at + 2 < series->rows && middle(series, *at + 1) < t)
		(*at)++;
	if (series->rows < 2)
		return none;
	double before = middle(series, *at), after = middle(series, *at + 1);
	double interval =
	    (middle(series, series->rows - 1) - middle(series, 0)) / (double)(series->rows - 1);
	if (!(t >= before && t <= after) || !(after > before) || after - before > 5 * interval)
		return none;
	struct reading a = read_row(series, *at), b = read_row(series, *at + 1);
	double step = b.value - a.value, wrap = modulus(series->channel);
	if (wrap > 0)
		step = wrap_half(step, wrap);
	double apart =
	    half_width(first, row) + fmax(half_width(series, *at), half_width(series, *at + 1));
	double skew = fabs(step) * fmin(apart / (after - before), 1);
	return (struct reading){
	    .value = a.value + step * (t - before) / (after - before),
	    .doubt = fmax(a.doubt, b.doubt) + skew,
	};
}

static double compute(const struct builder *builder, const struct reading *readings, int moved,
                      double by)
{
	double values[DERIVE_INPUTS_MOST];
	struct channel_info infos[DERIVE_INPUTS_MOST] = {{0}};
	for (int i = 0; i < DERIVE_INPUTS_MOST; i++) {
		values[i] = readings[i].value + (i == moved ? by : 0);
		if (builder->derivation->inputs[i] >= 0)
			infos[i].unit = builder->inputs[i]->channel->unit;
	}
	return derive_value(builder->derivation, infos, values, builder->channel, builder->machine);
}

static double moved_by(const struct builder *builder, double value, double other)
{
	double difference = other - value;
	return fabs(builder->turn > 0 ? wrap_half(difference, builder->turn) : difference);
}

static double worst_case(const struct builder *builder, const struct reading *readings,
                         double value)
{
	double total = 0;
	for (int i = 0; i < DERIVE_INPUTS_MOST; i++) {
		if (builder->derivation->inputs[i] < 0 || !(readings[i].doubt > 0))
			continue;
		double up = compute(builder, readings, i, readings[i].doubt);
		double down = compute(builder, readings, i, -readings[i].doubt);
		total += fmax(moved_by(builder, value, up), moved_by(builder, value, down));
	}
	return total;
}

struct derived_row {
	int64_t sent, received;
	double value;
};

/* The row's own times, such that the result was true at once for all inputs read together. */
static void times(const struct builder *builder, size_t row, struct derived_row *ret_row)
{
	int64_t earliest = INT64_MAX, latest = INT64_MIN;
	for (int i = 0; i < DERIVE_INPUTS_MOST; i++) {
		const struct series *series = builder->inputs[i];
		if (builder->derivation->inputs[i] < 0 || !together(series, builder->inputs[0]))
			continue;
		int64_t from = series_earliest(series, row), to = series_latest(series, row);
		earliest = from < earliest ? from : earliest;
		latest = to > latest ? to : latest;
	}
	const struct channel_info *channel = builder->channel;
	ret_row->sent = earliest + channel->refresh_ns + channel->delay_most_ns;
	ret_row->received = latest + channel->delay_least_ns;
}

int derive_series(const struct derivation *derivation, const struct series *const *inputs,
                  const struct channel_info *channel, const struct machine *machine,
                  struct arena *arena, struct series *ret_series, struct err *reterr)
{
	size_t rows = inputs[0]->rows;
	struct derived_row *table = arena_array(arena, rows ? rows : 1, sizeof *table);
	double *extra = arena_array(arena, rows ? rows : 1, sizeof *extra);
	if (!table || !extra)
		return err_set(reterr, ERR_NOMEM, "memory ran out while deriving %s", channel->name);
	struct builder builder = {
	    .derivation = derivation,
	    .inputs = inputs,
	    .channel = channel,
	    .machine = machine,
	    .turn = derivation->kind->circular ? 2 * PI / channel->unit->scale : 0,
	};
	for (size_t row = 0; row < rows; row++) {
		struct reading readings[DERIVE_INPUTS_MOST] = {{0}};
		for (int i = 0; i < DERIVE_INPUTS_MOST; i++)
			if (derivation->inputs[i] >= 0)
				readings[i] = together(inputs[i], inputs[0]) ? read_row(inputs[i], row)
				                                             : read_between(&builder, i, row);
		times(&builder, row, &table[row]);
		table[row].value = compute(&builder, readings, -1, 0);
		double doubt = worst_case(&builder, readings, table[row].value);
		/* Where a moved input has no result, or the direction is lost, half a turn is open. */
		extra[row] = isnan(doubt) && !isnan(table[row].value)
		                 ? (builder.turn > 0 ? builder.turn / 2 : (double)INFINITY)
		                 : doubt;
	}
	*ret_series = (struct series){
	    .channel = channel,
	    .rows = rows,
	    .row0 = (const unsigned char *)table,
	    .stride = sizeof *table,
	    .earliest_at = offsetof(struct derived_row, sent),
	    .latest_at = offsetof(struct derived_row, received),
	    .value_at = offsetof(struct derived_row, value),
	    .block = inputs[0]->block,
	    .extra = extra,
	};
	return 0;
}
