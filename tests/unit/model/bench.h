/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_TEST_MODEL_BENCH_H
#define DRIVETRIAL_TEST_MODEL_BENCH_H
/* A modelled bench for tests: signals by name, times in ms, speeds in rpm. */
#include <string.h>

#include "model_inner.h"
#include "near.h"

#define RPM (6.28318530717958647692 / 60)
#define DEG (6.28318530717958647692 / 360)

static inline struct model *bench_of(const struct model_config *config)
{
	struct model *model = NULL;
	struct err err = {0};
	if (model_new(config, &model, &err) < 0)
		fail_msg("%s", err.message);
	return model;
}

/* defect: a name or NULL. */
static inline struct model *bench_new(const char *defect)
{
	struct model_config config;
	model_config_init(&config);
	if (defect) {
		int row = model_defect_find(defect);
		assert_true(row >= 0);
		config.defects = UINT64_C(1) << row;
	}
	return bench_of(&config);
}

static inline int bench_signal(const char *name)
{
	int signal = model_signal_find(name, strlen(name));
	if (signal < 0)
		fail_msg("no signal %s", name);
	return signal;
}

static inline double bench_read(struct model *model, const char *name)
{
	return model_read(model, bench_signal(name));
}

static inline void bench_write(struct model *model, const char *name, double value)
{
	if (model_write(model, bench_signal(name), value) != MODEL_ACCEPTED)
		fail_msg("%s = %g was refused", name, value);
}

static inline void bench_run(struct model *model, double ms)
{
	model_advance(model, model_now(model) + (int64_t)(ms * 1e6));
}

/* Enabled, load enabled, at speed and load. */
static inline void bench_drive(struct model *model, double rpm, double load_nm)
{
	bench_write(model, "controller.control", 0);
	bench_write(model, "controller.control", 1);
	bench_write(model, "load.control", 0);
	bench_write(model, "load.control", 1);
	bench_write(model, "controller.speed_command", rpm * RPM);
	bench_write(model, "load.torque_command", load_nm);
	bench_run(model, 600);
}

/* Means of the analyser's current vector in the true rotor frame, over so many ms. */
static inline void bench_true_current(struct model *model, int ms, double *ret_d, double *ret_q)
{
	*ret_d = *ret_q = 0;
	for (int i = 0; i < ms; i++) {
		bench_run(model, 1);
		double a = bench_read(model, "analyser.current_a");
		double b = bench_read(model, "analyser.current_b");
		double c = bench_read(model, "analyser.current_c");
		double angle = bench_read(model, "analyser.rotor_angle");
		double third = 6.28318530717958647692 / 3;
		*ret_d += 2.0 / 3 / ms * (a * cos(angle) + b * cos(angle - third) + c * cos(angle + third));
		*ret_q -= 2.0 / 3 / ms * (a * sin(angle) + b * sin(angle - third) + c * sin(angle + third));
	}
}

static inline double bench_mean(struct model *model, const char *name, int ms)
{
	double sum = 0;
	for (int i = 0; i < ms; i++) {
		bench_run(model, 1);
		sum += bench_read(model, name);
	}
	return sum / ms;
}

#endif
