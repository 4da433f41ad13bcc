/* SPDX-License-Identifier: Apache-2.0 */
#include "near.h"

#include <string.h>

#include "link.h"
#include "timing.h"

struct device {
	int executed;
	int64_t at_ns;
	uint8_t unit;
	bool silent, refuses;
};

static size_t execute(void *context, uint8_t unit, const uint8_t *pdu, size_t length, int64_t at_ns,
                      uint8_t *ret_reply)
{
	struct device *device = context;
	(void)length;
	device->executed++;
	device->at_ns = at_ns;
	device->unit = unit;
	if (device->silent)
		return 0;
	if (device->refuses) {
		ret_reply[0] = pdu[0] | 0x80;
		ret_reply[1] = 2;
		return 2;
	}
	const uint8_t answer[] = {pdu[0], 2, 0x02, 0x2B};
	memcpy(ret_reply, answer, sizeof answer);
	return sizeof answer;
}

static int64_t stands(void *context)
{
	(void)context;
	return 0;
}

static struct link *link_of(const struct timing *timing, uint64_t seed, struct device *device)
{
	const struct link_config config = {.reply_timeout_ns = 50000000, .clock = stands};
	struct link *link;
	struct err err = {0};
	assert_int_equal(link_model_new(&config, timing, seed, execute, device, &link, &err), 0);
	assert_int_equal(link_open(link, &err), 0);
	return link;
}

static const struct link_request request = {
    .unit = 7, .function = LINK_READ_INPUT_REGISTERS, .address = 3, .count = 1};

/* Runs one request; returns when its reply was there. */
static int64_t run(struct link *link, int64_t now_ns, struct link_reply *reply)
{
	struct err err = {0};
	int64_t due_ns;
	assert_int_equal(link_begin(link, &request, now_ns, &err), 0);
	for (int rounds = 0; (due_ns = link_end(link, now_ns, reply)) > now_ns; rounds++) {
		assert_true(rounds < 5);
		now_ns = due_ns;
	}
	return now_ns;
}

static void the_reply_comes_when_timing_says(void **state)
{
	(void)state;
	struct timing timing = timing_rtu(9600, 11);
	timing.jitter_ns = 0;
	struct device device = {0};
	struct link *link = link_of(&timing, 1, &device);
	struct link_reply reply;
	struct err err = {0};
	int64_t arrival = 1000 + timing_request_ns(&timing, LINK_READ_INPUT_REGISTERS, 1);
	int64_t due = arrival + timing_reply_ns(&timing, LINK_READ_INPUT_REGISTERS, 1);

	assert_int_equal(link_begin(link, &request, 1000, &err), 0);
	assert_int_equal(link_end(link, 1000, &reply), arrival);
	assert_int_equal(device.executed, 0); /* not before the request is there */
	assert_int_equal(link_end(link, arrival, &reply), due);
	assert_int_equal(device.executed, 1);
	assert_int_equal(device.at_ns, arrival);
	assert_int_equal(device.unit, 7);
	assert_int_equal(link_end(link, due - 1, &reply), due);
	assert_true(link_end(link, due, &reply) <= due);
	assert_int_equal(device.executed, 1);
	assert_int_equal(reply.status, LINK_OK);
	assert_int_equal(reply.words[0], 555);
	assert_int_equal(reply.sent_ns, 1000);
	assert_int_equal(reply.received_ns, due);
	/* The silence between frames is kept: the next request goes out only after it. */
	assert_int_equal(link_begin(link, &request, due, &err), 0);
	assert_int_equal(link_end(link, due, &reply), due + timing_t35_ns(&timing) + arrival - 1000);
	link_release(link);
}

static void a_silent_device_times_out(void **state)
{
	(void)state;
	struct timing timing = timing_tcp();
	struct device device = {.silent = true};
	struct link *link = link_of(&timing, 1, &device);
	struct link_reply reply;
	assert_int_equal(run(link, 1000, &reply), 1000 + 50000000);
	assert_int_equal(reply.status, LINK_TIMEOUT);
	assert_int_equal(reply.received_ns, 1000 + 50000000);
	device.silent = false;
	(void)run(link, 60000000, &reply);
	assert_int_equal(reply.status, LINK_OK);
	link_release(link);
}

static void a_reply_later_than_the_timeout_is_none(void **state)
{
	(void)state;
	struct timing timing = timing_tcp();
	timing.turnaround_ns = 51000000;
	struct device device = {0};
	struct link *link = link_of(&timing, 1, &device);
	struct link_reply reply;
	assert_int_equal(run(link, 0, &reply), 50000000);
	assert_int_equal(reply.status, LINK_TIMEOUT);
	assert_int_equal(device.executed, 1); /* the device has done it all the same */
	link_release(link);
}

static void a_refusal_is_an_exception(void **state)
{
	(void)state;
	struct timing timing = timing_tcp();
	struct device device = {.refuses = true};
	struct link *link = link_of(&timing, 1, &device);
	struct link_reply reply;
	(void)run(link, 0, &reply);
	assert_int_equal(reply.status, LINK_EXCEPTION);
	assert_int_equal(reply.exception, 2);
	link_release(link);
}

static void one_seed_gives_one_course_of_times(void **state)
{
	(void)state;
	struct timing timing = timing_tcp();
	struct device device = {0};
	int64_t ends[3][20];
	const uint64_t seeds[3] = {5, 5, 6};
	int different = 0;
	for (int s = 0; s < 3; s++) {
		struct link *link = link_of(&timing, seeds[s], &device);
		struct link_reply reply;
		int64_t now = 0;
		for (int i = 0; i < 20; i++) {
			int64_t begun = now;
			now = run(link, now, &reply);
			ends[s][i] = now;
			int64_t shortest = timing_transaction_ns(&timing, LINK_READ_INPUT_REGISTERS, 1);
			assert_in_range(now - begun, shortest, shortest + timing.jitter_ns);
		}
		link_release(link);
	}
	assert_memory_equal(ends[0], ends[1], sizeof ends[0]);
	for (int i = 0; i < 20; i++)
		different += ends[0][i] != ends[2][i];
	assert_true(different > 0);
}

static void an_interrupt_breaks_off_the_request(void **state)
{
	(void)state;
	struct timing timing = timing_tcp();
	struct device device = {0};
	struct link *link = link_of(&timing, 1, &device);
	struct link_reply reply;
	struct err err = {0};
	link_interrupt(link); /* nothing is outstanding: forgotten */
	assert_int_equal(link_begin(link, &request, 0, &err), 0);
	assert_int_equal(link_begin(link, &request, 0, &err), -1); /* one at a time */
	assert_int_equal(err.code, ERR_STATE);
	assert_true(link_end(link, 0, &reply) > 0);
	link_interrupt(link);
	assert_true(link_end(link, 10, &reply) <= 10);
	assert_int_equal(reply.status, LINK_STOPPED);
	assert_int_equal(device.executed, 0);
	link_release(link);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(the_reply_comes_when_timing_says),
	    cmocka_unit_test(a_silent_device_times_out),
	    cmocka_unit_test(a_reply_later_than_the_timeout_is_none),
	    cmocka_unit_test(a_refusal_is_an_exception),
	    cmocka_unit_test(one_seed_gives_one_course_of_times),
	    cmocka_unit_test(an_interrupt_breaks_off_the_request),
	};
	return RUN_GROUP(tests);
}
