/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Block commutation: two phases on, switched by Hall sensors. Common practice:
 * the stator field stands 120 deg electrical ahead of the rotor at each
 * commutation and 60 deg when the next is due.
 */
#include "bench.h"

static struct model *block_bench(const char *defect)
{
	struct model_config config;
	model_config_init(&config);
	config.commutation = MODEL_BLOCK;
	if (defect)
		config.defects = UINT64_C(1) << model_defect_find(defect);
	return bench_of(&config);
}

/* True torque angle: straight before and just behind each commutation, over one turn and a bit. */
static void sweep(struct model *model, double *ret_before, double *ret_behind)
{
	double last = 0, now = 0;
	int sector = -1, count = 0;
	*ret_before = *ret_behind = 0;
	for (int i = 0; i < 30000 && count < 48; i++) {
		bench_run(model, 0.1);
		last = now;
		now = atan2(model->plant.current_q_a, model->plant.current_d_a) / DEG;
		int here = (int)lround(model->controller.angle_elec_rad / DEG / 60) % 6;
		if (sector >= 0 && here != sector) {
			count++;
			*ret_before += last;
			bench_run(model, 1);
			*ret_behind += atan2(model->plant.current_q_a, model->plant.current_d_a) / DEG;
		}
		sector = here;
	}
	assert_int_equal(count, 48);
	*ret_before /= count;
	*ret_behind /= count;
}

static void the_field_leads_by_120_deg_at_a_commutation_and_by_60_at_the_next(void **state)
{
	(void)state;
	struct model *model = block_bench(NULL);
	bench_drive(model, 100, 1.2);
	double before, behind;
	sweep(model, &before, &behind);
	assert_near(before, 60, 1.5, "deg");
	assert_near(behind, 120 - 4 * 100 * 6e-3, 3, "deg"); /* a millisecond behind */
	model_release(model);
}

static void turned_hall_sensors_turn_the_whole_sweep(void **state)
{
	(void)state;
	struct model *model = block_bench("encoder-offset");
	bench_drive(model, 100, 1.2);
	double before, behind;
	sweep(model, &before, &behind);
	assert_near(before, 72, 1.5, "deg");
	model_release(model);
}

static void the_phase_that_is_off_carries_nothing(void **state)
{
	(void)state;
	struct model *model = block_bench(NULL);
	bench_drive(model, 300, 1.2);
	int quiet = 0;
	for (int i = 0; i < 200; i++) {
		bench_run(model, 1);
		double a = fabs(bench_read(model, "analyser.current_a"));
		double b = fabs(bench_read(model, "analyser.current_b"));
		double c = fabs(bench_read(model, "analyser.current_c"));
		quiet += fmin(a, fmin(b, c)) < 0.03 && fmax(a, fmax(b, c)) > 1.5;
	}
	assert_true(quiet > 150); /* all but the milliseconds of a commutation */
	model_release(model);
}

static void speed_is_controlled_both_ways_and_no_phase_loss_is_seen(void **state)
{
	(void)state;
	struct model *model = block_bench(NULL);
	static const double SPEEDS[] = {1500, -1500, 300, -100, 0};
	for (size_t i = 0; i < 5; i++) {
		bench_drive(model, SPEEDS[i], 1.2);
		assert_near(bench_mean(model, "shaft.speed", 100) / RPM, SPEEDS[i], 3, "rpm");
		assert_near(bench_read(model, "controller.fault_code"), 0, 0, "");
	}
	bench_drive(model, 600, 1.2);
	bench_write(model, "fault_box.phase_open", 1);
	bench_run(model, 120);
	assert_near(bench_read(model, "controller.running"), 0, 0, "");
	model_release(model);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(the_field_leads_by_120_deg_at_a_commutation_and_by_60_at_the_next),
	    cmocka_unit_test(turned_hall_sensors_turn_the_whole_sweep),
	    cmocka_unit_test(the_phase_that_is_off_carries_nothing),
	    cmocka_unit_test(speed_is_controlled_both_ways_and_no_phase_loss_is_seen),
	};
	return RUN_GROUP(tests);
}
