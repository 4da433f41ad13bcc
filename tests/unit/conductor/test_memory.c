/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Memory that runs out, at every allocation of a session in turn: while files
 * are loaded, plans made, links opened, identities read, the folder begun. The
 * answer is an exit code before the first command, never a crash, and nothing
 * was commanded.
 */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "near.h"
#include "session.h"

static const char RIG[] =
    "rig: small\n"
    "links: {wire: {tcp: \"127.0.0.1:502\", reply_timeout: 100 ms}}\n"
    "devices:\n"
    "  drive: {link: wire, unit: 1, under_test: yes, life: life, identity: {firmware: firmware}}\n"
    "  meter: {link: wire, unit: 2}\n"
    "channels:\n"
    "  life: {device: drive, input_register: 1, type: uint16, wraps: 65536}\n"
    "  firmware: {device: drive, input_register: 20, type: text, registers: 8}\n"
    "  id: {device: drive, input_register: 4, type: int16, scale: 0.01, unit: A_peak}\n"
    "  iq: {device: drive, input_register: 5, type: int16, scale: 0.01, unit: A_peak}\n"
    "  angle: {derive: angle_of, x: id, y: iq, unit: deg}\n"
    "  goal: {device: drive, holding_register: 0, type: int16, scale: 0.2, unit: rpm,\n"
    "         command: yes, between: [-3300, 3300]}\n"
    "  speed: {device: meter, input_register: 0, type: float32, unit: rpm}\n"
    "interlocks: [{channel: speed, between: [-3600 rpm, 3600 rpm]}]\n"
    "safe_state:\n"
    "  - set: {goal: 0 rpm}\n"
    "  - await: {channel: speed, between: [-10 rpm, 10 rpm], timeout: 5 s}\n"
    "model:\n"
    "  serves: {life: controller.life, firmware: controller.firmware, id: controller.current_d,\n"
    "           iq: controller.current_q, goal: controller.speed_command, speed: shaft.speed}\n";

static const char SUITE[] =
    "suite: small\n"
    "expect: {firmware: \"2.4.1\"}\n"
    "sample: {every: 5 ms, channels: [speed, angle]}\n"
    "tests:\n"
    "  - test: ONE\n"
    "    sweep: {fast: [100 rpm, 200 rpm]}\n"
    "    stimulus: [{set: {goal: $fast}, mark: go}, {hold: 100 ms}]\n"
    "    checks: [{stays_within: {channel: speed, between: [-9 rpm, 9 rpm],\n"
    "              ignore_shorter_than: 1 s, limits: {inside: {is: yes}}}}]\n";

static char base[64], rig_path[128], suite_path[128], out_path[128];

static void put(const char *path, const char *text)
{
	FILE *file = fopen(path, "w");
	assert_non_null(file);
	assert_int_equal(fputs(text, file) >= 0, 1);
	assert_int_equal(fclose(file), 0);
}

static int prepare(void **state)
{
	(void)state;
	(void)snprintf(base, sizeof base, "/tmp/drivetrial-memory-XXXXXX");
	if (!mkdtemp(base))
		return -1;
	(void)snprintf(rig_path, sizeof rig_path, "%.60s/rig.yaml", base);
	(void)snprintf(suite_path, sizeof suite_path, "%.60s/suite.yaml", base);
	(void)snprintf(out_path, sizeof out_path, "%.60s/out", base);
	put(rig_path, RIG);
	put(suite_path, SUITE);
	return 0;
}

static int clean(void **state)
{
	char command[160];
	(void)state;
	(void)snprintf(command, sizeof command, "rm -rf '%s'", base);
	return system(command) == 0 ? 0 : -1;
}

/* Up to the first command; the exit code. */
static int set_up(struct session *session, const struct run_options *options)
{
	session_init(session, options);
	int code = session_load(session);
	if (code == 0)
		code = session_connect(session);
	if (code == 0)
		code = session_record(session);
	return code;
}

static void every_allocation_of_the_set_up_may_fail(void **state)
{
	(void)state;
	struct run_options *options = calloc(1, sizeof *options);
	struct session *session = malloc(sizeof *session);
	assert_non_null(options);
	assert_non_null(session);
	options->rehearse = true;
	options->rig_path = rig_path;
	options->suite_paths[0] = suite_path;
	options->suite_count = 1;
	options->out = out_path;
	options->seed = 1;
	options->quiet = true;
	int code = -1;
	long n = 0, refused = 0;
	while (code != 0 && n < 20000) {
		arena_fail_at(++n);
		code = set_up(session, options);
		arena_fail_at(0);
		if (code != 0) {
			assert_true(code == EXIT_INTERNAL || code == EXIT_FILE || code == EXIT_NO_RIG ||
			            code == EXIT_NO_OUTPUT);
			assert_true(!session->conductor || !conductor_rest(session->conductor).needed);
			refused++;
		}
		session_release(session);
	}
	assert_int_equal(code, 0); /* with memory enough it works */
	assert_true(refused > 50);
	free(session);
	free(options);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(every_allocation_of_the_set_up_may_fail),
	};
	return cmocka_run_group_tests(tests, prepare, clean) != 0;
}
