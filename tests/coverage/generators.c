/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Simulated measurements with a truth in closed form. Noise, jitter,
 * quantisation, refresh, skew between transactions and lost samples are drawn
 * at random each time. Metrics that state what was sampled ("largest of a
 * sample") get errors of instruments within their limits instead of noise,
 * for noise is part of what was sampled.
 */
#include "tally.h"

#define PI 3.14159265358979323846

static double draw(struct campaign *c, double low, double high)
{
	return random_between(&c->random, low, high);
}

static bool chance(struct campaign *c, double share)
{
	return random_uniform(&c->random) < share;
}

static double rounded(double value, double resolution)
{
	return resolution > 0 ? resolution * round(value / resolution) : value;
}

/* How a channel is polled. */
struct polling {
	double interval, jitter, width, refresh; /* ms */
	double lost;                             /* share of rows */
};

static struct polling draw_polling(struct campaign *c, double interval)
{
	return (struct polling){
	    .interval = interval,
	    .jitter = draw(c, 0, 0.15 * interval),
	    .width = draw(c, 0.05, 0.4) * interval,
	    .refresh = chance(c, 0.5) ? 0 : draw(c, 0.2, 0.5) * interval,
	    .lost = chance(c, 0.5) ? 0 : 0.01,
	};
}

/* The next poll at t (ms): request, reply, and when the value was taken. */
struct poll {
	double sent, received, taken;
};

static struct poll poll_at(struct campaign *c, const struct polling *p, double t)
{
	struct poll poll;
	poll.sent = t + draw(c, 0, p->jitter);
	poll.received = poll.sent + draw(c, 0.2, 1) * p->width;
	poll.taken = draw(c, poll.sent, poll.received) - draw(c, 0, 1) * p->refresh;
	return poll;
}

static void add(struct campaign *c, struct recording *rec, int channel, const struct polling *p,
                const struct poll *poll, double value)
{
	if (chance(c, p->lost))
		value = (double)NAN;
	recording_add(rec, channel, MS(poll->sent), MS(poll->received), value);
}

/* --- step response ----------------------------------------------------------- */

static double second_order(double zeta, double x)
{
	if (x <= 0)
		return 0;
	double damped = sqrt(1 - zeta * zeta);
	return 1 - exp(-zeta * x) * (cos(damped * x) + zeta / damped * sin(damped * x));
}

static double passage(double zeta, double level)
{
	double low = 0, high = PI / sqrt(1 - zeta * zeta);
	for (int i = 0; i < 60; i++) {
		double middle = (low + high) / 2;
		*(second_order(zeta, middle) < level ? &low : &high) = middle;
	}
	return low;
}

static double last_entry(double zeta, double band)
{
	double x = -log(band * sqrt(1 - zeta * zeta)) / zeta;
	while (x > 0 && fabs(second_order(zeta, x) - 1) < band)
		x -= 1e-3;
	return x + 5e-4;
}

static void step_response(struct campaign *c)
{
	static struct recording rec;
	static struct used_check use;
	if (rec.channel_count == 0) {
		recording_init(&rec);
		recording_channel(&rec, "speed", "rpm", EVIDENCE_SELF_REPORTED);
		check_use(&use, "step_response");
		check_int(&use, "channel", 0);
		check_int(&use, "from", 0);
		check_ns(&use, "initial_for", MS(400));
		check_ns(&use, "final_for", MS(400));
	}
	recording_clear(&rec);
	double zeta = draw(c, 0.3, 0.75), omega = draw(c, 40, 120), step = chance(c, 0.5) ? -600 : 900;
	struct polling p = draw_polling(c, 2);
	double noise = draw(c, 0, chance(c, 0.5) ? 0.001 : 0.008) * fabs(step);
	rec.channels[0].resolution = chance(c, 0.5) ? 0 : draw(c, 0, 2);
	rec.channels[0].refresh_ns = MS(p.refresh);
	double mark = draw(c, 0, 1), command = draw(c, 0, mark);
	recording_mark(&rec, "commanded", 0, MS(mark));
	recording_command(&rec, 0, 100 + step, 0, MS(mark));
	rec.begin_ns = MS(-450);
	double end = 1e3 * (9 / zeta / omega) + 400;
	rec.end_ns = MS(end);
	for (double t = -449 + draw(c, 0, 1); t < end; t += p.interval) {
		struct poll poll = poll_at(c, &p, t);
		double x = (poll.taken - command) * 1e-3 * omega;
		double value = 100 + step * second_order(zeta, x) + noise * random_normal(&c->random);
		add(c, &rec, 0, &p, &poll, rounded(value, rec.channels[0].resolution));
	}
	check_run(&use, &rec);
	tally_add(c, &use, "dead_time", passage(zeta, 0.05) / omega);
	tally_add(c, &use, "rise_time", (passage(zeta, 0.9) - passage(zeta, 0.1)) / omega);
	tally_add(c, &use, "peak_time", PI / sqrt(1 - zeta * zeta) / omega);
	tally_add(c, &use, "overshoot", 100 * exp(-PI * zeta / sqrt(1 - zeta * zeta)));
	tally_add(c, &use, "undershoot", 100 * exp(-2 * PI * zeta / sqrt(1 - zeta * zeta)));
	tally_add(c, &use, "settling_time", last_entry(zeta, 0.02) / omega);
	tally_add(c, &use, "steady_state_error", 0);
	if (rec.channels[0].resolution == 0 && noise > 5e-4 * fabs(step))
		tally_add(c, &use, "ripple_rms", noise);
}

/* --- load step --------------------------------------------------------------- */

static double dip(double x)
{
	double w = sqrt(3) / 4 * x;
	return x <= 0 ? 0 : 2 * exp(-x / 2) + exp(-x / 4) * (-2 * cos(w) + 2 * sqrt(3) * sin(w));
}

static void load_step(struct campaign *c)
{
	static struct recording rec;
	static struct used_check use;
	if (rec.channel_count == 0) {
		recording_init(&rec);
		recording_channel(&rec, "bench_speed", "rad/s", EVIDENCE_INDEPENDENT);
		check_use(&use, "load_step");
		check_int(&use, "channel", 0);
		check_int(&use, "from", 0);
		check_ns(&use, "initial_for", MS(400));
	}
	recording_clear(&rec);
	double lag = draw(c, 5, 12), size = draw(c, 2, 8) * (chance(c, 0.5) ? 1 : -1);
	struct polling p = draw_polling(c, 1.5);
	p.lost = 0;
	double noise = draw(c, 0, 0.01) * fabs(size);
	rec.channels[0].resolution = chance(c, 0.5) ? 0 : draw(c, 0, 0.01) * fabs(size);
	rec.channels[0].refresh_ns = MS(p.refresh);
	double mark = draw(c, 0, 1), command = draw(c, 0, mark);
	recording_mark(&rec, "loaded", 0, MS(mark));
	rec.begin_ns = MS(-450);
	rec.end_ns = MS(55 * lag);
	for (double t = -449 + draw(c, 0, 1); t < 55 * lag; t += p.interval) {
		struct poll poll = poll_at(c, &p, t);
		double value =
		    100 - size * dip((poll.taken - command) / lag) + noise * random_normal(&c->random);
		add(c, &rec, 0, &p, &poll, rounded(value, rec.channels[0].resolution));
	}
	/* The band is 10 % of the dip: entered at 12.3526 lags (SciPy). */
	check_double(&use, "band", 0.1 * 1.770297 * fabs(size) / 314.159265358979);
	check_run(&use, &rec);
	tally_add(c, &use, "deviation", 1.770297 * fabs(size));
	tally_add(c, &use, "deviation_time", 3.08934e-3 * lag);
	tally_add(c, &use, "recovery_time", 12.3526e-3 * lag);
	tally_add(c, &use, "deviation_area", 8.778704e-3 * lag * fabs(size));
	tally_add(c, &use, "lasting_deviation", 0);
}

/* --- tracking ---------------------------------------------------------------- */

static void tracking(struct campaign *c)
{
	static struct recording rec;
	static struct used_check use;
	if (rec.channel_count == 0) {
		recording_init(&rec);
		recording_channel(&rec, "speed", "rpm", EVIDENCE_SELF_REPORTED);
		recording_channel(&rec, "speed_command", "rpm", EVIDENCE_SELF_REPORTED);
		check_use(&use, "tracking");
		check_int(&use, "channel", 0);
		check_int(&use, "command", 1);
		check_window(&use, -1, MS(200), MS(400));
	}
	recording_clear(&rec);
	struct polling p = draw_polling(c, 2);
	double rate = draw(c, -3, 3), lag = draw(c, 5, 30), limit = draw(c, 0, 4);
	double error = draw(c, -1, 1) * limit, stair = 4;
	static double at[400];
	rec.channels[0].accuracy = (struct accuracy){.given = limit > 0, .absolute = limit};
	rec.channels[0].resolution = chance(c, 0.5) ? 0 : draw(c, 0, 2);
	rec.channels[0].refresh_ns = MS(p.refresh);
	rec.begin_ns = 0;
	rec.end_ns = MS(700);
	recording_command(&rec, 1, 0, MS(-20), MS(-19));
	for (int k = 0; k < 170; k++) {
		double sent = stair * k, doubt = draw(c, 0.2, 1.5);
		at[k] = sent + draw(c, 0, doubt);
		recording_command(&rec, 1, rate * stair * (k + 0.5), MS(sent), MS(sent + doubt));
	}
	double largest = 0;
	for (double t = draw(c, 0, 1); t < 690; t += p.interval) {
		struct poll poll = poll_at(c, &p, t);
		double value = rate * (poll.taken - lag * (1 - exp(-fmax(poll.taken, 0) / lag)));
		int k = 0;
		while (k + 1 < 170 && at[k + 1] <= poll.taken)
			k++;
		bool counts = poll.sent - p.refresh >= 200 && poll.received <= 600;
		size_t before = rec.series[0].rows;
		add(c, &rec, 0, &p, &poll, rounded(value + error, rec.channels[0].resolution));
		if (counts && !isnan(rec.rows[0][before].value))
			largest = fmax(largest, fabs(value - rate * stair * (k + 0.5)));
	}
	check_run(&use, &rec);
	tally_add(c, &use, "following_error", largest);
	if (fabs(rate) < 0.5)
		return;
	tally_add(c, &use, "mean_error", -rate * lag);
	tally_add(c, &use, "lag", lag * 1e-3);
}

/* --- agreement --------------------------------------------------------------- */

static void agreement(struct campaign *c)
{
	static struct recording rec;
	static struct used_check use;
	if (rec.channel_count == 0) {
		recording_init(&rec);
		recording_channel(&rec, "torque_estimate", "Nm", EVIDENCE_SELF_REPORTED);
		recording_channel(&rec, "shaft_torque", "Nm", EVIDENCE_INDEPENDENT);
		check_use(&use, "agreement");
		check_int(&use, "a", 0);
		check_int(&use, "b", 1);
	}
	recording_clear(&rec);
	struct polling p = draw_polling(c, 2);
	double offset = draw(c, -0.3, 0.3), limit = draw(c, 0.005, 0.03), swing = draw(c, 0, 0.05);
	double error = draw(c, -1, 1) * limit, turn = draw(c, 1, 6), phase = draw(c, 0, 6.28);
	rec.channels[1].accuracy = (struct accuracy){.given = true, .absolute = limit};
	rec.channels[0].resolution = chance(c, 0.5) ? 0 : draw(c, 0, 0.02);
	rec.channels[0].refresh_ns = MS(p.refresh);
	rec.begin_ns = 0;
	rec.end_ns = MS(400);
	for (double t = draw(c, 0, 1); t < 399; t += p.interval) {
		struct poll a = poll_at(c, &p, t), b = poll_at(c, &p, t + 0.8);
		b.taken = draw(c, b.sent, b.received);
		double ya = 2 + swing * sin(turn * 2 * PI * a.taken * 1e-3 + phase) + offset;
		double yb = 2 + swing * sin(turn * 2 * PI * b.taken * 1e-3 + phase) + error;
		add(c, &rec, 0, &p, &a, rounded(ya, rec.channels[0].resolution));
		add(c, &rec, 1, &p, &b, yb);
	}
	check_run(&use, &rec);
	tally_add(c, &use, "mean_difference", offset);
	tally_add(c, &use, "largest_difference", fabs(offset));
	tally_add(c, &use, "relative_difference", 100 * offset / 2);
}

/* --- encoder ----------------------------------------------------------------- */

static double turn_of(double degrees)
{
	return degrees - 360 * floor(degrees / 360);
}

static void encoder(struct campaign *c)
{
	static struct recording rec;
	static struct used_check use;
	if (rec.channel_count == 0) {
		recording_init(&rec);
		recording_channel(&rec, "rotor_angle", "deg_mech", EVIDENCE_SELF_REPORTED);
		recording_channel(&rec, "bench_angle", "deg_mech", EVIDENCE_INDEPENDENT);
		check_use(&use, "encoder");
		check_int(&use, "angle", 0);
		check_int(&use, "reference", 1);
		rec.channels[0].resolution = 360.0 / 4096;
	}
	recording_clear(&rec);
	double speed = draw(c, 3, 20), sine = draw(c, 0.2, 1.5), drift = draw(c, -1, 1);
	double offset = draw(c, -2, 2), phase = draw(c, 0, 6.28), noise = draw(c, 0, 0.3);
	double limit = draw(c, 0.02, 0.2), error = draw(c, -1, 1) * limit;
	rec.channels[1].accuracy = (struct accuracy){.given = true, .absolute = limit};
	rec.begin_ns = 0;
	rec.end_ns = MS(801);
	struct polling p = draw_polling(c, 2);
	bool eccentric = chance(c, 0.7); /* the reference errs once per turn too */
	if (chance(c, 0.35))
		noise = 0;
	double first = (double)NAN, last = 0, largest = 0;
	for (double t = 0.5; t < 800; t += p.interval) {
		struct poll poll = poll_at(c, &p, t);
		double deg = 360 * speed * poll.taken * 1e-3;
		double shown = deg + sine * sin(deg * PI / 180 + phase) + drift * (t - 400) / 800 + offset;
		recording_add(&rec, 0, MS(poll.sent), MS(poll.received),
		              turn_of(rounded(shown, 360.0 / 4096)));
		recording_add(&rec, 1, MS(poll.sent), MS(poll.received),
		              turn_of(deg + error * (eccentric ? sin(deg * PI / 180) : 1) +
		                      noise * random_normal(&c->random)));
		first = isnan(first) ? poll.received : first;
		last = poll.received;
		largest = fmax(largest, fabs(shown - deg));
	}
	rec.series[0].block = rec.series[1].block = 1;
	check_run(&use, &rec);
	tally_add(c, &use, "once_per_turn", sine);
	tally_add(c, &use, "drift", drift * (last - first) / 800);
	tally_add(c, &use, "mean_error", offset);
	if (noise == 0)
		tally_add(c, &use, "angle_error", largest);
}

/* --- modulation -------------------------------------------------------------- */

static void modulation(struct campaign *c)
{
	static struct recording rec;
	static struct used_check use;
	static const char *const names[] = {"duty_a", "duty_b", "duty_c",
	                                    "alpha",  "beta",   "dc_voltage"};
	if (rec.channel_count == 0) {
		recording_init(&rec);
		check_use(&use, "modulation");
		for (int i = 0; i < 6; i++) {
			recording_channel(&rec, names[i], i < 3 ? "1" : "V", EVIDENCE_SELF_REPORTED);
			check_int(&use, names[i], i);
		}
	}
	recording_clear(&rec);
	double resolution = draw(c, 0.0002, 0.002), limit = draw(c, 0.2, 3),
	       error = draw(c, -1, 1) * limit;
	double turned = draw(c, -0.05, 0.05), shrunk = draw(c, 0.95, 1);
	for (int i = 0; i < 3; i++)
		rec.channels[i].resolution = resolution;
	rec.channels[5].accuracy = (struct accuracy){.given = true, .absolute = limit};
	rec.begin_ns = 0;
	rec.end_ns = MS(100);
	double angle_error = 0, size_error = 0, null_share = 100, use_most = 0;
	double size = draw(c, 30, 150), turn = draw(c, 0.02, 0.2);
	for (double t = 0.5; t < 99; t += 2) {
		double told = turn * t, made = told + turned, length = shrunk * size;
		double u[3], duty[3], low = 1e9, high = -1e9;
		for (int i = 0; i < 3; i++) {
			u[i] = length * cos(made - i * 2 * PI / 3);
			low = fmin(low, u[i]);
			high = fmax(high, u[i]);
		}
		for (int i = 0; i < 3; i++) {
			duty[i] = 0.5 + (u[i] - (low + high) / 2) / 300;
			recording_add(&rec, i, MS(t), MS(t + 0.5), rounded(duty[i], resolution));
		}
		recording_add(&rec, 3, MS(t), MS(t + 0.5), size * cos(told));
		recording_add(&rec, 4, MS(t), MS(t + 0.5), size * sin(told));
		recording_add(&rec, 5, MS(t), MS(t + 0.5), 300 + error);
		angle_error = fmax(angle_error, fabs(turned) * 180 / PI);
		size_error = fmax(size_error, 100 * fabs(length - size) / (300 / sqrt(3)));
		null_share = fmin(null_share, 100 * (1 - (high - low) / 300));
		use_most = fmax(use_most, 100 * size / (300 / sqrt(3)));
	}
	for (int i = 0; i < 6; i++)
		rec.series[i].block = 1;
	check_run(&use, &rec);
	tally_add(c, &use, "vector_angle_error", angle_error);
	tally_add(c, &use, "vector_magnitude_error", size_error);
	tally_add(c, &use, "null_share", null_share);
	tally_add(c, &use, "linear_use", use_most);
}

/* --- torque angle and alignment ------------------------------------------------ */

static void torque_angle(struct campaign *c)
{
	static struct recording rec;
	static struct used_check use, align;
	if (rec.channel_count == 0) {
		recording_init(&rec);
		recording_channel(&rec, "own_angle", "deg", EVIDENCE_SELF_REPORTED);
		recording_channel(&rec, "current", "A_peak", EVIDENCE_INDEPENDENT);
		recording_channel(&rec, "bench_angle", "deg", EVIDENCE_INDEPENDENT);
		check_use(&use, "torque_angle");
		check_int(&use, "channel", 2);
		check_int(&use, "current", 1);
		check_double(&use, "tolerance", 10 * PI / 180);
		check_use(&align, "alignment");
		check_int(&align, "own", 0);
		check_int(&align, "bench", 2);
		check_int(&align, "current", 1);
		check_double(&align, "tolerance", 10 * PI / 180);
		rec.machine.flux_linkage = (struct nameplate_value){0.085, 0.05};
		rec.machine.inductance_d = (struct nameplate_value){2e-3, 0.05};
		rec.machine.inductance_q = (struct nameplate_value){6e-3, 0.05};
	}
	recording_clear(&rec);
	bool computed = chance(c, 0.5);
	double noise = draw(c, 0.2, 2), kept = draw(c, 0, 0.5), limit = draw(c, 0.05, 0.5);
	double truth = 90 + draw(c, -12, 12), offset = draw(c, -15, 15), amperes = draw(c, 4, 8);
	double error = draw(c, -1, 1) * limit, target = 90;
	if (computed) { /* the machine is somewhere within its nameplate */
		double psi = 0.085 * (1 + draw(c, -0.05, 0.05)), d = 2e-3 * (1 + draw(c, -0.05, 0.05));
		double l = 6e-3 * (1 + draw(c, -0.05, 0.05)) - d;
		double i_d = (psi - sqrt(psi * psi + 8 * l * l * amperes * amperes)) / (4 * l);
		target = acos(i_d / amperes) * 180 / PI;
	}
	check_text(&use, "target", computed ? "maximum_torque_per_ampere" : "90 deg");
	rec.channels[2].accuracy = (struct accuracy){.given = true, .absolute = limit};
	rec.channels[0].resolution = chance(c, 0.5) ? 0 : draw(c, 0, 1);
	struct polling p = draw_polling(c, 2);
	p.lost = 0;
	rec.begin_ns = 0;
	rec.end_ns = MS(600);
	double a = 0, b = 0, rest = sqrt(1 - kept * kept);
	for (double t = 0.5; t < 599; t += p.interval) {
		struct poll poll = poll_at(c, &p, t);
		a = kept * a + rest * random_normal(&c->random);
		b = kept * b + rest * random_normal(&c->random);
		add(c, &rec, 0, &p, &poll,
		    remainder(rounded(truth + offset + noise * a, rec.channels[0].resolution), 360));
		add(c, &rec, 1, &p, &poll, amperes);
		add(c, &rec, 2, &p, &poll, truth + error + noise * b);
	}
	check_run(&use, &rec);
	check_run(&align, &rec);
	tally_add(c, &use, "mean", truth);
	tally_add(c, &use, "mean_error", truth - target);
	tally_add(c, &use, "spread", noise);
	tally_add(c, &use, "torque_lost", 100 * (1 - cos((truth - target) * PI / 180)));
	tally_add(c, &align, "frame_offset", offset);
}

/* --- events -------------------------------------------------------------------- */

static void fault_reaction(struct campaign *c)
{
	static struct recording rec;
	static struct used_check use;
	if (rec.channel_count == 0) {
		recording_init(&rec);
		recording_channel(&rec, "fault_code", "1", EVIDENCE_SELF_REPORTED);
		recording_channel(&rec, "shaft_torque", "Nm", EVIDENCE_INDEPENDENT);
		check_use(&use, "fault_reaction");
		check_int(&use, "from", 0);
		check_int(&use, "indication", 0);
		check_double(&use, "code", 3);
		check_int(&use, "torque", 1);
		check_double(&use, "torque_below", 0.2);
	}
	recording_clear(&rec);
	struct polling p = draw_polling(c, draw(c, 1, 8));
	double mark = draw(c, 0, 10), cause = draw(c, 0, mark);
	double seen_a = -1e9, seen_b = -1e9;
	double detection = draw(c, 0.5, 40), off = detection + draw(c, 0.5, 40);
	rec.sample_ns = MS(p.interval);
	rec.channels[0].refresh_ns = MS(p.refresh);
	rec.channels[1].refresh_ns = MS(p.refresh);
	recording_mark(&rec, "cause", 0, MS(mark));
	rec.begin_ns = MS(-100);
	rec.end_ns = MS(400);
	for (double t = -99 + draw(c, 0, 1); t < 395; t += p.interval) {
		struct poll a = poll_at(c, &p, t), b = poll_at(c, &p, t);
		/* A register image is never older than it was at the poll before. */
		a.taken = seen_a = fmax(a.taken, seen_a);
		b.taken = seen_b = fmax(b.taken, seen_b);
		add(c, &rec, 0, &p, &a, a.taken - cause < detection ? 0 : 3);
		add(c, &rec, 1, &p, &b, b.taken - cause < off ? 1 : 0);
	}
	check_run(&use, &rec);
	tally_add(c, &use, "detection_time", detection * 1e-3);
	tally_add(c, &use, "torque_off_time", off * 1e-3);
}

generator *const generators[] = {
    step_response, load_step,  tracking,     agreement,
    encoder,       modulation, torque_angle, fault_reaction,
};
const size_t generator_count = sizeof generators / sizeof generators[0];
