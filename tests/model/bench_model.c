/* SPDX-License-Identifier: Apache-2.0 */
/*
 * How much faster than real time the modelled bench runs, alone: a motor at
 * half speed under load, processor time for one minute of bench time for each length of the
 * integration step. A program to run by hand: no test asserts a time.
 */
#include <stdio.h>
#include <string.h>
#include <time.h>

#include "model.h"

static double seconds(void)
{
	struct timespec now;
	(void)clock_gettime(CLOCK_PROCESS_CPUTIME_ID, &now);
	return (double)now.tv_sec + 1e-9 * (double)now.tv_nsec;
}

static void write_signal(struct model *model, const char *name, double value)
{
	(void)model_write(model, model_signal_find(name, strlen(name)), value);
}

int main(void)
{
	for (int parts = 1; parts <= 4; parts *= 2) {
		struct model_config config;
		struct model *model;
		struct err err = {0};
		model_config_init(&config);
		config.integration_step_s = config.control_period_s / parts;
		if (model_new(&config, &model, &err) < 0) {
			(void)fprintf(stderr, "%s\n", err.message);
			return 1;
		}
		write_signal(model, "controller.control", 1);
		write_signal(model, "load.control", 1);
		write_signal(model, "controller.speed_command", 157);
		write_signal(model, "load.torque_command", 1.2);
		double begin = seconds();
		model_advance(model, 60 * NS_PER_S);
		double taken = seconds() - begin;
		printf("control period %.0f us, integration step %.0f us: %.0f times real time, "
		       "%.0f ns a control period\n",
		       1e6 * config.control_period_s, 1e6 * config.integration_step_s, 60 / taken,
		       1e9 * taken * config.control_period_s / 60);
		model_release(model);
	}
	return 0;
}
