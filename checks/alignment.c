/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Alignment: the frame that the controller believes against the machine's, by
 * up to three kinds of evidence.
 *
 * By angle: the angle in the frame that the controller believes against the
 * same angle from instruments. A wrong encoder offset turns the believed frame,
 * and the controller's own angle then still reads 90 deg; only the difference
 * to the bench shows it. Both are means over the same window, so that their
 * samples need not be simultaneous, but both must be proven steady.
 *
 * By torque: a current vector that stands where the controller believes makes
 * the torque 3/2 p [psi + (Ld - Lq) i_d] i_q; a turned frame makes less of it.
 * It shows how far the frame is off, not to which side, and near 90 deg only
 * roughly: the cosine is flat there, and flux linkage has a tolerance.
 *
 * By back-EMF with the power stage off: the voltage of the turning machine
 * leads the d axis by 90 deg, lags it when it turns backwards. The angle of
 * the measured voltage, counted from the rotor angle that the controller
 * believes, shows the frame without any current.
 */
#include <stdio.h>

#include "angle.h"
#include "level.h"
#include "operating_point.h"
#include "put.h"

struct alignment {
	int own, bench, current, torque, emf_angle, speed;
	struct window window;
	double minimum_current, tolerance, torque_loss;
};

#define AT(member) offsetof(struct alignment, member)
static const struct field fields[] = {
    {.key = "own",
     .kind = FIELD_CHANNEL,
     .offset = AT(own),
     .text = "torque angle as the controller believes it; for bench and torque"},
    {.key = "bench",
     .kind = FIELD_CHANNEL,
     .offset = AT(bench),
     .text = "torque angle from instruments that are not under test"},
    {.key = "current",
     .kind = FIELD_CHANNEL,
     .offset = AT(current),
     .text = "magnitude of the current vector, from the bench; for bench and torque"},
    {.key = "torque",
     .kind = FIELD_CHANNEL,
     .offset = AT(torque),
     .text = "torque of the shaft, from the bench; for offset_by_torque"},
    {.key = "torque_loss",
     .kind = FIELD_QUANTITY,
     .dimension = &DIM_TORQUE,
     .least = 0,
     .most = 1e6,
     .offset = AT(torque_loss),
     .text = "what friction and iron may take of the torque, at most; 0 unless given"},
    {.key = "emf_angle",
     .kind = FIELD_CHANNEL,
     .offset = AT(emf_angle),
     .text = "angle of the measured voltage from the rotor angle that the controller believes, "
             "power stage off; for offset_by_emf"},
    {.key = "speed",
     .kind = FIELD_CHANNEL,
     .offset = AT(speed),
     .text = "speed, whose sign the back-EMF follows; for offset_by_emf"},
    {.key = "window",
     .kind = FIELD_WINDOW,
     .offset = AT(window),
     .text = "the samples that are judged; proven steady"},
    {.key = "minimum_current",
     .kind = FIELD_QUANTITY,
     .dimension = &DIM_NUMBER,
     .least = 0,
     .most = 1,
     .fallback = "5 %",
     .offset = AT(minimum_current),
     .text = "of rated current: below it an angle says nothing"},
    {.key = "tolerance",
     .kind = FIELD_QUANTITY,
     .dimension = &DIM_ANGLE,
     .flags = FIELD_POSITIVE,
     .least = 0,
     .most = 3.141592653589793,
     .fallback = "5 deg",
     .offset = AT(tolerance),
     .text = "the deviation that matters: the drift over the window must surely be below a quarter "
             "of it"},
};
static const struct field_table table = {
    "alignment", "the frame that the controller believes against the bench's", fields,
    FIELD_COUNT(fields)};

static const struct metric_kind metrics[] = {
    {"frame_offset", METRIC_ANGLE_ELEC,
     "circular mean of own - that of bench, in (-180 deg, 180 deg]", NULL},
    {"offset_by_torque", METRIC_ANGLE_ELEC,
     "how far the frame is off, either way, by torque per ampere and the nameplate", NULL},
    {"offset_by_emf", METRIC_ANGLE_ELEC,
     "angle of the back-EMF - 90 deg (+ 90 deg when it turns backwards)", NULL},
};
enum { BY_ANGLE, BY_TORQUE, BY_EMF };

static void fill(const struct angle *own, const struct angle *bench, struct metric *ret_metric)
{
	double offset = wrap_half(own->mean - bench->mean, 360);
	double expanded = hypot(own->expanded, bench->expanded);
	put_value(ret_metric, &metrics[0], shape_unit(METRIC_ANGLE_ELEC, NULL), EVIDENCE_INDEPENDENT,
	          offset, offset - expanded, offset + expanded, 0.95);
	(void)snprintf(ret_metric->note, sizeof ret_metric->note,
	               "%s says %.2f deg, %s %.2f deg: the bench decides",
	               own->rows.series.channel->name, own->mean, bench->rows.series.channel->name,
	               bench->mean);
	put_point(ret_metric, bench->rows.span.from_ns, bench->rows.span.to_ns, (double)NAN);
}

static void unknown(struct metric *ret_metrics, size_t index, const char *why)
{
	metric_unknown(&ret_metrics[index], &metrics[index], shape_unit(METRIC_ANGLE_ELEC, NULL),
	               EVIDENCE_INDEPENDENT, "%s", why);
}

/*
 * All offsets that torque, current and tolerances leave possible, by scanning:
 * with saliency the torque over the angle has no handy inverse.
 */
static bool scan_offsets(const struct machine *machine, double own_deg, const struct level *current,
                         double torque_low, double torque, double torque_high, struct interval *ret)
{
	const struct nameplate_value psi = machine->flux_linkage;
	double nearest = (double)INFINITY;
	*ret = (struct interval){(double)NAN, (double)INFINITY, 0};
	for (int step = 0; step <= 1800; step++) {
		double offset = step / 10.0;
		for (int side = -1; side <= 1; side += 2) {
			double least = (double)INFINITY, most = -(double)INFINITY;
			for (int corner = 0; corner < 4; corner++) {
				double flux = psi.value * (1 + (corner & 1 ? 1 : -1) * psi.tolerance);
				double amps = current->mean + (corner & 2 ? 1 : -1) * current->expanded;
				double made = torque_of(machine, flux, amps, own_deg - side * offset);
				least = fmin(least, made);
				most = fmax(most, made);
			}
			if (most >= torque_low && least <= torque_high) {
				ret->low = fmin(ret->low, offset);
				ret->high = fmax(ret->high, offset);
			}
			double made = torque_of(machine, psi.value, current->mean, own_deg - side * offset);
			if (fabs(made - torque) < nearest) {
				nearest = fabs(made - torque);
				ret->value = offset;
			}
		}
	}
	return ret->low <= ret->high;
}

static int by_torque(const struct check_input *in, const struct alignment *fields_in,
                     struct span span, const struct angle *own, struct metric *ret_metrics,
                     struct err *reterr)
{
	struct level torque, current;
	struct interval offset;
	if (fields_in->torque < 0) {
		unknown(ret_metrics, BY_TORQUE, "no torque channel is given");
		return 0;
	}
	if (level_measure(in, fields_in->torque, span, &torque, reterr) < 0 ||
	    level_measure(in, fields_in->current, span, &current, reterr) < 0)
		return -1;
	if (!torque.known || !current.known) {
		unknown(ret_metrics, BY_TORQUE, torque.known ? current.why : torque.why);
		return 0;
	}
	double low = torque.mean - torque.expanded, high = torque.mean + torque.expanded;
	/* The loss opposes the rotation, whose direction is not asked for. */
	low -= fields_in->torque_loss;
	high += fields_in->torque_loss;
	if (!scan_offsets(in->machine, own->mean, &current, low, torque.mean, high, &offset)) {
		metric_unknown(
		    &ret_metrics[BY_TORQUE], &metrics[BY_TORQUE], shape_unit(METRIC_ANGLE_ELEC, NULL),
		    EVIDENCE_INDEPENDENT,
		    "%.3g Nm at %.3g A fit no angle of the frame: nameplate or channels are wrong",
		    torque.mean, current.mean);
		return 0;
	}
	put_value(&ret_metrics[BY_TORQUE], &metrics[BY_TORQUE], shape_unit(METRIC_ANGLE_ELEC, NULL),
	          EVIDENCE_INDEPENDENT, fmin(fmax(offset.value, offset.low), offset.high),
	          fmax(0, offset.low - own->expanded - 0.1), offset.high + own->expanded + 0.1, 0.95);
	put_point(&ret_metrics[BY_TORQUE], span.from_ns, span.to_ns, (double)NAN);
	return 0;
}

static int by_emf(const struct check_input *in, const struct alignment *fields_in, struct span span,
                  struct metric *ret_metrics, struct err *reterr)
{
	struct angle emf;
	struct level speed;
	if (fields_in->emf_angle < 0) {
		unknown(ret_metrics, BY_EMF, "no emf_angle channel is given");
		return 0;
	}
	if (angle_measure(in, fields_in->emf_angle, span, fields_in->tolerance, &emf, reterr) < 0 ||
	    level_measure(in, fields_in->speed, span, &speed, reterr) < 0)
		return -1;
	if (!emf.known || !speed.known) {
		unknown(ret_metrics, BY_EMF, emf.known ? speed.why : emf.why);
		return 0;
	}
	if (!(fabs(speed.mean) > 2 * speed.expanded)) {
		unknown(ret_metrics, BY_EMF, "the shaft hardly turned: there was no back-EMF to speak of");
		return 0;
	}
	double offset = wrap_half(emf.mean - (speed.mean > 0 ? 90 : -90), 360);
	put_value(&ret_metrics[BY_EMF], &metrics[BY_EMF], shape_unit(METRIC_ANGLE_ELEC, NULL),
	          EVIDENCE_INDEPENDENT, offset, offset - emf.expanded, offset + emf.expanded, 0.95);
	put_point(&ret_metrics[BY_EMF], span.from_ns, span.to_ns, (double)NAN);
	return 0;
}

static int by_angles(const struct check_input *in, const struct alignment *fields_in,
                     struct span span, struct metric *ret_metrics, struct err *reterr)
{
	char why[224] = "no own angle is given";
	struct angle own = {0}, bench = {0};
	bool sufficient = false;
	if (fields_in->own >= 0 &&
	    current_sufficient(in, fields_in->current, span, fields_in->minimum_current, &sufficient,
	                       why, sizeof why, reterr) < 0)
		return -1;
	if (sufficient &&
	    angle_measure(in, fields_in->own, span, fields_in->tolerance, &own, reterr) < 0)
		return -1;
	if (own.known && fields_in->bench >= 0 &&
	    angle_measure(in, fields_in->bench, span, fields_in->tolerance, &bench, reterr) < 0)
		return -1;
	if (sufficient && !own.known)
		(void)snprintf(why, sizeof why, "%s", own.why);
	else if (own.known)
		(void)snprintf(why, sizeof why, "%s",
		               fields_in->bench < 0 ? "no bench angle is given" : bench.why);
	if (bench.known)
		fill(&own, &bench, &ret_metrics[BY_ANGLE]);
	else
		unknown(ret_metrics, BY_ANGLE, why);
	if (own.known)
		return by_torque(in, fields_in, span, &own, ret_metrics, reterr);
	unknown(ret_metrics, BY_TORQUE, why);
	return 0;
}

static int evaluate(const struct check_input *in, const void *params, struct metric *ret_metrics,
                    size_t *ret_count, struct err *reterr)
{
	const struct alignment *fields_in = params;
	*ret_count = FIELD_COUNT(metrics);
	char why[224] = "";
	struct span span;
	if (!window_span(in, &fields_in->window, &span, why, sizeof why)) {
		for (size_t i = 0; i < FIELD_COUNT(metrics); i++)
			unknown(ret_metrics, i, why);
		return 0;
	}
	if (by_angles(in, fields_in, span, ret_metrics, reterr) < 0)
		return -1;
	return by_emf(in, fields_in, span, ret_metrics, reterr);
}

static int verify_torque(const struct alignment *own, const struct channel_info *channels,
                         const struct machine *machine, struct err *reterr)
{
	if (own->torque < 0)
		return 0;
	const struct channel_info *torque = &channels[own->torque];
	if (torque->evidence == EVIDENCE_SELF_REPORTED ||
	    !dimension_agrees(torque->unit->dimension, DIM_TORQUE))
		return err_set(reterr, ERR_FILE, "torque: %s is no torque from an instrument",
		               torque->name);
	if (machine->pole_pairs > 0 && machine->flux_linkage.value > 0)
		return 0;
	return err_set(reterr, ERR_FILE,
	               "torque needs pole_pairs and flux_linkage, which machine does not give");
}

static int verify_emf(const struct alignment *own, const struct channel_info *channels,
                      struct err *reterr)
{
	if (own->emf_angle < 0)
		return 0;
	if (own->speed < 0)
		return err_set(reterr, ERR_FILE, "emf_angle needs the channel speed");
	if (!dimension_agrees(channels[own->speed].unit->dimension, DIM_SPEED))
		return err_set(reterr, ERR_FILE, "speed: %s is in %s, not a speed",
		               channels[own->speed].name, channels[own->speed].unit->name);
	return angle_channel_verify(&channels[own->emf_angle], reterr);
}

static int verify(const void *params, const struct channel_info *channels,
                  const struct machine *machine, struct err *reterr)
{
	const struct alignment *own = params;
	bool angles = own->bench >= 0 || own->torque >= 0;
	if (!angles && own->emf_angle < 0)
		return err_set(reterr, ERR_FILE,
		               "nothing to compare the frame with: give bench, torque or emf_angle");
	if (angles && (own->own < 0 || own->current < 0))
		return err_set(reterr, ERR_FILE, "bench and torque need own and current");
	if (own->bench >= 0) {
		const struct channel_info *bench = &channels[own->bench];
		if (bench->evidence == EVIDENCE_SELF_REPORTED)
			return err_set(
			    reterr, ERR_FILE,
			    "bench: %s comes from the device under test; alignment needs an instrument",
			    bench->name);
		if (own->own == own->bench)
			return err_set(reterr, ERR_FILE, "own and bench are the same channel, %s", bench->name);
		if (angle_channel_verify(bench, reterr) < 0)
			return -1;
	}
	if (angles) {
		const struct channel_info *current = &channels[own->current];
		if (current->evidence == EVIDENCE_SELF_REPORTED)
			return err_set(
			    reterr, ERR_FILE,
			    "current: %s comes from the device under test; alignment needs an instrument",
			    current->name);
		if (angle_channel_verify(&channels[own->own], reterr) < 0 ||
		    current_channel_verify(current, own->minimum_current, machine, reterr) < 0)
			return -1;
	}
	if (verify_torque(own, channels, machine, reterr) < 0)
		return -1;
	return verify_emf(own, channels, reterr);
}

const struct check_kind check_alignment = {
    .name = "alignment",
    .text = "the frame that the controller believes against the bench's",
    .fields = &table,
    .params_size = sizeof(struct alignment),
    .metrics = metrics,
    .metric_count = FIELD_COUNT(metrics),
    .evaluate = evaluate,
    .verify = verify,
};
