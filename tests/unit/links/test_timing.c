/* SPDX-License-Identifier: Apache-2.0 */
#include "near.h"

#include "link.h"
#include "timing.h"

static void the_silence_between_frames_is_that_of_the_standard(void **state)
{
	(void)state;
	/* Modbus over Serial Line V1.02, 2.5.1.1: 3.5 characters of 11 bits up to
	 * 19200 baud (4.01042 ms and 2.00521 ms), fixed 1.750 ms above. */
	const struct {
		int baud;
		double t35_ms;
	} rows[] = {{9600, 4.01042}, {19200, 2.00521}, {38400, 1.750}, {115200, 1.750}};
	for (size_t i = 0; i < sizeof rows / sizeof rows[0]; i++) {
		struct timing timing = timing_rtu(rows[i].baud, 11);
		assert_near((double)timing_t35_ns(&timing) / 1e6, rows[i].t35_ms, 1e-5, "ms");
	}
	struct timing tcp = timing_tcp();
	assert_int_equal(timing_t35_ns(&tcp), 0);
}

static void frame_lengths_are_those_of_the_standard(void **state)
{
	(void)state;
	/* Modbus Application Protocol V1.1b3, the examples of section 6: lengths of
	 * request and response PDU. */
	const struct {
		int function, count, request, reply;
	} rows[] = {
	    {LINK_READ_COILS, 19, 5, 5},
	    {LINK_READ_DISCRETE_INPUTS, 22, 5, 5},
	    {LINK_READ_HOLDING_REGISTERS, 3, 5, 8},
	    {LINK_READ_INPUT_REGISTERS, 1, 5, 4},
	    {LINK_READ_INPUT_REGISTERS, 125, 5, 252},
	    {LINK_WRITE_COIL, 1, 5, 5},
	    {LINK_WRITE_REGISTER, 1, 5, 5},
	    {LINK_WRITE_COILS, 10, 8, 5},
	    {LINK_WRITE_REGISTERS, 2, 10, 5},
	    {LINK_WRITE_REGISTERS, 123, 252, 5},
	    {LINK_MASK_WRITE, 1, 7, 7},
	    {LINK_RAW, 9, 9, 2},
	};
	for (size_t i = 0; i < sizeof rows / sizeof rows[0]; i++) {
		assert_int_equal(timing_request_bytes(rows[i].function, rows[i].count), rows[i].request);
		assert_int_equal(timing_reply_bytes(rows[i].function, rows[i].count), rows[i].reply);
	}
}

static void a_serial_transaction_is_its_bits_and_silences(void **state)
{
	(void)state;
	/* Closed form at 9600 baud, 11 bits: 8 characters out, 11 back, two
	 * silences of 38.5 bits, 1 ms of turnaround. */
	struct timing timing = timing_rtu(9600, 11);
	timing.per_register_ns = 0;
	const double bit_ms = 1e3 / 9600;
	double request = 8 * 11 * bit_ms + 38.5 * bit_ms;
	double reply = 1.0 + 11 * 11 * bit_ms;
	int fc = LINK_READ_HOLDING_REGISTERS;
	assert_near((double)timing_request_ns(&timing, fc, 3) / 1e6, request, 1e-5, "ms");
	assert_near((double)timing_reply_ns(&timing, fc, 3) / 1e6, reply, 1e-5, "ms");
	assert_near((double)timing_transaction_ns(&timing, fc, 3) / 1e6,
	            request + reply + 38.5 * bit_ms, 1e-5, "ms");
	timing.minimum_pause_ns = 20000000;
	assert_near((double)timing_transaction_ns(&timing, fc, 3) / 1e6, request + reply + 20, 1e-5,
	            "ms");
}

static void more_registers_never_take_less_time(void **state)
{
	(void)state;
	const struct timing timings[] = {timing_tcp(), timing_rtu(9600, 11), timing_rtu(115200, 10)};
	for (size_t i = 0; i < 3; i++)
		for (int count = 2; count <= LINK_REGISTERS_MOST; count++) {
			int fc = LINK_READ_INPUT_REGISTERS;
			int64_t one = timing_transaction_ns(&timings[i], fc, count - 1);
			int64_t more = timing_transaction_ns(&timings[i], fc, count);
			assert_true(more > one);
			/* ... but less than a transaction of its own, so that reads are joined. */
			assert_true(more < one + timing_transaction_ns(&timings[i], fc, 1));
		}
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(the_silence_between_frames_is_that_of_the_standard),
	    cmocka_unit_test(frame_lengths_are_those_of_the_standard),
	    cmocka_unit_test(a_serial_transaction_is_its_bits_and_silences),
	    cmocka_unit_test(more_registers_never_take_less_time),
	};
	return RUN_GROUP(tests);
}
