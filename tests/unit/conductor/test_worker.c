/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The pace of a worker in virtual time, on a link that follows a script: slots,
 * stalls, commands, groups of several periods, silence, pauses, and several
 * requests under way. All times are exact, since nothing here runs by a clock.
 */
#include "near.h"

#include <stdlib.h>
#include <string.h>

#include "worker.h"

#define US INT64_C(1000)
#define MS INT64_C(1000000)

enum { BEGUN_MOST = 4096, OUTSTANDING_MOST = 16 };

/* ---- the link ------------------------------------------------------------ */

struct begun {
	int64_t at_ns;
	uint8_t unit;
	enum link_function function;
	uint16_t address;
	int outstanding; /* with this one */
};

struct script {
	struct link link;
	int64_t reply_ns; /* from request to reply */
	int stalled;      /* number of the request that takes stall_ns instead; -1 none */
	int64_t stall_ns;
	int lost; /* number of the request whose reply is as lost_as; -1 none */
	enum link_status lost_as;
	struct begun begun[BEGUN_MOST];
	int begun_count;
	int64_t sent_ns[OUTSTANDING_MOST], due_ns[OUTSTANDING_MOST];
	int numbers[OUTSTANDING_MOST];
	int outstanding, opens, closes;
	bool failing; /* after a lost reply, until closed */
};

static struct script *script_of(struct link *link)
{
	return (struct script *)link;
}

static int script_open(struct link *link, struct err *reterr)
{
	(void)reterr;
	script_of(link)->opens++;
	return 0;
}

static void script_close(struct link *link)
{
	assert_int_equal(script_of(link)->outstanding, 0);
	script_of(link)->closes++;
}

static int script_begin(struct link *link, const struct link_request *request, int64_t now_ns,
                        struct err *reterr)
{
	struct script *script = script_of(link);
	(void)reterr;
	assert_true(script->outstanding < (link->depth > 1 ? link->depth : 1));
	assert_true(script->begun_count < BEGUN_MOST);
	assert_false(script->failing && script->outstanding > 0);
	int number = script->begun_count++, at = script->outstanding++;
	script->sent_ns[at] = now_ns;
	script->numbers[at] = number;
	script->due_ns[at] = now_ns + (number == script->stalled ? script->stall_ns : script->reply_ns);
	script->begun[number] = (struct begun){now_ns, request->unit, request->function,
	                                       request->address, script->outstanding};
	return 0;
}

static int64_t script_end(struct link *link, int64_t now_ns, struct link_reply *ret_reply)
{
	struct script *script = script_of(link);
	assert_true(script->outstanding > 0);
	if (script->due_ns[0] > now_ns && !script->failing)
		return script->due_ns[0];
	script->failing = script->failing || script->numbers[0] == script->lost;
	memset(ret_reply, 0, sizeof *ret_reply);
	ret_reply->status = script->failing ? script->lost_as : LINK_OK;
	ret_reply->count = LINK_REGISTERS_MOST;
	ret_reply->sent_ns = script->sent_ns[0];
	ret_reply->received_ns = now_ns;
	script->outstanding--;
	if (script->outstanding == 0)
		script->failing = false;
	for (int i = 0; i < script->outstanding; i++) {
		script->sent_ns[i] = script->sent_ns[i + 1];
		script->due_ns[i] = script->due_ns[i + 1];
		script->numbers[i] = script->numbers[i + 1];
	}
	return now_ns;
}

static void script_interrupt(struct link *link)
{
	(void)link;
}

static const struct link_ops SCRIPT_OPS = {.name = "script",
                                           .open = script_open,
                                           .close = script_close,
                                           .begin = script_begin,
                                           .end = script_end,
                                           .interrupt = script_interrupt,
                                           .release = script_interrupt};

/* ---- the worker ------------------------------------------------------------ */

struct bench {
	struct arena arena;
	struct faults faults;
	struct rig rig; /* a copy: the tests change its devices */
	struct rig_device devices[16];
	struct virtual_clock clock;
	struct stop stop;
	struct script script;
	struct worker *worker;
	struct poll_plan plan;
	struct read_block reads[16];
	struct poll_block blocks[16];
	int channels[16];
	size_t block_count;
	int wakes;
};

static void on_wake(void *context)
{
	((struct bench *)context)->wakes++;
}

static int setup(void **state)
{
	struct bench *bench = calloc(1, sizeof *bench);
	const struct rig *rig = NULL;
	struct err err = {0};
	assert_non_null(bench);
	arena_init(&bench->arena, 0);
	assert_int_equal(
	    rig_load(SOURCE_DIR "/rigs/model-spm.yaml", &bench->arena, &bench->faults, &rig, &err), 0);
	assert_non_null(rig);
	bench->rig = *rig;
	assert_true(rig->device_count <= sizeof bench->devices / sizeof bench->devices[0]);
	memcpy(bench->devices, rig->devices, rig->device_count * sizeof *rig->devices);
	bench->rig.devices = bench->devices;
	stop_init(&bench->stop);
	bench->script =
	    (struct script){.stalled = -1, .lost = -1, .lost_as = LINK_LOST, .reply_ns = 300 * US};
	bench->script.link.ops = &SCRIPT_OPS;
	struct worker_config config = {.rig = &bench->rig,
	                               .link_index = 1,
	                               .link = &bench->script.link,
	                               .clock = clock_virtual(&bench->clock),
	                               .stop = &bench->stop,
	                               .row_values_most = 1,
	                               .wake = on_wake,
	                               .wake_context = bench};
	assert_int_equal(worker_new(&config, &bench->worker, &err), 0);
	*state = bench;
	return 0;
}

static int teardown(void **state)
{
	struct bench *bench = *state;
	worker_free(bench->worker);
	stop_release(&bench->stop);
	arena_release(&bench->arena);
	free(bench);
	return 0;
}

/* Adds a group of `count` blocks, each of the one channel. */
static void add_group(struct bench *bench, int64_t period_ns, const char *channel, size_t count)
{
	struct poll_group *group = &bench->plan.groups[bench->plan.group_count++];
	int index = rig_channel_find(&bench->rig, channel, strlen(channel));
	assert_true(index >= 0);
	const struct rig_channel *rig_channel = &bench->rig.channels[index];
	*group = (struct poll_group){
	    .period_ns = period_ns, .blocks = &bench->blocks[bench->block_count], .count = count};
	for (size_t i = 0; i < count; i++) {
		size_t at = bench->block_count++;
		bench->channels[at] = index;
		bench->reads[at] = (struct read_block){.device = rig_channel->device,
		                                       .link = 1,
		                                       .place = rig_channel->place,
		                                       .address = (uint16_t)rig_channel->address,
		                                       .count = 2,
		                                       .channels = &bench->channels[at],
		                                       .channel_count = 1,
		                                       .id = (int)at};
		bench->blocks[at].read = &bench->reads[at];
		block_request(&bench->rig, &bench->reads[at], &bench->blocks[at].request);
	}
}

/* The same loop as that of a rehearsal, for one worker. */
static void run_until(struct bench *bench, int64_t until_ns)
{
	int turns = 0;
	while (bench->clock.now_ns < until_ns) {
		int64_t due = worker_tick(bench->worker, bench->clock.now_ns);
		if (due <= bench->clock.now_ns) {
			assert_true(++turns < 1000); /* else it spins without time going on */
			continue;
		}
		turns = 0;
		bench->clock.now_ns = due < until_ns ? due : until_ns;
	}
}

static void start(struct bench *bench)
{
	worker_set_plan(bench->worker, &bench->plan);
}

/* Takes the rows of one block; their instants into sent[most]. */
static int take_rows(struct bench *bench, int block, int64_t *sent, int64_t *received, int most)
{
	const struct row *row;
	int count = 0;
	while ((row = ring_front(worker_rows(bench->worker)))) {
		if (row->block == block) {
			assert_true(count < most);
			sent[count] = row->sent_ns;
			received[count++] = row->received_ns;
		}
		ring_pop(worker_rows(bench->worker));
	}
	return count;
}

static uint64_t missed(struct bench *bench)
{
	return worker_counts(bench->worker).missed_slots;
}

static void post_write(struct bench *bench, struct link_request *request)
{
	const char *name = "load_control";
	int channel = rig_channel_find(&bench->rig, name, strlen(name));
	struct err err = {0};
	assert_true(channel >= 0);
	assert_int_equal(command_request(&bench->rig, channel, 0, NULL, request, &err), 0);
	worker_post(bench->worker, request, bench->rig.channels[channel].device, false);
}

static int first_write(const struct script *script)
{
	for (int i = 0; i < script->begun_count; i++)
		if (script->begun[i].function >= LINK_WRITE_COIL)
			return i;
	return -1;
}

/* ---- pace -------------------------------------------------------------------- */

static void polls_keep_their_period(void **state)
{
	struct bench *bench = *state;
	int64_t sent[200], received[200];
	add_group(bench, MS, "bench_speed", 1);
	start(bench);
	run_until(bench, 100 * MS);
	int rows = take_rows(bench, 0, sent, received, 200);
	assert_int_equal(rows, 100);
	for (int i = 0; i < rows; i++) {
		assert_int_equal(sent[i], i * MS);
		assert_int_equal(received[i], i * MS + 300 * US);
	}
	assert_int_equal(missed(bench), 0);
}

static void a_stall_is_followed_by_no_burst(void **state)
{
	struct bench *bench = *state;
	int64_t sent[200], received[200];
	add_group(bench, MS, "bench_speed", 1);
	bench->script.stalled = 10;
	bench->script.stall_ns = 5400 * US;
	start(bench);
	run_until(bench, 100 * MS);
	int rows = take_rows(bench, 0, sent, received, 200);
	for (int i = 0; i < rows; i++)
		assert_int_equal(sent[i] % MS, 0);
	for (int i = 1; i < rows; i++)
		assert_int_equal(sent[i] - sent[i - 1], i == 11 ? 6 * MS : MS);
	assert_int_equal(missed(bench), 5); /* the slots at 11 to 15 ms */
	assert_int_equal((uint64_t)rows + missed(bench), 100);
}

static void missed_slots_are_those_that_the_rows_lack(void **state)
{
	struct bench *bench = *state;
	int64_t sent[200], received[200];
	uint64_t lacking = 0;
	add_group(bench, MS, "bench_speed", 1);
	bench->script.reply_ns = 2500 * US;
	start(bench);
	run_until(bench, 99 * MS); /* the round of the slot at 96 ms is over */
	int rows = take_rows(bench, 0, sent, received, 200);
	for (int i = 1; i < rows; i++)
		lacking += (uint64_t)((sent[i] - sent[i - 1]) / MS - 1);
	assert_int_equal(rows, 33);
	assert_int_equal(lacking, 64);
	assert_int_equal(missed(bench), lacking + 2); /* after the last row: 97 and 98 */
}

static void a_reply_that_ends_on_a_slot_misses_none(void **state)
{
	struct bench *bench = *state;
	int64_t sent[200], received[200];
	add_group(bench, MS, "bench_speed", 1);
	bench->script.reply_ns = MS;
	start(bench);
	run_until(bench, 50 * MS);
	assert_int_equal(take_rows(bench, 0, sent, received, 200), 49);
	assert_int_equal(missed(bench), 0);
}

static void fastest_polls_without_pause(void **state)
{
	struct bench *bench = *state;
	int64_t sent[400], received[400];
	add_group(bench, 0, "bench_speed", 1);
	start(bench);
	run_until(bench, 30 * MS);
	int rows = take_rows(bench, 0, sent, received, 400);
	assert_int_equal(rows, 99);
	for (int i = 1; i < rows; i++)
		assert_int_equal(sent[i], received[i - 1]);
	assert_int_equal(missed(bench), 0);
}

static void a_long_round_does_not_hold_up_a_fast_group(void **state)
{
	struct bench *bench = *state;
	int64_t sent[200], received[200];
	add_group(bench, 20 * MS, "shaft_torque", 10); /* 3 ms of reading */
	add_group(bench, MS, "bench_speed", 1);
	start(bench);
	run_until(bench, 100 * MS);
	const struct script *script = &bench->script;
	int slow = 0, fast = 0;
	for (int i = 0; i < script->begun_count; i++) {
		bool is_fast = script->begun[i].address == bench->blocks[10].request.address;
		if (is_fast) /* at most one block of the slow group is under way */
			assert_true(script->begun[i].at_ns - fast * MS < 300 * US);
		fast += is_fast;
		slow += !is_fast;
	}
	assert_int_equal(fast, 100);
	assert_int_equal(slow, 5 * 10);
	assert_int_equal(missed(bench), 0);
	assert_int_equal(take_rows(bench, 10, sent, received, 200), 100);
}

static void fastest_takes_what_a_timed_group_leaves(void **state)
{
	struct bench *bench = *state;
	int64_t sent[400], received[400];
	add_group(bench, 0, "bench_speed", 1);
	add_group(bench, 10 * MS, "shaft_torque", 1);
	start(bench);
	run_until(bench, 90 * MS);
	int timed = 0;
	for (int i = 0; i < bench->script.begun_count; i++)
		if (bench->script.begun[i].address == bench->blocks[1].request.address)
			assert_true(bench->script.begun[i].at_ns - 10 * MS * timed++ <= 600 * US);
	assert_int_equal(timed, 9);
	assert_int_equal(missed(bench), 0);
	assert_true(take_rows(bench, 0, sent, received, 400) >= 289);
}

static void a_saturated_link_still_serves_fastest(void **state)
{
	struct bench *bench = *state;
	int64_t sent[400], received[400];
	add_group(bench, 0, "bench_speed", 1);
	add_group(bench, 300 * US, "shaft_torque", 1); /* takes all of the link */
	start(bench);
	run_until(bench, 60 * MS);
	assert_true(take_rows(bench, 0, sent, received, 400) > 50);
}

/* ---- commands, silence, pauses ------------------------------------------------- */

static void a_command_overtakes_the_polls_of_a_round(void **state)
{
	struct bench *bench = *state;
	struct link_request request;
	struct link_reply reply;
	add_group(bench, 5 * MS, "bench_speed", 6);
	start(bench);
	run_until(bench, 400 * US); /* the second block is under way */
	post_write(bench, &request);
	run_until(bench, 3 * MS);
	assert_int_equal(first_write(&bench->script), 2);
	assert_int_equal(bench->script.begun[2].at_ns, 600 * US);
	assert_int_equal(bench->script.begun_count, 7);
	assert_true(worker_done(bench->worker, &reply));
	assert_int_equal(reply.sent_ns, 600 * US);
	assert_int_equal(reply.received_ns, 900 * US);
}

static void a_silent_device_is_passed_over(void **state)
{
	struct bench *bench = *state;
	int64_t sent[200], received[200], last_sent, last_received;
	add_group(bench, MS, "bench_speed", 1);
	add_group(bench, MS, "load_torque", 1);
	int device = bench->reads[1].device;
	start(bench);
	run_until(bench, 10 * MS);
	worker_silence(bench->worker, device, true);
	assert_true(worker_silent(bench->worker, device, &last_sent, &last_received));
	assert_int_equal(last_received, 9 * MS + 600 * US);
	int before = bench->script.begun_count;
	run_until(bench, 50 * MS);
	for (int i = before; i < bench->script.begun_count; i++)
		assert_int_not_equal(bench->script.begun[i].unit, bench->rig.devices[device].unit);
	assert_int_equal(take_rows(bench, 0, sent, received, 200), 50);
	worker_silence(bench->worker, device, false);
	run_until(bench, 60 * MS);
	assert_int_equal(take_rows(bench, 1, sent, received, 200), 10);
	assert_int_equal(missed(bench), 0);
}

static void only_silent_devices_make_no_loop(void **state)
{
	struct bench *bench = *state;
	add_group(bench, 0, "bench_speed", 1);
	worker_silence(bench->worker, bench->reads[0].device, true);
	start(bench);
	run_until(bench, 10 * MS);
	assert_int_equal(bench->script.begun_count, 0);
}

static void a_device_gets_its_minimum_pause(void **state)
{
	struct bench *bench = *state;
	int64_t sent[200], received[200];
	add_group(bench, 0, "bench_speed", 1);
	add_group(bench, 0, "load_torque", 1);
	bench->devices[bench->reads[0].device].minimum_pause_ns = 2 * MS;
	start(bench);
	run_until(bench, 23 * MS);
	int pausing = 0;
	for (int i = 0; i < bench->script.begun_count; i++)
		pausing += bench->script.begun[i].unit == bench->rig.devices[bench->reads[0].device].unit;
	/* A pause of one device does not hold up the other on the link. */
	assert_true(bench->script.begun_count - pausing > 50);
	int rows = take_rows(bench, 0, sent, received, 200);
	assert_true(rows >= 9);
	for (int i = 1; i < rows; i++)
		assert_true(sent[i] - received[i - 1] >= 2 * MS);
}

static void rows_alone_do_not_wake_the_conductor(void **state)
{
	struct bench *bench = *state;
	struct link_request request;
	add_group(bench, MS, "bench_speed", 1);
	start(bench);
	run_until(bench, 50 * MS);
	assert_int_equal(bench->wakes, 0);
	struct condition condition = {.kind = CONDITION_ABOVE, .a = -1, .channel = bench->channels[0]};
	int watch = worker_watch_add(bench->worker, WATCH_AWAIT, &condition, 50 * MS);
	run_until(bench, 55 * MS);
	assert_int_equal(bench->wakes, 1);
	worker_watch_remove(bench->worker, watch);
	post_write(bench, &request);
	run_until(bench, 60 * MS);
	assert_int_equal(bench->wakes, 2);
}

static void a_decimated_group_is_polled_at_each_slot_and_recorded_at_some(void **state)
{
	struct bench *bench = *state;
	int64_t sent[200], received[200];
	add_group(bench, MS, "bench_speed", 1);
	bench->plan.groups[0].decimate = 10;
	struct condition condition = {.kind = CONDITION_ABOVE, .a = 1, .channel = bench->channels[0]};
	int index = worker_watch_add(bench->worker, WATCH_AWAIT, &condition, 0);
	start(bench);
	run_until(bench, 100 * MS);
	struct watch watch;
	worker_watch_get(bench->worker, index, &watch);
	assert_int_equal(watch.rows, 99); /* the first may show what was true before */
	assert_int_equal(bench->script.begun_count, 100);
	int rows = take_rows(bench, 0, sent, received, 200);
	assert_int_equal(rows, 10);
	for (int i = 0; i < rows; i++)
		assert_int_equal(sent[i], 10 * MS * i);
}

/* ---- several under way ----------------------------------------------------------- */

static void without_the_entry_one_request_is_under_way(void **state)
{
	struct bench *bench = *state;
	bench->script.link.depth = 8;
	add_group(bench, 0, "bench_speed", 4);
	start(bench);
	run_until(bench, 30 * MS);
	assert_true(bench->script.begun_count >= 99);
	for (int i = 0; i < bench->script.begun_count; i++)
		assert_int_equal(bench->script.begun[i].outstanding, 1);
}

static void as_many_are_under_way_as_the_device_takes(void **state)
{
	struct bench *bench = *state;
	int64_t sent[800], received[800];
	bench->script.link.depth = 8;
	add_group(bench, 0, "bench_speed", 1);
	bench->devices[bench->reads[0].device].in_flight = 4;
	start(bench);
	run_until(bench, 30 * MS);
	int most = 0;
	for (int i = 0; i < bench->script.begun_count; i++)
		if (bench->script.begun[i].outstanding > most)
			most = bench->script.begun[i].outstanding;
	assert_int_equal(most, 4);
	int rows = take_rows(bench, 0, sent, received, 800);
	assert_int_equal(rows, 4 * 99);
	for (int i = 1; i < rows; i++)
		assert_true(sent[i] >= sent[i - 1] && received[i] >= received[i - 1]);
}

static void a_link_of_one_stays_at_one(void **state)
{
	struct bench *bench = *state;
	add_group(bench, 0, "bench_speed", 1);
	bench->devices[bench->reads[0].device].in_flight = 4;
	start(bench);
	run_until(bench, 30 * MS); /* the script fails where two are begun */
	assert_int_equal(bench->script.begun_count, 100);
}

static void devices_are_not_mixed_in_flight(void **state)
{
	struct bench *bench = *state;
	bench->script.link.depth = 8;
	add_group(bench, MS, "bench_speed", 3);
	add_group(bench, MS, "load_torque", 3);
	bench->devices[bench->reads[0].device].in_flight = 4;
	start(bench);
	run_until(bench, 20 * MS);
	for (int i = 1; i < bench->script.begun_count; i++)
		if (bench->script.begun[i].unit != bench->script.begun[i - 1].unit)
			assert_int_equal(bench->script.begun[i].outstanding, 1);
}

static void a_command_goes_alone(void **state)
{
	struct bench *bench = *state;
	struct link_request request;
	struct link_reply reply;
	bench->script.link.depth = 8;
	add_group(bench, 0, "bench_speed", 1);
	bench->devices[bench->reads[0].device].in_flight = 4;
	start(bench);
	run_until(bench, 10 * MS + 100 * US);
	post_write(bench, &request);
	run_until(bench, 12 * MS);
	int write = first_write(&bench->script);
	assert_true(write > 0);
	assert_int_equal(bench->script.begun[write].outstanding, 1);
	assert_int_equal(bench->script.begun[write + 1].outstanding, 1);
	assert_true(worker_done(bench->worker, &reply));
	assert_true(reply.sent_ns - (10 * MS + 100 * US) <= 300 * US);
	assert_true(bench->script.begun[write + 1].at_ns >= reply.received_ns);
}

static void timed_rounds_in_flight_keep_their_slots(void **state)
{
	struct bench *bench = *state;
	bench->script.link.depth = 8;
	bench->script.stalled = 21;
	bench->script.stall_ns = 3300 * US;
	add_group(bench, MS, "bench_speed", 4);
	bench->devices[bench->reads[0].device].in_flight = 4;
	start(bench);
	run_until(bench, 50 * MS);
	for (int i = 0; i < bench->script.begun_count; i++)
		assert_int_equal(bench->script.begun[i].at_ns % MS, 0); /* all four at once */
	assert_int_equal(missed(bench), 3);
	assert_int_equal((uint64_t)bench->script.begun_count / 4 + missed(bench), 50);
}

static void a_lost_connection_ends_all_that_were_under_way(void **state)
{
	struct bench *bench = *state;
	bench->script.link.depth = 8;
	bench->script.lost = 40;
	add_group(bench, 0, "bench_speed", 1);
	bench->devices[bench->reads[0].device].in_flight = 4;
	start(bench);
	run_until(bench, 200 * MS);
	assert_int_equal(bench->script.closes, 1); /* which demands that none is outstanding */
	assert_int_equal(bench->script.opens, 2);
	assert_int_equal(worker_counts(bench->worker).lost_replies, 4);
	assert_int_equal(worker_counts(bench->worker).requests + (uint64_t)bench->script.outstanding,
	                 bench->script.begun_count);
}

static void a_timeout_ends_all_that_were_under_way(void **state)
{
	struct bench *bench = *state;
	bench->script.link.depth = 8;
	bench->script.lost = 40;
	bench->script.lost_as = LINK_TIMEOUT;
	add_group(bench, 0, "bench_speed", 1);
	bench->devices[bench->reads[0].device].in_flight = 4;
	start(bench);
	run_until(bench, 200 * MS); /* the script fails where one is begun before all have ended */
	assert_int_equal(worker_counts(bench->worker).timeouts, 4);
	assert_int_equal(bench->script.closes, 0);
	assert_true(bench->script.begun_count > 2000);
}

static void a_silence_waits_for_all_that_were_under_way(void **state)
{
	struct bench *bench = *state;
	int64_t sent, received;
	bench->script.link.depth = 8;
	add_group(bench, 0, "bench_speed", 1);
	int device = bench->reads[0].device;
	bench->devices[device].in_flight = 4;
	start(bench);
	run_until(bench, 10 * MS + 100 * US);
	worker_silence(bench->worker, device, true);
	assert_false(worker_silent(bench->worker, device, &sent, &received));
	int before = bench->script.begun_count;
	run_until(bench, 11 * MS);
	assert_true(worker_silent(bench->worker, device, &sent, &received));
	assert_int_equal(bench->script.begun_count, before);
	assert_int_equal(bench->script.outstanding, 0);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, setup, teardown)

int main(void)
{
	const struct CMUnitTest tests[] = {
	    TEST(polls_keep_their_period),
	    TEST(a_stall_is_followed_by_no_burst),
	    TEST(missed_slots_are_those_that_the_rows_lack),
	    TEST(a_reply_that_ends_on_a_slot_misses_none),
	    TEST(fastest_polls_without_pause),
	    TEST(a_long_round_does_not_hold_up_a_fast_group),
	    TEST(fastest_takes_what_a_timed_group_leaves),
	    TEST(a_saturated_link_still_serves_fastest),
	    TEST(a_command_overtakes_the_polls_of_a_round),
	    TEST(a_silent_device_is_passed_over),
	    TEST(only_silent_devices_make_no_loop),
	    TEST(a_device_gets_its_minimum_pause),
	    TEST(rows_alone_do_not_wake_the_conductor),
	    TEST(a_decimated_group_is_polled_at_each_slot_and_recorded_at_some),
	    TEST(without_the_entry_one_request_is_under_way),
	    TEST(as_many_are_under_way_as_the_device_takes),
	    TEST(a_link_of_one_stays_at_one),
	    TEST(devices_are_not_mixed_in_flight),
	    TEST(a_command_goes_alone),
	    TEST(timed_rounds_in_flight_keep_their_slots),
	    TEST(a_lost_connection_ends_all_that_were_under_way),
	    TEST(a_timeout_ends_all_that_were_under_way),
	    TEST(a_silence_waits_for_all_that_were_under_way),
	};
	return RUN_GROUP(tests);
}
