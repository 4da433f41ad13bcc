/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Both angles are monotone in each quantity by itself, so that the corners of
 * the tolerances bound them; propagating standard deviations was rejected,
 * since a tolerance of a nameplate is a limit, not a spread.
 */
#include "operating_point.h"

#include <math.h>
#include <stdbool.h>
#include <stddef.h>

#define PI 3.14159265358979323846

double angle_of_most_torque(double psi, double l_d, double l_q, double current)
{
	double saliency = l_q - l_d;
	if (fabs(saliency) * current < 1e-9 * psi)
		return 90;
	double i_d =
	    (psi - sqrt(psi * psi + 8 * saliency * saliency * current * current)) / (4 * saliency);
	return acos(fmax(-1, fmin(1, i_d / current))) * 180 / PI;
}

static double voltage_at(double psi, double l_d, double l_q, double resistance, double speed_elec,
                         double current, double angle_deg)
{
	double i_d = current * cos(angle_deg * PI / 180), i_q = current * sin(angle_deg * PI / 180);
	double u_d = resistance * i_d - speed_elec * l_q * i_q;
	double u_q = resistance * i_q + speed_elec * (l_d * i_d + psi);
	return hypot(u_d, u_q);
}

double angle_at_voltage_limit(double psi, double l_d, double l_q, double resistance,
                              double speed_elec, double voltage, double current)
{
	double low = angle_of_most_torque(psi, l_d, l_q, current), high = 180;
	if (voltage_at(psi, l_d, l_q, resistance, speed_elec, current, low) <= voltage)
		return low; /* the limit does not bind */
	if (voltage_at(psi, l_d, l_q, resistance, speed_elec, current, high) > voltage)
		return (double)NAN;
	for (int i = 0; i < 60; i++) {
		double middle = (low + high) / 2;
		if (voltage_at(psi, l_d, l_q, resistance, speed_elec, current, middle) > voltage)
			low = middle;
		else
			high = middle;
	}
	return (low + high) / 2;
}

double torque_of(const struct machine *machine, double psi, double current, double angle_deg)
{
	double i_d = current * cos(angle_deg * PI / 180), i_q = current * sin(angle_deg * PI / 180);
	double saliency = machine->inductance_d.value - machine->inductance_q.value;
	return 1.5 * machine->pole_pairs * (psi + (isnan(saliency) ? 0 : saliency) * i_d) * i_q;
}

enum { PSI, L_D, L_Q, CURRENT, OF_TORQUE, RESISTANCE = OF_TORQUE, SPEED, VOLTAGE, OF_VOLTAGE };

static struct interval nameplate(struct nameplate_value value)
{
	double v = isnan(value.value) ? 0 : value.value;
	return (struct interval){v, v * (1 - value.tolerance), v * (1 + value.tolerance)};
}

static double solve(const double *x, int count)
{
	if (count == OF_TORQUE)
		return angle_of_most_torque(x[PSI], x[L_D], x[L_Q], x[CURRENT]);
	return angle_at_voltage_limit(x[PSI], x[L_D], x[L_Q], x[RESISTANCE], x[SPEED], x[VOLTAGE],
	                              x[CURRENT]);
}

static struct interval corners(const struct interval *quantities, int count)
{
	double x[OF_VOLTAGE];
	for (int i = 0; i < count; i++)
		x[i] = quantities[i].value;
	struct interval ret = {.value = solve(x, count)};
	ret.low = ret.high = ret.value;
	for (int corner = 0; corner < 1 << count; corner++) {
		for (int i = 0; i < count; i++)
			x[i] = corner >> i & 1 ? quantities[i].high : fmax(quantities[i].low, 0);
		double angle = solve(x, count);
		if (isnan(angle))
			angle = 180; /* past the end of the voltage ellipse */
		ret.low = fmin(ret.low, angle);
		ret.high = fmax(ret.high, angle);
	}
	return ret;
}

struct interval target_of_most_torque(const struct machine *machine,
                                      const struct operating_point *point)
{
	const struct interval quantities[OF_TORQUE] = {
	    [PSI] = nameplate(machine->flux_linkage),
	    [L_D] = nameplate(machine->inductance_d),
	    [L_Q] = nameplate(machine->inductance_q),
	    [CURRENT] = point->current,
	};
	return corners(quantities, OF_TORQUE);
}

struct interval target_at_voltage_limit(const struct machine *machine,
                                        const struct operating_point *point)
{
	struct interval speed = point->speed;
	speed.value *= machine->pole_pairs;
	speed.low *= machine->pole_pairs;
	speed.high *= machine->pole_pairs;
	const struct interval quantities[OF_VOLTAGE] = {
	    [PSI] = nameplate(machine->flux_linkage),
	    [L_D] = nameplate(machine->inductance_d),
	    [L_Q] = nameplate(machine->inductance_q),
	    [CURRENT] = point->current,
	    [RESISTANCE] = nameplate(machine->resistance),
	    [SPEED] = speed,
	    [VOLTAGE] = point->voltage,
	};
	return corners(quantities, OF_VOLTAGE);
}
