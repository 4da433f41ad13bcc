/* SPDX-License-Identifier: Apache-2.0 */
/* Steps, conditions and values in words, and how long a list of steps takes. */
#include <math.h>
#include <stdarg.h>
#include <stdio.h>
#include <string.h>

#include "rig.h"
#include "step.h"

/* A sum that saturates at the longest time of a file. */
static int64_t add_ns(int64_t a, int64_t b)
{
	return a > NS_MOST - b ? NS_MOST : a + b;
}

static int64_t times_ns(int64_t ns, int times)
{
	return times > 0 && ns > NS_MOST / times ? NS_MOST : ns * times;
}

void steps_duration(const struct step *steps, size_t count, int64_t *ret_least, int64_t *ret_most)
{
	*ret_least = *ret_most = 0;
	for (size_t i = 0; i < count; i++) {
		const struct step *step = &steps[i];
		int64_t least = 0, most = 0;
		switch (step->kind) {
		case STEP_HOLD:
		case STEP_SILENCE:
			least = most = step->duration_ns;
			break;
		case STEP_RAMP:
			least = most = step->wait ? step->duration_ns : 0;
			break;
		case STEP_AWAIT:
			least = step->condition.for_ns;
			most = step->timeout_ns;
			break;
		case STEP_CYCLE:
			steps_duration(step->steps, step->step_count, &least, &most);
			least = times_ns(least, step->times);
			most = times_ns(most, step->times);
			break;
		case STEP_SET:
		case STEP_ATTEMPT:
		case STEP_MARK:
			break;
		}
		*ret_least = add_ns(*ret_least, least);
		*ret_most = add_ns(*ret_most, most);
	}
}

const char *channel_value_text(const struct rig *rig, int channel, double value, char *buffer,
                               size_t size)
{
	const struct channel_info *info = &rig->channels[channel].info;
	for (size_t i = 0; i < info->name_count; i++)
		if (info->named_values[i] == value) {
			(void)snprintf(buffer, size, "%s", info->value_names[i]);
			return buffer;
		}
	bool plain = !info->unit || info->unit == unit_one();
	/* 10 digits show every 32-bit value; adding 0 turns -0 into 0. */
	(void)snprintf(buffer, size, "%.10g%s%s", value + 0.0, plain ? "" : " ",
	               plain ? "" : info->unit->name);
	return buffer;
}

/* A buffer that is filled piece by piece. */
struct pen {
	char *at;
	size_t left;
};

__attribute__((format(printf, 2, 3))) static void put(struct pen *pen, const char *format, ...)
{
	va_list args;
	va_start(args, format);
	int length = vsnprintf(pen->at, pen->left, format, args);
	va_end(args);
	if (length < 0 || pen->left == 0)
		return;
	size_t used = (size_t)length < pen->left ? (size_t)length : pen->left - 1;
	pen->at += used;
	pen->left -= used;
}

static void put_value(struct pen *pen, const struct rig *rig, int channel, double value)
{
	char buffer[96];
	put(pen, "%s", channel_value_text(rig, channel, value, buffer, sizeof buffer));
}

static void put_duration(struct pen *pen, const char *before, int64_t ns)
{
	char buffer[40];
	put(pen, "%s%s", before, duration_text(ns, buffer, sizeof buffer));
}

static void put_condition(struct pen *pen, const struct condition *condition, const struct rig *rig)
{
	static const char *const WORDS[] = {"is", "above", "below", "between"};
	put(pen, "%s %s ", rig->channels[condition->channel].info.name, WORDS[condition->kind]);
	put_value(pen, rig, condition->channel, condition->a);
	if (condition->kind == CONDITION_BETWEEN) {
		put(pen, " and ");
		put_value(pen, rig, condition->channel, condition->b);
	}
	if (condition->for_ns > 0)
		put_duration(pen, " for ", condition->for_ns);
}

const char *condition_text(const struct condition *condition, const struct rig *rig, char *buffer,
                           size_t size)
{
	struct pen pen = {buffer, size};
	put_condition(&pen, condition, rig);
	return buffer;
}

static void put_attempt(struct pen *pen, const struct attempt *attempt, const struct rig *rig)
{
	static const char *const READ[] = {"", "coils", "discrete inputs", "holding registers",
	                                   "input registers"};
	const struct link_request *request = &attempt->request;
	put(pen, "attempt %s: ", attempt->name);
	if (attempt->channel >= 0) {
		put(pen, "%s = ", rig->channels[attempt->channel].info.name);
		put_value(pen, rig, attempt->channel, attempt->value);
		return;
	}
	const char *device = rig->devices[attempt->device].name;
	int function = request->function == LINK_RAW ? request->pdu[0] : (int)request->function;
	if (function <= LINK_READ_INPUT_REGISTERS && request->pdu_length != 1)
		put(pen, "read %d %s at %d of %s", request->count, READ[function], request->address,
		    device);
	else
		put(pen, "function %d of %s", function, device);
}

const char *step_text(const struct step *step, const struct rig *rig, char *buffer, size_t size)
{
	struct pen pen = {buffer, size};
	if (size > 0)
		buffer[0] = '\0';
	switch (step->kind) {
	case STEP_SET:
	case STEP_RAMP:
		for (size_t i = 0; i < step->assign_count; i++) {
			put(&pen, "%s%s %s ",
			    i                        ? ", "
			    : step->kind == STEP_SET ? "set "
			                             : "ramp ",
			    rig->channels[step->assigns[i].channel].info.name,
			    step->kind == STEP_SET ? "=" : "to");
			put_value(&pen, rig, step->assigns[i].channel, step->assigns[i].value);
		}
		if (step->kind == STEP_RAMP)
			put_duration(&pen, " over ", step->duration_ns);
		break;
	case STEP_HOLD:
		put_duration(&pen, "hold ", step->duration_ns);
		break;
	case STEP_AWAIT:
		put(&pen, "await ");
		put_condition(&pen, &step->condition, rig);
		put_duration(&pen, ", at most ", step->timeout_ns);
		break;
	case STEP_SILENCE:
		put(&pen, "silence %s", rig->devices[step->device].name);
		put_duration(&pen, " for ", step->duration_ns);
		break;
	case STEP_ATTEMPT:
		put_attempt(&pen, &step->attempt, rig);
		break;
	case STEP_CYCLE:
		put(&pen, "cycle %zu steps %d times", step->step_count, step->times);
		break;
	case STEP_MARK:
		put(&pen, "mark when ");
		put_condition(&pen, &step->condition, rig);
		break;
	}
	return buffer;
}
