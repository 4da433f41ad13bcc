/* SPDX-License-Identifier: Apache-2.0 */
/*
 * See plan_timing.h. What is kept of a measured round trip is what bits and
 * silences do not explain: a turnaround of the device (with stacks, adapters
 * and this machine) and a share for each register, by least squares over the
 * blocks. So a suite that reads other blocks than the survey did is still
 * foreseen. Keeping the round trips alone was rejected: they fit one block only.
 *
 * "At most" is the 95th percentile: one hiccup of a scheduler in a survey must
 * not decide what a suite is told, and a single slow row only widens the one
 * interval that it lies in.
 */
#include "plan_timing.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

#include <jansson.h>

#include "survey_read.h"

enum { TIMING_VERSION = 1 };

int bench_timing_assume(const struct rig *rig, struct arena *arena, struct bench_timing *ret,
                        struct err *reterr)
{
	*ret = (struct bench_timing){
	    .rig = rig,
	    .device = arena_array(arena, rig->device_count + 1, sizeof *ret->device),
	    .between_ns = arena_array(arena, rig->link_count + 1, sizeof *ret->between_ns),
	};
	if (!ret->device || !ret->between_ns)
		return err_set(reterr, ERR_NOMEM, "no memory for the timing of the links");
	for (size_t d = 0; d < rig->device_count; d++) {
		ret->device[d].timing = rig_link_timing(rig, rig->devices[d].link);
		ret->device[d].timing.minimum_pause_ns = rig->devices[d].minimum_pause_ns;
	}
	return 0;
}

void bench_timing_row(const struct bench_timing *timing, int device, int function, int count,
                      int64_t *ret_usual, int64_t *ret_most)
{
	const struct timing *t = &timing->device[device].timing;
	int64_t wire = timing_request_ns(t, function, count) + timing_reply_ns(t, function, count);
	/* Assumed jitter is drawn evenly; measured turnaround is a median already. */
	*ret_usual = wire + (timing->device[device].measured ? 0 : t->jitter_ns / 2);
	*ret_most = wire + t->jitter_ns;
}

void bench_timing_transaction(const struct bench_timing *timing, int device, int function,
                              int count, int64_t *ret_usual, int64_t *ret_most)
{
	const struct timing *t = &timing->device[device].timing;
	int64_t pause = timing_t35_ns(t);
	if (pause < t->minimum_pause_ns)
		pause = t->minimum_pause_ns;
	int64_t between = timing->between_ns[timing->rig->devices[device].link];
	pause = between > pause ? between : pause;
	bench_timing_row(timing, device, function, count, ret_usual, ret_most);
	*ret_usual += pause;
	*ret_most += pause;
}

/* ---- writing -------------------------------------------------------------------- */

static int function_of(enum place place)
{
	static const int FUNCTIONS[] = {LINK_READ_COILS, LINK_READ_DISCRETE_INPUTS,
	                                LINK_READ_INPUT_REGISTERS, LINK_READ_HOLDING_REGISTERS};
	return FUNCTIONS[place];
}

struct fit {
	double n, x, y, xx, xy;
};

static double registers_of(const struct read_block *read)
{
	return read->place <= PLACE_DISCRETE_INPUT ? (read->count + 15) / 16 : read->count;
}

/* What bits and silences do not explain of the median round trip. */
static double unexplained(const struct timing *assumed, const struct survey_block *block)
{
	struct timing bare = *assumed;
	bare.turnaround_ns = bare.per_register_ns = 0;
	int function = function_of(block->read->place);
	return (double)(block->rtt_ns[block->reads / 2] -
	                timing_request_ns(&bare, function, block->read->count) -
	                timing_reply_ns(&bare, function, block->read->count));
}

static void measure(const struct survey *survey, int device, struct timing *timing)
{
	struct fit fit = {0};
	int64_t jitter = 0;
	for (size_t b = 0; b < survey->plan.count; b++) {
		const struct survey_block *block = &survey->block[b];
		if (block->read->device != device || block->reads == 0)
			continue;
		double x = registers_of(block->read), y = unexplained(timing, block);
		fit.n += 1;
		fit.x += x;
		fit.y += y;
		fit.xx += x * x;
		fit.xy += x * y;
		int64_t spread =
		    block->rtt_ns[(block->reads - 1) * 95 / 100] - block->rtt_ns[block->reads / 2];
		jitter = spread > jitter ? spread : jitter;
	}
	double spread = fit.n * fit.xx - fit.x * fit.x;
	double share =
	    spread > 0 ? (fit.n * fit.xy - fit.x * fit.y) / spread : (double)timing->per_register_ns;
	share = fmax(share, 0);
	timing->per_register_ns = llround(share);
	timing->turnaround_ns = llround(fmax((fit.y - share * fit.x) / fit.n, 0));
	timing->jitter_ns = jitter;
}

static json_t *device_json(const struct survey *survey, int device)
{
	const struct rig *rig = survey->rig;
	struct timing timing = rig_link_timing(rig, rig->devices[device].link);
	json_t *reads = json_array();
	for (size_t b = 0; b < survey->plan.count; b++) {
		const struct survey_block *block = &survey->block[b];
		size_t n = block->reads;
		if (block->read->device != device || n == 0)
			continue;
		(void)json_array_append_new(
		    reads,
		    json_pack("{s:i,s:i,s:I,s:I,s:I,s:I,s:I}", "function", function_of(block->read->place),
		              "count", (int)block->read->count, "reads", (json_int_t)n, "min_ns",
		              (json_int_t)block->rtt_ns[0], "median_ns", (json_int_t)block->rtt_ns[n / 2],
		              "p95_ns", (json_int_t)block->rtt_ns[(n - 1) * 95 / 100], "max_ns",
		              (json_int_t)block->rtt_ns[n - 1]));
	}
	if (json_array_size(reads) == 0) {
		json_decref(reads);
		return NULL;
	}
	measure(survey, device, &timing);
	return json_pack("{s:s,s:I,s:I,s:I,s:o}", "device", rig->devices[device].name, "turnaround_ns",
	                 (json_int_t)timing.turnaround_ns, "per_register_ns",
	                 (json_int_t)timing.per_register_ns, "jitter_ns", (json_int_t)timing.jitter_ns,
	                 "reads", reads);
}

static json_t *link_json(const struct survey *survey, int link)
{
	const struct rig *rig = survey->rig;
	json_t *devices = json_array();
	for (size_t d = 0; d < rig->device_count; d++) {
		json_t *device = rig->devices[d].link == link ? device_json(survey, (int)d) : NULL;
		if (device)
			(void)json_array_append_new(devices, device);
	}
	int64_t between = survey->link[link].between_ns;
	return json_pack("{s:s,s:s,s:I,s:o}", "link", rig->links[link].name, "address",
	                 survey->links[link]->address, "between_ns",
	                 (json_int_t)(between > 0 ? between : 0), "devices", devices);
}

int bench_timing_record(const char *path, const struct survey *survey, struct err *reterr)
{
	char taken[40];
	time_t now = time(NULL);
	struct tm utc;
	(void)strftime(taken, sizeof taken, "%Y-%m-%dT%H:%M:%SZ", gmtime_r(&now, &utc));
	json_t *links = json_array();
	for (size_t l = 0; l < survey->rig->link_count; l++)
		(void)json_array_append_new(links, link_json(survey, (int)l));
	json_t *root = json_pack("{s:s,s:i,s:s,s:s,s:s,s:o}", "what", "timing of the links of a rig",
	                         "format", TIMING_VERSION, "tool_version", DRIVETRIAL_VERSION, "rig",
	                         survey->rig->name, "taken", taken, "links", links);
	if (!root)
		return err_set(reterr, ERR_NOMEM, "no memory for the timing of the links");
	FILE *file = fopen(path, "we");
	bool good = file && json_dumpf(root, file, JSON_INDENT(2)) == 0 && fputc('\n', file) != EOF;
	if (file && fclose(file) != 0)
		good = false;
	json_decref(root);
	return good ? 0 : err_set(reterr, ERR_OUTPUT, "%s cannot be written: %m", path);
}

/* ---- reading -------------------------------------------------------------------- */

static bool take_ns(const json_t *object, const char *key, int64_t *ret)
{
	const json_t *value = json_object_get(object, key);
	if (!json_is_integer(value) || json_integer_value(value) < 0 ||
	    json_integer_value(value) > 60 * NS_PER_S)
		return false;
	*ret = json_integer_value(value);
	return true;
}

static bool take_device(const json_t *json, struct bench_timing *timing)
{
	const char *name = json_string_value(json_object_get(json, "device"));
	int device = name ? rig_device_find(timing->rig, name, strlen(name)) : -1;
	if (!name)
		return false;
	if (device < 0)
		return true; /* a device that the rig no longer has */
	struct device_timing *into = &timing->device[device];
	into->measured = true;
	return take_ns(json, "turnaround_ns", &into->timing.turnaround_ns) &&
	       take_ns(json, "per_register_ns", &into->timing.per_register_ns) &&
	       take_ns(json, "jitter_ns", &into->timing.jitter_ns);
}

static bool take_link(const json_t *json, struct bench_timing *timing)
{
	const char *name = json_string_value(json_object_get(json, "link"));
	int link = name ? rig_link_find(timing->rig, name, strlen(name)) : -1;
	size_t i;
	json_t *device;
	if (!name)
		return false;
	if (link < 0)
		return true;
	if (!take_ns(json, "between_ns", &timing->between_ns[link]))
		return false;
	json_array_foreach(json_object_get(json, "devices"), i, device)
	{
		if (!take_device(device, timing))
			return false;
	}
	return true;
}

int bench_timing_load(const char *path, struct bench_timing *timing, struct err *reterr)
{
	json_error_t fault;
	json_t *root = json_load_file(path, JSON_REJECT_DUPLICATES, &fault);
	size_t i;
	json_t *link;
	int result = 0;
	if (!root)
		return err_set_at(reterr, ERR_FILE, path, fault.line > 0 ? fault.line : 0,
		                  fault.column > 0 ? fault.column : 0, "%s", fault.text);
	const char *rig = json_string_value(json_object_get(root, "rig"));
	const char *taken = json_string_value(json_object_get(root, "taken"));
	if (json_integer_value(json_object_get(root, "format")) != TIMING_VERSION || !rig || !taken)
		result = err_set_at(reterr, ERR_FILE, path, 0, 0,
		                    "this is no timing of format %d, as `survey --record` writes it",
		                    TIMING_VERSION);
	else if (strcmp(rig, timing->rig->name) != 0)
		result =
		    err_set_at(reterr, ERR_FILE, path, 0, 0,
		               "this is the timing of the rig %s, and not of %s", rig, timing->rig->name);
	else
		(void)snprintf(timing->taken, sizeof timing->taken, "%s", taken);
	json_array_foreach(json_object_get(root, "links"), i, link)
	{
		if (result == 0 && !take_link(link, timing))
			result = err_set_at(reterr, ERR_FILE, path, 0, 0,
			                    "link %zu lacks a name or a time in nanoseconds", i + 1);
	}
	json_decref(root);
	return result;
}
