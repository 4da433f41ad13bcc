/* SPDX-License-Identifier: Apache-2.0 */
/* What plan and survey know without a bench: templates, times of links, doubts. */
#include "near.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "plan_timing.h"
#include "survey_show.h"
#include "text.h"

struct loaded {
	struct arena arena;
	struct faults faults;
	const struct rig *rig;
};

static void load(struct loaded *loaded, const char *name)
{
	char path[512];
	struct err err = {0};
	memset(loaded, 0, sizeof *loaded);
	arena_init(&loaded->arena, 0);
	(void)snprintf(path, sizeof path, "%s/rigs/%s", SOURCE_DIR, name);
	int result = rig_load(path, &loaded->arena, &loaded->faults, &loaded->rig, &err);
	if (result < 0 || loaded->faults.count > 0) {
		struct text text;
		text_init(&text, 0);
		faults_print(&loaded->faults, &text);
		print_error("%s%s\n", text_string(&text), err.message);
		text_release(&text);
	}
	assert_int_equal(result, 0);
	assert_int_equal(loaded->faults.count, 0);
	assert_non_null(loaded->rig);
}

static void templates_load_without_faults(void **state)
{
	static const char *const NAMES[] = {"template-tcp.yaml", "template-rtu.yaml"};
	(void)state;
	for (size_t i = 0; i < 2; i++) {
		struct loaded loaded;
		load(&loaded, NAMES[i]);
		assert_true(loaded.rig->interlock_count > 0);
		assert_true(loaded.rig->safe_state_count > 0);
		assert_false(loaded.rig->unattended);
		arena_release(&loaded.arena);
	}
}

/* ---- times of links -------------------------------------------------------------- */

static int write_timing(const char *text, char path[32])
{
	(void)strcpy(path, "/tmp/timing-XXXXXX");
	int fd = mkstemp(path);
	assert_true(fd >= 0);
	assert_int_equal(write(fd, text, strlen(text)), (ssize_t)strlen(text));
	return close(fd);
}

static void measured_times_replace_those_of_the_rig_file(void **state)
{
	struct loaded loaded;
	struct bench_timing timing;
	struct err err = {0};
	char path[32];
	int64_t before, after, most;
	(void)state;
	load(&loaded, "template-rtu.yaml");
	int controller = rig_device_find(loaded.rig, "controller", 10);
	int meter = rig_device_find(loaded.rig, "meter", 5);
	assert_int_equal(bench_timing_assume(loaded.rig, &loaded.arena, &timing, &err), 0);
	bench_timing_row(&timing, controller, LINK_READ_INPUT_REGISTERS, 4, &before, &most);
	/* 8 + 13 bytes of 11 bits at 115200 baud are 2.005 ms; 1.75 ms of silence and 1 ms of
	 * turnaround before the reply come on top (Modbus over Serial Line V1.02, 2.5.1.1), and half
	 * of 0.2 ms of jitter. */
	assert_near((double)before / 1e6, 2.005 + 1.75 + 1.0 + 0.004 + 0.1, 0.01, "ms");
	(void)write_timing("{\"format\": 1, \"rig\": \"template-rtu\", \"taken\": \"now\", \"links\": "
	                   "[{\"link\": \"drive_line\", \"between_ns\": 5000000, \"devices\": "
	                   "[{\"device\": \"controller\", \"turnaround_ns\": 3000000, "
	                   "\"per_register_ns\": 0, \"jitter_ns\": 500000}]}]}",
	                   path);
	assert_int_equal(bench_timing_load(path, &timing, &err), 0);
	(void)unlink(path);
	bench_timing_row(&timing, controller, LINK_READ_INPUT_REGISTERS, 4, &after, &most);
	assert_near((double)after / 1e6, 2.005 + 1.75 + 3.0, 0.01, "ms");
	assert_near((double)(most - after) / 1e6, 0.5, 0.001, "ms");
	bench_timing_transaction(&timing, controller, LINK_READ_INPUT_REGISTERS, 4, &before, &most);
	assert_near((double)(before - after) / 1e6, 5.0, 0.001, "ms");
	assert_false(timing.device[meter].measured);
	arena_release(&loaded.arena);
}

static void times_of_another_rig_are_refused(void **state)
{
	static const char *const WRONG[] = {
	    "{\"format\": 1, \"rig\": \"other\", \"taken\": \"now\", \"links\": []}",
	    "{\"format\": 2, \"rig\": \"template-rtu\", \"taken\": \"now\", \"links\": []}",
	    ("{\"format\": 1, \"rig\": \"template-rtu\", \"taken\": \"now\", \"links\": "
	     "[{\"link\": \"drive_line\", \"between_ns\": -1, \"devices\": []}]}"),
	    "no json",
	};
	struct loaded loaded;
	(void)state;
	load(&loaded, "template-rtu.yaml");
	for (size_t i = 0; i < sizeof WRONG / sizeof WRONG[0]; i++) {
		struct bench_timing timing;
		struct err err = {0};
		char path[32];
		(void)write_timing(WRONG[i], path);
		assert_int_equal(bench_timing_assume(loaded.rig, &loaded.arena, &timing, &err), 0);
		assert_int_equal(bench_timing_load(path, &timing, &err), -1);
		assert_int_equal(err.code, ERR_FILE);
		(void)unlink(path);
	}
	arena_release(&loaded.arena);
}

/* ---- doubts ----------------------------------------------------------------------- */

struct doubting {
	struct loaded loaded;
	struct survey survey;
	struct text out;
};

static void doubting_begin(struct doubting *doubting, const char *rig)
{
	load(&doubting->loaded, rig);
	const struct rig *loaded = doubting->loaded.rig;
	doubting->survey = (struct survey){
	    .rig = loaded,
	    .device = arena_array(&doubting->loaded.arena, loaded->device_count,
	                          sizeof(struct survey_device)),
	    .channel = arena_array(&doubting->loaded.arena, loaded->channel_count,
	                           sizeof(struct survey_channel)),
	};
	text_init(&doubting->out, 0);
}

static size_t doubts_of(struct doubting *doubting, const char *channel, uint16_t first,
                        uint16_t second)
{
	const struct rig *rig = doubting->loaded.rig;
	int index = rig_channel_find(rig, channel, strlen(channel));
	assert_true(index >= 0);
	for (size_t c = 0; c < rig->channel_count; c++)
		doubting->survey.channel[c] = (struct survey_channel){.asked = false};
	struct survey_channel *state = &doubting->survey.channel[index];
	*state = (struct survey_channel){.asked = true, .words = {first, second}, .word_count = 2};
	state->value = codec_decode(&rig->channels[index].codec, state->words);
	text_clear(&doubting->out);
	return survey_doubts(&doubting->survey, &doubting->out);
}

static void doubting_end(struct doubting *doubting)
{
	text_release(&doubting->out);
	arena_release(&doubting->loaded.arena);
}

static void a_float_that_is_sane_in_the_other_order_is_doubted(void **state)
{
	struct doubting doubting;
	(void)state;
	doubting_begin(&doubting, "template-rtu.yaml");
	/* 1500.0 is 0x44BB8000 (IEEE 754); its words turned round are a number near -4e-19. */
	assert_int_equal(doubts_of(&doubting, "bench_speed", 0x8000, 0x44BB), 1);
	assert_non_null(strstr(text_string(&doubting.out), "words: low_first"));
	assert_non_null(strstr(text_string(&doubting.out), "1500 rpm"));
	assert_int_equal(doubts_of(&doubting, "bench_speed", 0x44BB, 0x8000), 0);
	assert_int_equal(doubts_of(&doubting, "bench_speed", 0, 0), 0);
	doubting_end(&doubting);
}

static void an_integer_with_an_empty_low_word_is_doubted(void **state)
{
	struct doubting doubting;
	(void)state;
	doubting_begin(&doubting, "template-rtu.yaml");
	/* position is low_first: 0x0000 0x05DC is 1500 * 65536, turned round it is 1500. */
	assert_int_equal(doubts_of(&doubting, "position", 0x0000, 0x05DC), 1);
	assert_non_null(strstr(text_string(&doubting.out), "words: high_first"));
	assert_int_equal(doubts_of(&doubting, "position", 0x05DC, 0x0000), 0);
	doubting_end(&doubting);
}

static void a_value_outside_what_the_rig_expects_is_doubted(void **state)
{
	struct doubting doubting;
	(void)state;
	doubting_begin(&doubting, "template-tcp.yaml");
	/* 30000 steps of 0.2 rpm are 6000 rpm, beyond +-3300. */
	assert_int_equal(doubts_of(&doubting, "speed_command", 30000, 0), 1);
	assert_non_null(strstr(text_string(&doubting.out), "between"));
	assert_non_null(strstr(text_string(&doubting.out), "0.1 times"));
	assert_int_equal(doubts_of(&doubting, "fault_code", 77, 0), 1);
	assert_non_null(strstr(text_string(&doubting.out), "`names` does not know"));
	assert_int_equal(doubts_of(&doubting, "fault_code", 3, 0), 0);
	doubting_end(&doubting);
}

static void a_life_counter_that_stands_is_doubted(void **state)
{
	struct doubting doubting;
	(void)state;
	doubting_begin(&doubting, "template-tcp.yaml");
	(void)doubts_of(&doubting, "life_counter", 5, 0);
	int index = rig_channel_find(doubting.loaded.rig, "life_counter", 12);
	doubting.survey.channel[index].reads = 50;
	text_clear(&doubting.out);
	assert_int_equal(survey_doubts(&doubting.survey, &doubting.out), 1);
	assert_non_null(strstr(text_string(&doubting.out), "may be frozen"));
	doubting.survey.channel[index].changes = 1;
	text_clear(&doubting.out);
	assert_int_equal(survey_doubts(&doubting.survey, &doubting.out), 0);
	doubting_end(&doubting);
}

static void irregular_changes_tell_no_refresh_interval(void **state)
{
	struct doubting doubting;
	bool faster;
	(void)state;
	doubting_begin(&doubting, "template-tcp.yaml");
	struct survey_channel *channel = &doubting.survey.channel[0];
	*channel = (struct survey_channel){.reads = 200,
	                                   .changes = 21,
	                                   .first_change_ns = 10 * NS_PER_MS,
	                                   .last_change_ns = 210 * NS_PER_MS,
	                                   .gap_most_ns = 12 * NS_PER_MS};
	assert_int_equal(survey_change_ns(&doubting.survey, 0, &faster), 10 * NS_PER_MS);
	assert_false(faster);
	channel->gap_most_ns = 80 * NS_PER_MS;
	assert_int_equal(survey_change_ns(&doubting.survey, 0, &faster), 0);
	channel->gap_most_ns = 12 * NS_PER_MS;
	channel->reads = 22;
	assert_int_equal(survey_change_ns(&doubting.survey, 0, &faster), 10 * NS_PER_MS);
	assert_true(faster);
	channel->changes = 5;
	assert_int_equal(survey_change_ns(&doubting.survey, 0, &faster), 0);
	doubting_end(&doubting);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(templates_load_without_faults),
	    cmocka_unit_test(measured_times_replace_those_of_the_rig_file),
	    cmocka_unit_test(times_of_another_rig_are_refused),
	    cmocka_unit_test(a_float_that_is_sane_in_the_other_order_is_doubted),
	    cmocka_unit_test(an_integer_with_an_empty_low_word_is_doubted),
	    cmocka_unit_test(a_value_outside_what_the_rig_expects_is_doubted),
	    cmocka_unit_test(a_life_counter_that_stands_is_doubted),
	    cmocka_unit_test(irregular_changes_tell_no_refresh_interval),
	};
	return RUN_GROUP(tests);
}
