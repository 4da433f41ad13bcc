/* SPDX-License-Identifier: Apache-2.0 */
/*
 * From a torque command to duties: current commands, PI control of both
 * currents with decoupling, voltage limit, turn into the stator, modulation.
 *
 * Magnitude optimum: the zero cancels L/R, Kp = L/(2 T), with T = 1.5 control
 * periods (one of computing, half of the held voltage). Where the voltage
 * vector is limited, the integrals take only the part of the error that the
 * limited vector can serve (back-calculation); the d axis keeps its voltage.
 *
 * Current commands: maximum torque per ampere where the machine has saliency,
 * id = 0 where it has none, and field weakening on top of either.
 */
#include "model_controller.h"

#include <math.h>

#include "model_modulation.h"

#define PI        3.14159265358979323846
#define INV_SQRT3 0.57735026918962576451
/* How fast the d current follows a voltage that is too high: a decade below the current loops. */
#define WEAKENING_RAD_S 150.0

void current_loops_tune(struct controller *controller, const struct controller_tuning *tuning)
{
	struct current_loops *loops = &controller->current_loops;
	double bandwidth = tuning->current_bandwidth_rad_s;
	if (bandwidth <= 0)
		bandwidth = 1 / (2 * 1.5 * controller->period_s);
	loops->gain_d = controller->ld_h * bandwidth;
	loops->gain_q = controller->lq_h * bandwidth;
	loops->integral_share_d = controller->period_s * tuning->resistance_ohm / controller->ld_h;
	loops->integral_share_q = controller->period_s * tuning->resistance_ohm / controller->lq_h;
}

double drive_torque_of(const struct controller *c, double current_d_a, double current_q_a)
{
	return 1.5 * c->pole_pairs * (c->flux_wb + (c->ld_h - c->lq_h) * current_d_a) * current_q_a;
}

/*
 * Maximum torque per ampere (Morimoto et al., IEEE Trans. IA 1990):
 *   id = psi/(2 dL) - sqrt(psi^2/(4 dL^2) + iq^2),  dL = Lq - Ld,
 * so T(iq) = 1.5 p iq (psi/2 + sqrt(psi^2/4 + dL^2 iq^2)), solved for iq by Newton
 * from the last answer; the function is convex and rising, so three steps do.
 */
void current_for_torque(const struct controller *controller, double torque_nm, double *io_q,
                        double *ret_d)
{
	double dl = controller->lq_h - controller->ld_h, half = 0.5 * controller->flux_wb;
	double wanted = fabs(torque_nm) / (1.5 * controller->pole_pairs);
	double q = fabs(*io_q);
	for (int i = 0; i < 3; i++) {
		double root = sqrt(half * half + dl * dl * q * q);
		q -= (q * (half + root) - wanted) / (half + root + dl * dl * q * q / root);
	}
	*io_q = copysign(q, torque_nm);
	*ret_d = (half - sqrt(half * half + dl * dl * q * q)) / dl;
}

/*
 * Field weakening: an integral control takes the d current down while the
 * voltage wanted by the current loops lies above a target below the limit.
 */
static double field_weakening(struct controller *c)
{
	double target = c->weakening_share * c->dc_v * INV_SQRT3;
	double flux_speed = fabs(c->pole_pairs * c->speed_rad_s) * c->ld_h;
	double least = 0.2 * c->pole_pairs * c->rated_speed_rad_s * c->ld_h;
	double rate = WEAKENING_RAD_S / (flux_speed > least ? flux_speed : least);
	double d = c->weakening_d_a + c->period_s * rate * (target - c->wanted_v);
	double most = 0.9 * c->current_most_a;
	c->weakening_d_a = d > 0 ? 0 : d < -most ? -most : d;
	return c->weakening_d_a;
}

void current_commands(struct controller *controller, double torque_nm)
{
	struct controller *c = controller;
	double d = c->magnetising_a;
	if (c->ld_h != c->lq_h && !defect_in(c->defects, DEFECT_MTPA_OFF)) {
		double best;
		current_for_torque(c, torque_nm, &c->torque_q_a, &best);
		d += best;
	}
	if (!c->block)
		d += field_weakening(c);
	double most_d = 0.95 * c->current_most_a;
	d = d < -most_d ? -most_d : d;
	double q = torque_nm / (1.5 * c->pole_pairs * (c->flux_wb + (c->ld_h - c->lq_h) * d));
	double most_q = sqrt(c->current_most_a * c->current_most_a - d * d);
	c->current_d_command_a = d;
	c->current_q_command_a = q > most_q ? most_q : q < -most_q ? -most_q : q;
}

static void turn_and_modulate(struct controller *c, double speed_elec)
{
	/* The voltage takes effect from one to two periods after this instant. */
	double sine, cosine;
	double ahead = c->block ? 0 : 1.5 * speed_elec * c->period_s;
	sincos(c->angle_elec_rad + ahead, &sine, &cosine);
	c->voltage_alpha_v = c->voltage_d_v * cosine - c->voltage_q_v * sine;
	c->voltage_beta_v = c->voltage_d_v * sine + c->voltage_q_v * cosine;
	double dc_v = c->dc_v > 1 ? c->dc_v : 1;
	struct dwell dwell =
	    modulation_dwell(c->voltage_alpha_v, c->voltage_beta_v, dc_v, c->switching_period_s);
	modulation_duties(&dwell, c->switching_period_s, c->null_share, c->duty);
	if (defect_in(c->defects, DEFECT_PHASE_DUTY_WRONG))
		c->duty[1] *= 0.92;
}

/*
 * Block commutation: the current vector stands 90 deg from the middle of the
 * Hall sector, so 120 deg from the rotor when it enters the sector and 60 when
 * it leaves. Two phases carry the current, one control loop is enough; the
 * third phase is off. Of the back-EMF the mean over the sector, 3/pi, is fed forward.
 */
static void block_step(struct controller *c)
{
	static const int OFF[3] = {1, 3, 2};
	struct current_loops *loops = &c->current_loops;
	double speed_elec = c->pole_pairs * c->speed_rad_s;
	double most = c->dc_v * INV_SQRT3;
	double p = loops->gain_q * (c->current_q_command_a - c->current_q_a);
	double wanted = p + loops->integral_q + 0.95492965855137201 * speed_elec * c->flux_wb;
	double q = wanted > most ? most : wanted < -most ? -most : wanted;
	loops->integral_q += loops->integral_share_q * (p + q - wanted);
	c->voltage_d_v = 0;
	c->voltage_q_v = q;
	long sector = lround(c->angle_elec_rad * 3 / PI) % 3;
	c->floating = OFF[sector < 0 ? sector + 3 : sector];
	turn_and_modulate(c, speed_elec);
}

void current_loops_step(struct controller *controller)
{
	struct controller *c = controller;
	if (c->block) {
		block_step(c);
		return;
	}
	struct current_loops *loops = &c->current_loops;
	double speed_elec = c->pole_pairs * c->speed_rad_s;
	double most = c->dc_v * INV_SQRT3;

	double p_d = loops->gain_d * (c->current_d_command_a - c->current_d_a);
	double wanted_d = p_d + loops->integral_d - speed_elec * c->lq_h * c->current_q_a;
	double d = wanted_d > most ? most : wanted_d < -most ? -most : wanted_d;
	double most_q = sqrt(most * most - d * d);
	double p_q = loops->gain_q * (c->current_q_command_a - c->current_q_a);
	double wanted_q =
	    p_q + loops->integral_q + speed_elec * (c->ld_h * c->current_d_a + c->flux_wb);
	double q = wanted_q > most_q ? most_q : wanted_q < -most_q ? -most_q : wanted_q;

	loops->integral_d += loops->integral_share_d * (p_d + d - wanted_d);
	loops->integral_q += loops->integral_share_q * (p_q + q - wanted_q);
	c->wanted_v = sqrt(wanted_d * wanted_d + wanted_q * wanted_q);
	c->voltage_d_v = d;
	c->voltage_q_v = q;
	turn_and_modulate(c, speed_elec);
}
