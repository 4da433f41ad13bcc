/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Rigs are built by hand here, without a file. The optimum of read planning is
 * compared with a search through all partitions of random maps, written
 * without looking at intervals in order.
 */
#include "near.h"

#include <string.h>

#include "plan.h"

enum { CHANNELS_MOST = 16 };

struct fixture {
	struct rig rig;
	struct rig_link links[2];
	struct rig_device devices[2];
	struct rig_channel channels[CHANNELS_MOST];
	unsigned char needed[CHANNELS_MOST];
	struct allowed_attempt attempts[2];
	struct arena arena;
};

static const struct unit *rpm(void)
{
	return unit_find("rpm", 3);
}

static void fixture_init(struct fixture *fixture)
{
	memset(fixture, 0, sizeof *fixture);
	fixture->links[0] = (struct rig_link){.name = "wire", .config = {.tcp_host = "localhost"}};
	fixture->links[1] = (struct rig_link){
	    .name = "bus", .config = {.serial_path = "/dev/null", .baud = 9600, .parity = PARITY_EVEN}};
	fixture->devices[0] = (struct rig_device){
	    .name = "drive", .link = 0, .unit = 1, .max_registers = 125, .gaps_allowed = true};
	fixture->devices[1] = (struct rig_device){
	    .name = "meter", .link = 1, .unit = 7, .max_registers = 125, .gaps_allowed = true};
	fixture->rig = (struct rig){
	    .name = "by-hand",
	    .links = fixture->links,
	    .link_count = 2,
	    .devices = fixture->devices,
	    .device_count = 2,
	    .channels = fixture->channels,
	    .attempts = fixture->attempts,
	};
	arena_init(&fixture->arena, 0);
}

static struct rig_channel *add(struct fixture *fixture, int device, enum place place, int address,
                               enum codec_type type)
{
	size_t at = fixture->rig.channel_count++;
	struct rig_channel *channel = &fixture->channels[at];
	*channel = (struct rig_channel){
	    .info = {.name = "channel", .unit = rpm()},
	    .device = device,
	    .place = place,
	    .address = address,
	    .codec = {.type = type, .scale = 1},
	    .least = -(double)INFINITY,
	    .most = (double)INFINITY,
	};
	fixture->needed[at] = 1;
	return channel;
}

static struct read_plan plan_of(struct fixture *fixture)
{
	struct read_plan plan;
	struct err err = {0};
	assert_int_equal(plan_reads(&fixture->rig, fixture->needed, &fixture->arena, &plan, &err), 0);
	return plan;
}

static int64_t cost_of(const struct fixture *fixture, int device, int count)
{
	struct timing timing = rig_link_timing(&fixture->rig, fixture->devices[device].link);
	timing.minimum_pause_ns = fixture->devices[device].minimum_pause_ns;
	return timing_transaction_ns(&timing, LINK_READ_INPUT_REGISTERS, count);
}

/* ---- the optimum ------------------------------------------------------- */

struct search {
	const struct fixture *fixture;
	int group[CHANNELS_MOST]; /* block of each channel */
	int64_t best;
};

static bool covers(const struct fixture *fixture, int address)
{
	for (size_t i = 0; i < fixture->rig.channel_count; i++) {
		const struct rig_channel *channel = &fixture->channels[i];
		if (address >= channel->address &&
		    address < channel->address + codec_registers(&channel->codec))
			return true;
	}
	return false;
}

static int64_t partition_cost(const struct search *search, int groups)
{
	const struct fixture *fixture = search->fixture;
	int64_t sum = 0;
	for (int g = 0; g < groups; g++) {
		int first = INT32_MAX, end = 0, members = 0;
		for (size_t i = 0; i < fixture->rig.channel_count; i++) {
			const struct rig_channel *channel = &fixture->channels[i];
			if (search->group[i] != g)
				continue;
			members++;
			int channel_end = channel->address + codec_registers(&channel->codec);
			first = channel->address < first ? channel->address : first;
			end = channel_end > end ? channel_end : end;
		}
		if (members > 1 && end - first > fixture->devices[0].max_registers)
			return INT64_MAX;
		for (int at = first; at < end && !fixture->devices[0].gaps_allowed; at++)
			if (!covers(fixture, at))
				return INT64_MAX;
		sum += cost_of(fixture, 0, end - first);
	}
	return sum;
}

static void search_from(struct search *search, size_t at, int groups)
{
	if (at == search->fixture->rig.channel_count) {
		int64_t cost = partition_cost(search, groups);
		search->best = cost < search->best ? cost : search->best;
		return;
	}
	if (!search->fixture->needed[at]) {
		search->group[at] = -1;
		search_from(search, at + 1, groups);
		return;
	}
	for (int g = 0; g <= groups; g++) {
		search->group[at] = g;
		search_from(search, at + 1, g == groups ? groups + 1 : groups);
	}
}

static uint32_t random_state;

static int random_below(int most)
{
	random_state = random_state * 1664525u + 1013904223u;
	return (int)((random_state >> 8) % (uint32_t)most);
}

static void random_map(struct fixture *fixture)
{
	static const enum codec_type types[] = {CODEC_BIT, CODEC_UINT16, CODEC_INT16, CODEC_FLOAT32,
	                                        CODEC_FLOAT64};
	fixture_init(fixture);
	fixture->devices[0].link = random_below(2);
	fixture->devices[0].gaps_allowed = random_below(2) == 0;
	fixture->devices[0].max_registers = random_below(3) == 0 ? 125 : 4 + random_below(24);
	fixture->devices[0].minimum_pause_ns = random_below(3) == 0 ? 5 * NS_PER_MS : 0;
	int span = random_below(2) == 0 ? 16 : 1 + random_below(300), count = 1 + random_below(7);
	for (int i = 0; i < count; i++) {
		add(fixture, 0, PLACE_INPUT_REGISTER, random_below(span), types[random_below(5)]);
		fixture->needed[i] = random_below(5) != 0;
	}
}

static void verify_blocks(const struct fixture *fixture, const struct read_plan *plan)
{
	int seen[CHANNELS_MOST] = {0};
	for (size_t b = 0; b < plan->count; b++) {
		const struct read_block *block = &plan->blocks[b];
		assert_int_equal(block->id, b);
		for (size_t c = 0; c < block->channel_count; c++) {
			const struct rig_channel *channel = &fixture->channels[block->channels[c]];
			seen[block->channels[c]]++;
			/* never torn */
			assert_true(channel->address >= block->address);
			assert_true(channel->address + codec_registers(&channel->codec) <=
			            block->address + block->count);
		}
		assert_true(block->channel_count == 1 || block->count <= fixture->devices[0].max_registers);
	}
	for (size_t i = 0; i < fixture->rig.channel_count; i++)
		assert_int_equal(seen[i], fixture->needed[i]);
}

static void the_plan_is_the_cheapest_of_all_partitions(void **state)
{
	(void)state;
	random_state = 20240601;
	for (int round = 0; round < 2000; round++) {
		struct fixture fixture;
		random_map(&fixture);
		struct read_plan plan = plan_of(&fixture);
		verify_blocks(&fixture, &plan);
		int64_t sum = 0;
		for (size_t b = 0; b < plan.count; b++)
			sum += cost_of(&fixture, 0, plan.blocks[b].count);
		struct search search = {.fixture = &fixture, .best = INT64_MAX};
		search_from(&search, 0, 0);
		if (sum != search.best)
			fail_msg("map %d: %lld ns planned, %lld ns are possible", round, (long long)sum,
			         (long long)search.best);
		arena_release(&fixture.arena);
	}
}

/* ---- single properties ------------------------------------------------- */

static void bits_of_one_register_are_read_once(void **state)
{
	(void)state;
	struct fixture fixture;
	fixture_init(&fixture);
	fixture.devices[0].gaps_allowed = false;
	add(&fixture, 0, PLACE_INPUT_REGISTER, 9, CODEC_BIT)->codec.bit = 2;
	add(&fixture, 0, PLACE_INPUT_REGISTER, 9, CODEC_BIT)->codec.bit = 1;
	struct read_plan plan = plan_of(&fixture);
	assert_int_equal(plan.count, 1);
	assert_int_equal(plan.blocks[0].count, 1);
	assert_int_equal(plan.blocks[0].channel_count, 2);
	struct link_reply reply = {.status = LINK_OK, .count = 1, .words = {4}};
	assert_near(block_value(&fixture.rig, &plan.blocks[0], 0, &reply), 1, 0, "");
	assert_near(block_value(&fixture.rig, &plan.blocks[0], 1, &reply), 0, 0, "");
	arena_release(&fixture.arena);
}

static void a_forbidden_gap_divides_the_read(void **state)
{
	(void)state;
	struct fixture fixture;
	fixture_init(&fixture);
	add(&fixture, 0, PLACE_HOLDING_REGISTER, 0, CODEC_UINT16);
	add(&fixture, 0, PLACE_HOLDING_REGISTER, 2, CODEC_UINT16);
	assert_int_equal(plan_of(&fixture).count, 1);
	fixture.devices[0].gaps_allowed = false;
	assert_int_equal(plan_of(&fixture).count, 2);
	/* A register that the rig describes is no gap, also where nobody needs it. */
	add(&fixture, 0, PLACE_HOLDING_REGISTER, 1, CODEC_UINT16);
	fixture.needed[2] = 0;
	struct read_plan plan = plan_of(&fixture);
	assert_int_equal(plan.count, 1);
	assert_int_equal(plan.blocks[0].channel_count, 2);
	arena_release(&fixture.arena);
}

static void blocks_come_by_link_device_place_and_address(void **state)
{
	(void)state;
	struct fixture fixture;
	fixture_init(&fixture);
	add(&fixture, 1, PLACE_INPUT_REGISTER, 0, CODEC_UINT16);
	add(&fixture, 0, PLACE_HOLDING_REGISTER, 500, CODEC_UINT16);
	add(&fixture, 0, PLACE_HOLDING_REGISTER, 3, CODEC_UINT16);
	add(&fixture, 0, PLACE_COIL, 8, CODEC_BIT);
	add(&fixture, 0, PLACE_INPUT_REGISTER, 40, CODEC_TEXT)->codec.text_registers = 4;
	add(&fixture, -1, PLACE_DERIVED, 0, CODEC_FLOAT64);
	add(&fixture, 0, PLACE_IDENTIFICATION, 2, CODEC_TEXT);
	struct read_plan plan = plan_of(&fixture);
	assert_int_equal(plan.count, 4); /* text, derived and identification are not polled */
	struct link_request request;
	block_request(&fixture.rig, &plan.blocks[0], &request);
	assert_int_equal(request.function, LINK_READ_COILS);
	assert_int_equal(request.address, 8);
	block_request(&fixture.rig, &plan.blocks[1], &request);
	assert_int_equal(request.function, LINK_READ_HOLDING_REGISTERS);
	assert_int_equal(request.address, 3);
	assert_int_equal(plan.blocks[2].address, 500);
	block_request(&fixture.rig, &plan.blocks[3], &request);
	assert_int_equal(request.function, LINK_READ_INPUT_REGISTERS);
	assert_int_equal(request.unit, 7);
	arena_release(&fixture.arena);
}

static void a_value_is_missing_where_the_reply_is_not_good(void **state)
{
	(void)state;
	struct fixture fixture;
	fixture_init(&fixture);
	add(&fixture, 0, PLACE_INPUT_REGISTER, 4, CODEC_FLOAT32);
	struct read_plan plan = plan_of(&fixture);
	/* 0x3FC00000 is 1.5 (IEEE 754, computed with Python's struct). */
	struct link_reply reply = {.status = LINK_OK, .count = 2, .words = {0x3FC0, 0}};
	assert_near(block_value(&fixture.rig, &plan.blocks[0], 0, &reply), 1.5, 0, "rpm");
	reply.count = 1;
	assert_true(isnan(block_value(&fixture.rig, &plan.blocks[0], 0, &reply)));
	reply.count = 2;
	reply.status = LINK_TIMEOUT;
	assert_true(isnan(block_value(&fixture.rig, &plan.blocks[0], 0, &reply)));
	arena_release(&fixture.arena);
}

static void a_command_outside_its_limits_is_refused(void **state)
{
	(void)state;
	struct fixture fixture;
	struct link_request request;
	fixture_init(&fixture);
	struct rig_channel *speed = add(&fixture, 0, PLACE_HOLDING_REGISTER, 0, CODEC_INT16);
	speed->codec.scale = 0.2;
	speed->command = true;
	speed->least = -3300;
	speed->most = 3300;
	add(&fixture, 0, PLACE_HOLDING_REGISTER, 1, CODEC_INT16);
	const double refused[] = {3300.2, -3300.2, 1e9, (double)NAN, (double)INFINITY};
	for (size_t i = 0; i < 5; i++) {
		struct err err = {0};
		assert_int_equal(command_request(&fixture.rig, 0, refused[i], NULL, &request, &err), -1);
		assert_int_equal(err.code, ERR_REFUSED);
	}
	struct err err = {0};
	assert_int_equal(command_request(&fixture.rig, 0, -3300, NULL, &request, &err), 0);
	assert_int_equal(request.function, LINK_WRITE_REGISTER);
	assert_int_equal(request.unit, 1);
	assert_int_equal((int16_t)request.words[0], -16500);
	/* 3300.1 lies inside, but the next step that the register holds does not. */
	speed->most = 3300.1;
	assert_int_equal(command_request(&fixture.rig, 0, 3300.1, NULL, &request, &err), -1);
	err = (struct err){0};
	assert_int_equal(command_request(&fixture.rig, 1, 0, NULL, &request, &err), -1);
	assert_int_equal(err.code, ERR_REFUSED); /* no command */
	speed->least = -1e9;
	speed->most = 1e9;
	err = (struct err){0};
	assert_int_equal(command_request(&fixture.rig, 0, 7000, NULL, &request, &err), -1);
	assert_int_equal(err.code, ERR_REFUSED); /* the coding ends at 6553.4 */
	arena_release(&fixture.arena);
}

static struct rig_channel *add_command(struct fixture *fixture, enum place place, int address,
                                       enum codec_type type)
{
	struct rig_channel *channel = add(fixture, 0, place, address, type);
	channel->command = true;
	return channel;
}

static void commands_take_the_function_that_fits(void **state)
{
	(void)state;
	struct fixture fixture;
	struct link_request request;
	struct err err = {0};
	fixture_init(&fixture);
	add_command(&fixture, PLACE_COIL, 3, CODEC_BIT);
	assert_int_equal(command_request(&fixture.rig, 0, 1, NULL, &request, &err), 0);
	assert_int_equal(request.function, LINK_WRITE_COIL);
	assert_int_equal(request.words[0], 1);

	struct rig_channel *torque = add_command(&fixture, PLACE_HOLDING_REGISTER, 8, CODEC_FLOAT32);
	torque->most = 3.3; /* the nearest float is 3.29999995 */
	assert_int_equal(command_request(&fixture.rig, 1, 3.3, NULL, &request, &err), 0);
	assert_int_equal(request.function, LINK_WRITE_REGISTERS);
	assert_int_equal(request.count, 2);
	assert_int_equal(request.words[0], 0x4053); /* struct.pack('>f', 3.3) is 40533333 */
	assert_int_equal(request.words[1], 0x3333);

	add_command(&fixture, PLACE_HOLDING_REGISTER, 2, CODEC_UINT16)->codec.mask = 0x00F0;
	const uint16_t before = 0x1234;
	assert_int_equal(command_request(&fixture.rig, 2, 10, &before, &request, &err), 0);
	assert_int_equal(request.function, LINK_WRITE_REGISTER);
	assert_int_equal(request.words[0], 0x12A4);
	/* Not knowing the rest, function 22: (current AND mask) OR (value AND NOT mask). */
	assert_int_equal(command_request(&fixture.rig, 2, 10, NULL, &request, &err), 0);
	assert_int_equal(request.function, LINK_MASK_WRITE);
	assert_int_equal(request.words[0], 0xFF0F);
	assert_int_equal(request.words[1], 0x00A0);
	assert_int_equal((before & request.words[0]) | (request.words[1] & ~request.words[0]), 0x12A4);
	arena_release(&fixture.arena);
}

static void only_allowed_attempts_are_made(void **state)
{
	(void)state;
	struct fixture fixture;
	struct link_request request;
	struct err err = {0};
	fixture_init(&fixture);
	struct rig_channel *speed = add_command(&fixture, PLACE_HOLDING_REGISTER, 0, CODEC_INT16);
	speed->least = -10;
	speed->most = 10;
	struct attempt beyond = {.name = "beyond", .channel = 0, .value = 4000, .device = 0};
	struct attempt strange = {.name = "strange",
	                          .channel = -1,
	                          .device = 0,
	                          .request = {.function = LINK_RAW, .pdu = {0x63}, .pdu_length = 1}};
	assert_false(attempt_allowed(&fixture.rig, &beyond));
	assert_int_equal(attempt_request(&fixture.rig, &beyond, &request, &err), -1);
	assert_int_equal(err.code, ERR_REFUSED);
	fixture.attempts[0] = (struct allowed_attempt){.device = 0, .channel = 0};
	fixture.rig.attempt_count = 1;
	assert_true(attempt_allowed(&fixture.rig, &beyond));
	assert_false(attempt_allowed(&fixture.rig, &strange));
	assert_int_equal(attempt_request(&fixture.rig, &beyond, &request, &err), 0);
	assert_int_equal(request.words[0], 4000);
	fixture.attempts[1] =
	    (struct allowed_attempt){.device = 0, .channel = -1, .any_function = true};
	fixture.rig.attempt_count = 2;
	assert_int_equal(attempt_request(&fixture.rig, &strange, &request, &err), 0);
	assert_int_equal(request.unit, 1);
	assert_int_equal(request.pdu[0], 0x63);
	strange.device = 1;
	assert_false(attempt_allowed(&fixture.rig, &strange));
	arena_release(&fixture.arena);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(the_plan_is_the_cheapest_of_all_partitions),
	    cmocka_unit_test(bits_of_one_register_are_read_once),
	    cmocka_unit_test(a_forbidden_gap_divides_the_read),
	    cmocka_unit_test(blocks_come_by_link_device_place_and_address),
	    cmocka_unit_test(a_value_is_missing_where_the_reply_is_not_good),
	    cmocka_unit_test(a_command_outside_its_limits_is_refused),
	    cmocka_unit_test(commands_take_the_function_that_fits),
	    cmocka_unit_test(only_allowed_attempts_are_made),
	};
	return RUN_GROUP(tests);
}
