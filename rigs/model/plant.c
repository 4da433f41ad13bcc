/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The power path, integrated by the classical Runge-Kutta method of fourth
 * order in rotor coordinates. Stator coordinates were rejected: with saliency
 * the inductances then depend on the angle. An exact exponential of the
 * electrical part was rejected too: it holds the speed during a step, and the
 * energy balance is then only as good as that.
 *
 * The voltage vector stands still in the stator while the rotor turns, so each
 * stage turns it by the small angle since the start of the step; sine and
 * cosine of that angle come from their series, the C library is asked once a
 * step. The series are cut at the eighth power: below 1e-9 for half a radian.
 *
 * The energies are integrated with the same stages and weights, so that the
 * balance shows errors of the equations and not those of another quadrature.
 */
#include "model_plant.h"

#include <math.h>

#define TWO_PI 6.28318530717958647692
/* Space vector amplitude of a bridge whose diodes conduct, fundamental: 2/pi of the DC voltage. */
#define DIODE_SHARE 0.63661977236758134
/* Below this current the diodes' voltage falls with the current: keeps the equations smooth. */
#define DIODE_SMOOTH_A 0.5
#define DIODE_ZERO_A   0.02
/* Coulomb friction grows linearly up to this speed: half a revolution a minute. */
#define STICK_RAD_S  0.05
#define OPEN_PHASE_S 1e-4    /* in which the current of an opened phase dies away */
#define COPPER_PER_K 0.00393 /* temperature coefficient of copper at 20 degC, common practice */

struct state {
	double id, iq, w, angle, v, load_w, twist;
};

/* What is the same in every stage of a step. */
struct constants {
	double start_angle, p, inv_ld, inv_lq, inv_j, inv_load_j, inv_c, supply_s,
	    resistors_s; /* conductances */
};

struct slope {
	struct state d;
	double supply, copper, friction, load, resistors; /* powers */
};

static inline double friction_at(const struct plant *plant, double w)
{
	double stick = w / STICK_RAD_S;
	stick = stick > 1 ? 1 : stick < -1 ? -1 : stick;
	return plant->viscous_nms * w + plant->coulomb_nm * stick;
}

double plant_friction(const struct plant *plant, double speed_rad_s)
{
	return friction_at(plant, speed_rad_s);
}

/* Cosine and sine of the rotor frame, turned by a small angle since the start of the step. */
static inline void frame_at(const struct plant *plant, double t, double *ret_c, double *ret_s)
{
	double t2 = t * t;
	double ds = t * (1 - t2 * (1. / 6) * (1 - t2 * (1. / 20) * (1 - t2 * (1. / 42))));
	double dc = 1 - t2 * 0.5 * (1 - t2 * (1. / 12) * (1 - t2 * (1. / 30) * (1 - t2 * (1. / 56))));
	*ret_c = plant->cos_elec * dc - plant->sin_elec * ds;
	*ret_s = plant->sin_elec * dc + plant->cos_elec * ds;
}

/* Duty vector of conducting diodes: against the current. */
static inline void diodes(const struct state *x, double *ret_d, double *ret_q)
{
	double current = sqrt(x->id * x->id + x->iq * x->iq);
	double share = -DIODE_SHARE / (current > DIODE_SMOOTH_A ? current : DIODE_SMOOTH_A);
	*ret_d = share * x->id;
	*ret_q = share * x->iq;
}

/*
 * A phase is open: its terminal takes the voltage along its own axis that lets
 * the current along that axis (the phase's own) die away and stay at zero.
 */
static inline void open_phase(int phase, const struct constants *k, const struct state *x, double c,
                              double s, struct state *d)
{
	static const double AXES[3][2] = {
	    {1, 0}, {-0.5, 0.86602540378443865}, {-0.5, -0.86602540378443865}};
	const double *axis = AXES[phase - 1];
	double along_d = c * axis[0] + s * axis[1], along_q = c * axis[1] - s * axis[0];
	double current = x->id * along_d + x->iq * along_q;
	double across = x->iq * along_d - x->id * along_q;
	double rate = d->id * along_d + d->iq * along_q - k->p * x->w * across;
	double reach = along_d * along_d * k->inv_ld + along_q * along_q * k->inv_lq;
	double voltage = (-current / OPEN_PHASE_S - rate) / reach;
	d->id += along_d * voltage * k->inv_ld;
	d->iq += along_q * voltage * k->inv_lq;
}

static inline __attribute__((always_inline)) void electrical(const struct plant *plant,
                                                             const struct constants *k,
                                                             const struct state *x,
                                                             struct slope *slope)
{
	double md, mq, c, s, we = k->p * x->w;
	frame_at(plant, k->p * (x->angle - k->start_angle), &c, &s);
	if (plant->pulses_on) {
		md = plant->duty_alpha * c + plant->duty_beta * s;
		mq = plant->duty_beta * c - plant->duty_alpha * s;
	} else {
		diodes(x, &md, &mq);
	}
	slope->d.id =
	    (md * x->v - plant->resistance_ohm * x->id + we * plant->lq_h * x->iq) * k->inv_ld;
	slope->d.iq =
	    (mq * x->v - plant->resistance_ohm * x->iq - we * (plant->ld_h * x->id + plant->flux_wb)) *
	    k->inv_lq;
	if (plant->blocked) {
		slope->d.id = slope->d.iq = 0;
	} else if (plant->no_path) {
		slope->d.id = -x->id / OPEN_PHASE_S;
		slope->d.iq = -x->iq / OPEN_PHASE_S;
	} else if (plant->open_phase) {
		open_phase(plant->open_phase, k, x, c, s, &slope->d);
	}

	double converter = 1.5 * (md * x->id + mq * x->iq);
	double supply =
	    plant->supply_v > x->v ? (plant->supply_v - x->v) / plant->source_resistance_ohm : 0;
	double resistors = x->v / plant->bleeder_ohm;
	if (plant->chopper_closed)
		resistors += x->v / plant->chopper_ohm;
	slope->d.v = (supply - converter - resistors) * k->inv_c;
	/* Counted behind the source resistance: what reaches the capacitor. */
	slope->supply = supply * x->v;
	slope->resistors = resistors * x->v;
	slope->copper = 1.5 * plant->resistance_ohm * (x->id * x->id + x->iq * x->iq);
}

static inline __attribute__((always_inline)) void mechanical(const struct plant *plant,
                                                             const struct constants *k,
                                                             const struct state *x,
                                                             struct slope *slope)
{
	double torque = 1.5 * k->p * (plant->flux_wb + (plant->ld_h - plant->lq_h) * x->id) * x->iq;
	slope->d.angle = x->w;
	if (plant->stiffness_nm_rad > 0) {
		double load = load_at(plant->load, x->load_w);
		double at_motor = plant->motor_friction_share * friction_at(plant, x->w);
		double at_load = (1 - plant->motor_friction_share) * friction_at(plant, x->load_w);
		double slip = x->w - x->load_w;
		double shaft = plant->stiffness_nm_rad * x->twist + plant->damping_nms * slip;
		slope->d.w = (torque - at_motor - shaft) * k->inv_j;
		slope->d.load_w = (shaft - load - at_load) * k->inv_load_j;
		slope->d.twist = slip;
		slope->friction = at_motor * x->w + at_load * x->load_w + plant->damping_nms * slip * slip;
		slope->load = load * x->load_w;
		return;
	}
	double load = load_at(plant->load, x->w), friction = friction_at(plant, x->w);
	slope->d.w = slope->d.load_w = (torque - load - friction) * k->inv_j;
	slope->d.twist = 0;
	slope->friction = friction * x->w;
	slope->load = load * x->w;
}

static inline __attribute__((always_inline)) void slope_at(const struct plant *plant,
                                                           const struct constants *k,
                                                           const struct state *x,
                                                           struct slope *slope)
{
	electrical(plant, k, x, slope);
	mechanical(plant, k, x, slope);
}

static inline struct state moved(const struct state *x, const struct slope *k, double h)
{
	return (struct state){
	    .id = x->id + h * k->d.id,
	    .iq = x->iq + h * k->d.iq,
	    .w = x->w + h * k->d.w,
	    .angle = x->angle + h * k->d.angle,
	    .v = x->v + h * k->d.v,
	    .load_w = x->load_w + h * k->d.load_w,
	    .twist = x->twist + h * k->d.twist,
	};
}

static inline double weighed(double h, double k1, double k2, double k3, double k4)
{
	return h / 6 * (k1 + 2 * (k2 + k3) + k4);
}

static void runge_kutta(struct plant *plant, double h)
{
	bool rigid = plant->stiffness_nm_rad <= 0;
	struct state x = {plant->current_d_a, plant->current_q_a, plant->speed_rad_s,
	                  plant->angle_rad,   plant->dc_v,        plant->load_speed_rad_s,
	                  plant->twist_rad};
	struct constants k = {
	    .start_angle = plant->angle_rad,
	    .p = plant->pole_pairs,
	    .inv_ld = 1 / plant->ld_h,
	    .inv_lq = 1 / plant->lq_h,
	    .inv_j = 1 / (rigid ? plant->inertia_kgm2 : plant->inertia_kgm2 - plant->load_inertia_kgm2),
	    .inv_load_j = 1 / plant->load_inertia_kgm2,
	    .inv_c = 1 / plant->capacitance_f,
	    .supply_s = 1 / plant->source_resistance_ohm,
	    .resistors_s =
	        1 / plant->bleeder_ohm + (plant->chopper_closed ? 1 / plant->chopper_ohm : 0),
	};
	struct slope k1, k2, k3, k4;
	slope_at(plant, &k, &x, &k1);
	struct state y = moved(&x, &k1, h / 2);
	slope_at(plant, &k, &y, &k2);
	y = moved(&x, &k2, h / 2);
	slope_at(plant, &k, &y, &k3);
	y = moved(&x, &k3, h);
	slope_at(plant, &k, &y, &k4);

	plant->current_d_a += weighed(h, k1.d.id, k2.d.id, k3.d.id, k4.d.id);
	plant->current_q_a += weighed(h, k1.d.iq, k2.d.iq, k3.d.iq, k4.d.iq);
	plant->speed_rad_s += weighed(h, k1.d.w, k2.d.w, k3.d.w, k4.d.w);
	plant->angle_rad += weighed(h, k1.d.angle, k2.d.angle, k3.d.angle, k4.d.angle);
	plant->dc_v += weighed(h, k1.d.v, k2.d.v, k3.d.v, k4.d.v);
	if (rigid) {
		plant->load_speed_rad_s = plant->speed_rad_s;
	} else {
		plant->load_speed_rad_s += weighed(h, k1.d.load_w, k2.d.load_w, k3.d.load_w, k4.d.load_w);
		plant->twist_rad += weighed(h, k1.d.twist, k2.d.twist, k3.d.twist, k4.d.twist);
	}
	struct plant_energies *e = &plant->energies;
	e->supply += weighed(h, k1.supply, k2.supply, k3.supply, k4.supply);
	e->copper += weighed(h, k1.copper, k2.copper, k3.copper, k4.copper);
	e->friction += weighed(h, k1.friction, k2.friction, k3.friction, k4.friction);
	e->load += weighed(h, k1.load, k2.load, k3.load, k4.load);
	e->resistors += weighed(h, k1.resistors, k2.resistors, k3.resistors, k4.resistors);
}

static void turn_rotor_frame(struct plant *plant)
{
	while (plant->angle_rad >= TWO_PI) {
		plant->angle_rad -= TWO_PI;
		plant->turns++;
	}
	while (plant->angle_rad < 0) {
		plant->angle_rad += TWO_PI;
		plant->turns--;
	}
	/* A tiny negative angle may round to a whole turn. */
	if (plant->angle_rad >= TWO_PI)
		plant->angle_rad = 0;
	sincos(plant->angle_rad * plant->pole_pairs, &plant->sin_elec, &plant->cos_elec);
}

/* Back-EMF as a share of what the diodes hold off; from 1 on it pushes current through them. */
static double emf_share(const struct plant *plant)
{
	double emf = fabs(plant->speed_rad_s) * plant->pole_pairs * plant->flux_wb;
	return emf / (DIODE_SHARE * plant->dc_v);
}

static void step_off(struct plant *plant, double h)
{
	if (plant->blocked && emf_share(plant) >= 1)
		plant->blocked = false;
	if (plant->blocked) {
		runge_kutta(plant, h);
		turn_rotor_frame(plant);
		return;
	}
	double smallest = plant->ld_h < plant->lq_h ? plant->ld_h : plant->lq_h;
	double stiff = smallest * DIODE_SMOOTH_A / (DIODE_SHARE * plant->dc_v);
	int parts = (int)fmin(ceil(h / stiff), 1000);
	for (int i = 0; i < parts; i++)
		runge_kutta(plant, h / parts);
	turn_rotor_frame(plant);
	/* Where the smoothed diodes would settle, real ones have stopped conducting. */
	double share = emf_share(plant);
	double settled = DIODE_ZERO_A + 1.1 * share * DIODE_SMOOTH_A;
	if (share < 1 && hypot(plant->current_d_a, plant->current_q_a) < settled) {
		plant->blocked = true;
		plant->current_d_a = plant->current_q_a = 0;
	}
}

static void derive(struct plant *plant)
{
	double alpha = plant->current_d_a * plant->cos_elec - plant->current_q_a * plant->sin_elec;
	double beta = plant->current_d_a * plant->sin_elec + plant->current_q_a * plant->cos_elec;
	plant->phase_a[0] = alpha;
	plant->phase_a[1] = -0.5 * alpha + 0.86602540378443865 * beta;
	plant->phase_a[2] = -0.5 * alpha - 0.86602540378443865 * beta;
	plant->torque_nm = 1.5 * plant->pole_pairs *
	                   (plant->flux_wb + (plant->ld_h - plant->lq_h) * plant->current_d_a) *
	                   plant->current_q_a;
}

void plant_start(struct plant *plant)
{
	plant->resistance_ohm = plant->resistance_20_ohm * (1 + COPPER_PER_K * (plant->winding_c - 20));
	plant->blocked = true;
	plant->load_speed_rad_s = plant->speed_rad_s;
	turn_rotor_frame(plant);
	derive(plant);
}

void plant_step(struct plant *plant, double h_s, int parts)
{
	double speed_before = plant->speed_rad_s;
	if (plant->dc_v > plant->chopper_on_v)
		plant->chopper_closed = true;
	else if (plant->dc_v < plant->chopper_off_v)
		plant->chopper_closed = false;
	for (int i = 0; i < parts; i++) {
		if (plant->pulses_on) {
			plant->blocked = false;
			runge_kutta(plant, h_s / parts);
			turn_rotor_frame(plant);
		} else {
			step_off(plant, h_s / parts);
		}
	}
	derive(plant);
	if (plant->stiffness_nm_rad > 0) {
		plant->shaft_torque_nm =
		    plant->stiffness_nm_rad * plant->twist_rad +
		    plant->damping_nms * (plant->speed_rad_s - plant->load_speed_rad_s);
		return;
	}
	double friction = friction_at(plant, plant->speed_rad_s);
	plant->shaft_torque_nm = load_at(plant->load, plant->speed_rad_s) +
	                         (1 - plant->motor_friction_share) * friction +
	                         plant->load_inertia_kgm2 * (plant->speed_rad_s - speed_before) / h_s;
}

void plant_heat(struct plant *plant, double h_s, double copper_j)
{
	double away = (plant->winding_c - plant->ambient_c) / plant->thermal_resistance_kw * h_s;
	plant->winding_c += (copper_j - away) / plant->thermal_capacitance_jk;
	plant->resistance_ohm = plant->resistance_20_ohm * (1 + COPPER_PER_K * (plant->winding_c - 20));
}

double plant_stored(const struct plant *plant)
{
	double motor_j = plant->inertia_kgm2 - plant->load_inertia_kgm2;
	return 0.5 * plant->capacitance_f * plant->dc_v * plant->dc_v +
	       0.5 * motor_j * plant->speed_rad_s * plant->speed_rad_s +
	       0.5 * plant->load_inertia_kgm2 * plant->load_speed_rad_s * plant->load_speed_rad_s +
	       0.5 * plant->stiffness_nm_rad * plant->twist_rad * plant->twist_rad +
	       0.75 * (plant->ld_h * plant->current_d_a * plant->current_d_a +
	               plant->lq_h * plant->current_q_a * plant->current_q_a);
}
