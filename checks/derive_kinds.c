/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The formulas of derived channels, one row a kind. Everything here is SI.
 * Space vectors are amplitude-invariant: a balanced set of amplitude I has the
 * magnitude I. The offset of a rig file is what is subtracted from the result.
 *
 * Two encoder angles, because counts become a mechanical angle by the lines
 * alone and an electrical one only with the pole pairs; one kind that guessed
 * from the unit would hide the factor.
 */
#include "derive.h"
#include "statistics.h"

#define PI 3.14159265358979323846

static double turn_wrapped(double angle)
{
	return wrap_half(angle, 2 * PI);
}

static int need_same(const struct dimension *inputs, size_t count, struct err *reterr)
{
	char a[96], b[96];
	for (size_t i = 1; i < count; i++)
		if (!dimension_agrees(inputs[0], inputs[i]))
			return err_set(reterr, ERR_FILE, "the inputs must be of one dimension, not %s and %s",
			               dimension_name(inputs[0], a, sizeof a),
			               dimension_name(inputs[i], b, sizeof b));
	return 0;
}

static int need(struct dimension input, struct dimension wanted, const char *key,
                struct err *reterr)
{
	char a[96], b[96];
	if (dimension_agrees(input, wanted))
		return 0;
	return err_set(reterr, ERR_FILE, "%s must be %s, not %s", key,
	               dimension_name(wanted, a, sizeof a), dimension_name(input, b, sizeof b));
}

/* angle_of, magnitude_of: components of one vector */

static int angle_of_dimension(const struct dimension *inputs, size_t count, struct dimension *ret,
                              struct err *reterr)
{
	*ret = DIM_ANGLE_ELEC;
	return need_same(inputs, count, reterr);
}

static double angle_of(const double *values, const struct machine *machine, double offset)
{
	(void)machine;
	if (values[0] == 0 && values[1] == 0)
		return (double)NAN; /* no vector, no direction */
	return turn_wrapped(atan2(values[1], values[0]) - offset);
}

static int first_dimension(const struct dimension *inputs, size_t count, struct dimension *ret,
                           struct err *reterr)
{
	*ret = inputs[0];
	return need_same(inputs, count, reterr);
}

static double magnitude_of(const double *values, const struct machine *machine, double offset)
{
	(void)machine;
	return hypot(values[0], values[1]) - offset;
}

/* vector_angle, vector_magnitude: phase quantities */

/* Clarke, amplitude-invariant; a third phase that is not given is -a - b. */
static void clarke(double a, double b, double c, double *ret_alpha, double *ret_beta)
{
	double third = isnan(c) ? -a - b : c;
	*ret_alpha = (2 * a - b - third) / 3;
	*ret_beta = (b - third) / sqrt(3);
}

static int need_phases(const struct dimension *phases, size_t count, struct err *reterr)
{
	if (phases[0].sort == SORT_AMPLITUDE)
		return err_set(reterr, ERR_FILE,
		               "phase values are instantaneous: their unit is A or V, not A_peak or A_rms");
	return need_same(phases, count, reterr);
}

static int vector_angle_dimension(const struct dimension *inputs, size_t count,
                                  struct dimension *ret, struct err *reterr)
{
	*ret = DIM_ANGLE_ELEC;
	const struct dimension phases[3] = {inputs[0], inputs[1], count > 3 ? inputs[3] : inputs[0]};
	if (need_phases(phases, 3, reterr) < 0)
		return -1;
	return need(inputs[2], DIM_ANGLE_ELEC, "angle", reterr);
}

/* values: a, b, electrical rotor angle, c. */
static double vector_angle(const double *values, const struct machine *machine, double offset)
{
	(void)machine;
	double alpha, beta;
	clarke(values[0], values[1], values[3], &alpha, &beta);
	if (alpha == 0 && beta == 0)
		return (double)NAN;
	return turn_wrapped(atan2(beta, alpha) - values[2] - offset);
}

static int vector_magnitude_dimension(const struct dimension *inputs, size_t count,
                                      struct dimension *ret, struct err *reterr)
{
	*ret = inputs[0];
	ret->sort = SORT_AMPLITUDE;
	return need_phases(inputs, count, reterr);
}

static double vector_magnitude(const double *values, const struct machine *machine, double offset)
{
	(void)machine;
	double alpha, beta;
	clarke(values[0], values[1], values[2], &alpha, &beta);
	return hypot(alpha, beta) - offset;
}

/* angle_between and the encoder */

static int angle_between_dimension(const struct dimension *inputs, size_t count,
                                   struct dimension *ret, struct err *reterr)
{
	if (need(inputs[0], DIM_ANGLE, "a", reterr) < 0 || need(inputs[1], DIM_ANGLE, "b", reterr) < 0)
		return -1;
	*ret = inputs[0].sort == SORT_PLAIN ? inputs[1] : inputs[0];
	return need_same(inputs, count, reterr);
}

static double angle_between(const double *values, const struct machine *machine, double offset)
{
	(void)machine;
	return turn_wrapped(values[0] - values[1] - offset);
}

static int encoder_dimension(const struct dimension *inputs, size_t count, struct dimension *ret,
                             struct err *reterr)
{
	(void)count;
	*ret = DIM_ANGLE_MECH;
	return need(inputs[0], DIM_NUMBER, "counts", reterr);
}

static int encoder_elec_dimension(const struct dimension *inputs, size_t count,
                                  struct dimension *ret, struct err *reterr)
{
	(void)count;
	*ret = DIM_ANGLE_ELEC;
	return need(inputs[0], DIM_NUMBER, "counts", reterr);
}

static double encoder_radians(double counts, const struct machine *machine)
{
	if (machine->encoder_lines <= 0)
		return (double)NAN;
	return counts * 2 * PI / (4.0 * machine->encoder_lines);
}

static double encoder_angle(const double *values, const struct machine *machine, double offset)
{
	return turn_wrapped(encoder_radians(values[0], machine) - offset);
}

static double encoder_angle_elec(const double *values, const struct machine *machine, double offset)
{
	if (machine->pole_pairs <= 0)
		return (double)NAN;
	return turn_wrapped(machine->pole_pairs * encoder_radians(values[0], machine) - offset);
}

/* arithmetic */

static int product_dimension(const struct dimension *inputs, size_t count, struct dimension *ret,
                             struct err *reterr)
{
	(void)count;
	(void)reterr;
	const struct dimension *a = &inputs[0], *b = &inputs[1];
	*ret = (struct dimension){
	    .metre = (int8_t)(a->metre + b->metre),
	    .kilogram = (int8_t)(a->kilogram + b->kilogram),
	    .second = (int8_t)(a->second + b->second),
	    .ampere = (int8_t)(a->ampere + b->ampere),
	    .kelvin = (int8_t)(a->kelvin + b->kelvin),
	    .radian = (int8_t)(a->radian + b->radian),
	    .sort = a->sort == SORT_PLAIN ? b->sort : (b->sort == SORT_PLAIN ? a->sort : SORT_PLAIN),
	};
	return 0;
}

static double product(const double *values, const struct machine *machine, double offset)
{
	(void)machine;
	return values[0] * values[1] - offset;
}

static double sum(const double *values, const struct machine *machine, double offset)
{
	(void)machine;
	double total = values[0] + values[1] - offset;
	for (int i = 2; i < DERIVE_INPUTS_MOST; i++)
		total += isnan(values[i]) ? 0 : values[i];
	return total;
}

static double difference(const double *values, const struct machine *machine, double offset)
{
	(void)machine;
	return values[0] - values[1] - offset;
}

static int ratio_dimension(const struct dimension *inputs, size_t count, struct dimension *ret,
                           struct err *reterr)
{
	(void)count;
	(void)reterr;
	const struct dimension *a = &inputs[0], *b = &inputs[1];
	*ret = (struct dimension){
	    .metre = (int8_t)(a->metre - b->metre),
	    .kilogram = (int8_t)(a->kilogram - b->kilogram),
	    .second = (int8_t)(a->second - b->second),
	    .ampere = (int8_t)(a->ampere - b->ampere),
	    .kelvin = (int8_t)(a->kelvin - b->kelvin),
	    .radian = (int8_t)(a->radian - b->radian),
	    .sort = a->sort == b->sort ? SORT_PLAIN : (b->sort == SORT_PLAIN ? a->sort : b->sort),
	};
	return 0;
}

static double ratio(const double *values, const struct machine *machine, double offset)
{
	(void)machine;
	return values[1] == 0 ? (double)NAN : values[0] / values[1] - offset;
}

static int power_dimension(const struct dimension *inputs, size_t count, struct dimension *ret,
                           struct err *reterr)
{
	(void)count;
	*ret = DIM_POWER;
	if (need(inputs[0], DIM_TORQUE, "torque", reterr) < 0)
		return -1;
	return need(inputs[1], DIM_SPEED_MECH, "speed", reterr);
}

static const struct derive_kind kind_angle_of = {
    .name = "angle_of",
    .text = "electrical angle of a vector: atan2(y, x); of current_d, current_q the torque angle",
    .inputs = {"x", "y"},
    .required = 2,
    .dimension = angle_of_dimension,
    .value = angle_of,
    .circular = true,
};
static const struct derive_kind kind_magnitude_of = {
    .name = "magnitude_of",
    .text = "length of a vector: sqrt(x^2 + y^2)",
    .inputs = {"x", "y"},
    .required = 2,
    .dimension = first_dimension,
    .value = magnitude_of,
};
static const struct derive_kind kind_vector_angle = {
    .name = "vector_angle",
    .text = "electrical angle of the vector of phase values a, b, c (c = -a - b where not given), "
            "by the amplitude-invariant Clarke transform, minus the electrical rotor angle",
    .inputs = {"a", "b", "angle", "c"},
    .required = 3,
    .dimension = vector_angle_dimension,
    .value = vector_angle,
    .circular = true,
};
static const struct derive_kind kind_vector_magnitude = {
    .name = "vector_magnitude",
    .text = "amplitude of the vector of phase values a, b, c (c = -a - b where not given), by the "
            "amplitude-invariant Clarke transform",
    .inputs = {"a", "b", "c"},
    .required = 2,
    .dimension = vector_magnitude_dimension,
    .value = vector_magnitude,
};
static const struct derive_kind kind_angle_between = {
    .name = "angle_between",
    .text = "a - b, wrapped to half a turn on either side",
    .inputs = {"a", "b"},
    .required = 2,
    .dimension = angle_between_dimension,
    .value = angle_between,
    .circular = true,
};
static const struct derive_kind kind_encoder_angle = {
    .name = "encoder_angle",
    .text = "mechanical angle of encoder counts: counts / (4 encoder_lines) turns",
    .inputs = {"counts"},
    .required = 1,
    .dimension = encoder_dimension,
    .value = encoder_angle,
    .circular = true,
};
static const struct derive_kind kind_encoder_angle_elec = {
    .name = "encoder_angle_elec",
    .text = "electrical angle of encoder counts: pole_pairs counts / (4 encoder_lines) turns",
    .inputs = {"counts"},
    .required = 1,
    .dimension = encoder_elec_dimension,
    .value = encoder_angle_elec,
    .circular = true,
};
static const struct derive_kind kind_product = {
    .name = "product",
    .text = "a times b",
    .inputs = {"a", "b"},
    .required = 2,
    .dimension = product_dimension,
    .value = product,
};
static const struct derive_kind kind_sum = {
    .name = "sum",
    .text = "a plus b, and c and d where given",
    .inputs = {"a", "b", "c", "d"},
    .required = 2,
    .dimension = first_dimension,
    .value = sum,
};
static const struct derive_kind kind_difference = {
    .name = "difference",
    .text = "a minus b, not wrapped",
    .inputs = {"a", "b"},
    .required = 2,
    .dimension = first_dimension,
    .value = difference,
};
static const struct derive_kind kind_ratio = {
    .name = "ratio",
    .text = "a divided by b",
    .inputs = {"a", "b"},
    .required = 2,
    .dimension = ratio_dimension,
    .value = ratio,
};
static const struct derive_kind kind_mechanical_power = {
    .name = "mechanical_power",
    .text = "torque times mechanical speed; positive while motoring",
    .inputs = {"torque", "speed"},
    .required = 2,
    .dimension = power_dimension,
    .value = product,
};

static const struct derive_kind *const kinds[] = {
    &kind_angle_of,           &kind_magnitude_of,  &kind_vector_angle,
    &kind_vector_magnitude,   &kind_angle_between, &kind_encoder_angle,
    &kind_encoder_angle_elec, &kind_product,       &kind_sum,
    &kind_difference,         &kind_ratio,         &kind_mechanical_power,
};

const struct derive_kind *const *derive_table(size_t *ret_count)
{
	*ret_count = FIELD_COUNT(kinds);
	return kinds;
}
