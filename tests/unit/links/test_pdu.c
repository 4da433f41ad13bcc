/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Byte strings of Modbus Application Protocol V1.1b3 (examples of section 6),
 * as public test suites quote them; 04, 05, 06 and 22 were also encoded
 * independently with python3-pymodbus 3.0.0. CRCs: Modbus over Serial Line
 * V1.02 and the CRC-16/MODBUS check value 4B37 of "123456789".
 */
#include "near.h"

#include <string.h>

#include "pdu.h"

struct exchange_row {
	struct link_request request;
	int request_length;
	uint8_t sent[32];
	int reply_length;
	uint8_t reply[32];
	uint16_t count;
	uint16_t words[24]; /* expected of a read */
};

static const struct exchange_row rows[] = {
    {{.function = LINK_READ_COILS, .address = 0x13, .count = 0x13},
     5,
     {0x01, 0x00, 0x13, 0x00, 0x13},
     5,
     {0x01, 0x03, 0xCD, 0x6B, 0x05},
     0x13,
     {1, 0, 1, 1, 0, 0, 1, 1, 1, 1, 0, 1, 0, 1, 1, 0, 1, 0, 1}},
    {{.function = LINK_READ_DISCRETE_INPUTS, .address = 0xC4, .count = 0x16},
     5,
     {0x02, 0x00, 0xC4, 0x00, 0x16},
     5,
     {0x02, 0x03, 0xAC, 0xDB, 0x35},
     0x16,
     {0, 0, 1, 1, 0, 1, 0, 1, 1, 1, 0, 1, 1, 0, 1, 1, 1, 0, 1, 0, 1, 1}},
    {{.function = LINK_READ_HOLDING_REGISTERS, .address = 0x6B, .count = 3},
     5,
     {0x03, 0x00, 0x6B, 0x00, 0x03},
     8,
     {0x03, 0x06, 0x02, 0x2B, 0x00, 0x00, 0x00, 0x64},
     3,
     {555, 0, 100}},
    {{.function = LINK_READ_INPUT_REGISTERS, .address = 8, .count = 1},
     5,
     {0x04, 0x00, 0x08, 0x00, 0x01},
     4,
     {0x04, 0x02, 0x00, 0x0A},
     1,
     {10}},
    {{.function = LINK_WRITE_COIL, .address = 0xAC, .count = 1, .words = {1}},
     5,
     {0x05, 0x00, 0xAC, 0xFF, 0x00},
     5,
     {0x05, 0x00, 0xAC, 0xFF, 0x00},
     0,
     {0}},
    {{.function = LINK_WRITE_REGISTER, .address = 1, .count = 1, .words = {3}},
     5,
     {0x06, 0x00, 0x01, 0x00, 0x03},
     5,
     {0x06, 0x00, 0x01, 0x00, 0x03},
     0,
     {0}},
    {{.function = LINK_WRITE_COILS,
      .address = 0x13,
      .count = 10,
      .words = {1, 0, 1, 1, 0, 0, 1, 1, 1, 0}},
     8,
     {0x0F, 0x00, 0x13, 0x00, 0x0A, 0x02, 0xCD, 0x01},
     5,
     {0x0F, 0x00, 0x13, 0x00, 0x0A},
     0,
     {0}},
    {{.function = LINK_WRITE_REGISTERS, .address = 1, .count = 2, .words = {0x000A, 0x0102}},
     10,
     {0x10, 0x00, 0x01, 0x00, 0x02, 0x04, 0x00, 0x0A, 0x01, 0x02},
     5,
     {0x10, 0x00, 0x01, 0x00, 0x02},
     0,
     {0}},
    {{.function = LINK_MASK_WRITE, .address = 4, .words = {0x00F2, 0x0025}},
     7,
     {0x16, 0x00, 0x04, 0x00, 0xF2, 0x00, 0x25},
     7,
     {0x16, 0x00, 0x04, 0x00, 0xF2, 0x00, 0x25},
     0,
     {0}},
};

enum { ROWS = sizeof rows / sizeof rows[0] };

static void requests_are_the_bytes_of_the_standard(void **state)
{
	(void)state;
	for (int i = 0; i < ROWS; i++) {
		uint8_t pdu[LINK_PDU_MOST];
		struct err err = {0};
		assert_int_equal(pdu_build(&rows[i].request, pdu, &err), rows[i].request_length);
		assert_memory_equal(pdu, rows[i].sent, (size_t)rows[i].request_length);
	}
}

static void replies_of_the_standard_are_understood(void **state)
{
	(void)state;
	for (int i = 0; i < ROWS; i++) {
		struct link_reply reply;
		pdu_reply_clear(&reply);
		pdu_parse(&rows[i].request, rows[i].reply, (size_t)rows[i].reply_length, &reply);
		assert_int_equal(reply.status, LINK_OK);
		assert_int_equal(reply.count, rows[i].count);
		for (int w = 0; w < rows[i].count; w++)
			assert_int_equal(reply.words[w], rows[i].words[w]);
		assert_int_equal(pdu_reply_length(rows[i].reply, (size_t)rows[i].reply_length),
		                 rows[i].reply_length);
	}
}

static void any_changed_structural_byte_garbles(void **state)
{
	(void)state;
	for (int i = 0; i < ROWS; i++) {
		/* Function, byte count, and of writes every echoed byte. */
		int structural = rows[i].count ? 2 : rows[i].reply_length;
		for (int at = 0; at < structural; at++) {
			struct link_reply reply;
			uint8_t changed[32];
			memcpy(changed, rows[i].reply, sizeof changed);
			changed[at] ^= 0x40;
			pdu_reply_clear(&reply);
			pdu_parse(&rows[i].request, changed, (size_t)rows[i].reply_length, &reply);
			assert_int_equal(reply.status, LINK_GARBLED);
			assert_true(reply.message[0] != '\0');
		}
		for (int cut = 0; cut < rows[i].reply_length; cut++) {
			struct link_reply reply;
			pdu_reply_clear(&reply);
			pdu_parse(&rows[i].request, rows[i].reply, (size_t)cut, &reply);
			assert_int_equal(reply.status, LINK_GARBLED);
		}
	}
}

static void exceptions_are_refusals_with_their_code(void **state)
{
	(void)state;
	struct link_reply reply;
	const uint8_t refused[] = {0x83, 0x02}, foreign[] = {0x84, 0x02}, none[] = {0x83, 0x00};
	pdu_reply_clear(&reply);
	pdu_parse(&rows[2].request, refused, 2, &reply);
	assert_int_equal(reply.status, LINK_EXCEPTION);
	assert_int_equal(reply.exception, 2);
	pdu_reply_clear(&reply);
	pdu_parse(&rows[2].request, foreign, 2, &reply);
	assert_int_equal(reply.status, LINK_GARBLED);
	pdu_reply_clear(&reply);
	pdu_parse(&rows[2].request, none, 2, &reply);
	assert_int_equal(reply.status, LINK_GARBLED);
}

static void an_identification_object_is_read_by_its_number(void **state)
{
	(void)state;
	/* Function 43/14 with code 04 (one object); object 2 "V2.11" of the standard's example. */
	const struct link_request request = {.function = LINK_IDENTIFY, .address = 2};
	const uint8_t sent[] = {0x2B, 0x0E, 0x04, 0x02};
	const uint8_t answer[] = {0x2B, 0x0E, 0x04, 0x81, 0x00, 0x00, 0x01,
	                          0x02, 0x05, 'V',  '2',  '.',  '1',  '1'};
	uint8_t pdu[LINK_PDU_MOST];
	struct link_reply reply;
	assert_int_equal(pdu_build(&request, pdu, NULL), 4);
	assert_memory_equal(pdu, sent, 4);
	pdu_reply_clear(&reply);
	pdu_parse(&request, answer, sizeof answer, &reply);
	assert_int_equal(reply.status, LINK_OK);
	assert_string_equal(reply.text, "V2.11");
	for (size_t known = 0; known < 9; known++)
		assert_int_equal(pdu_reply_length(answer, known), 0);
	assert_int_equal(pdu_reply_length(answer, 9), sizeof answer);
	pdu_reply_clear(&reply);
	pdu_parse(&request, answer, sizeof answer - 1, &reply);
	assert_int_equal(reply.status, LINK_GARBLED);
}

static void the_basic_identification_stream_has_its_length(void **state)
{
	(void)state;
	/* The example of section 6.21: three objects, 22, 15 and 5 bytes (the printed length 0D of the
	 * second does not fit its text of 15 bytes). */
	uint8_t stream[7 + 2 + 22 + 2 + 15 + 2 + 5] = {0x2B, 0x0E, 0x01, 0x01, 0x00, 0x00, 0x03};
	stream[7] = 0;
	stream[8] = 22;
	stream[31] = 1;
	stream[32] = 15;
	stream[48] = 2;
	stream[49] = 5;
	assert_int_equal(pdu_reply_length(stream, sizeof stream), sizeof stream);
	assert_int_equal(pdu_reply_length(stream, 49), 0);
}

static void a_raw_request_goes_out_as_it_stands(void **state)
{
	(void)state;
	struct link_request request = {.function = LINK_RAW, .pdu_length = 3, .pdu = {0x63, 1, 2}};
	uint8_t pdu[LINK_PDU_MOST];
	struct link_reply reply;
	const uint8_t refused[] = {0xE3, 0x01}, accepted[] = {0x63, 9};
	assert_int_equal(pdu_build(&request, pdu, NULL), 3);
	assert_memory_equal(pdu, request.pdu, 3);
	pdu_reply_clear(&reply);
	pdu_parse(&request, refused, 2, &reply);
	assert_int_equal(reply.status, LINK_EXCEPTION);
	assert_int_equal(reply.exception, 1);
	pdu_reply_clear(&reply);
	pdu_parse(&request, accepted, 2, &reply);
	assert_int_equal(reply.status, LINK_OK);
	assert_int_equal(reply.pdu_length, 2);
	assert_int_equal(reply.pdu[1], 9);
}

static void what_the_protocol_does_not_have_is_refused(void **state)
{
	(void)state;
	/* Largest counts: Modbus Application Protocol V1.1b3, section 6. */
	const struct link_request wrong[] = {
	    {.function = LINK_READ_COILS, .count = 2001},
	    {.function = LINK_READ_COILS, .count = 0},
	    {.function = LINK_READ_HOLDING_REGISTERS, .count = 126},
	    {.function = LINK_READ_INPUT_REGISTERS, .count = 0},
	    {.function = LINK_READ_INPUT_REGISTERS, .address = 65535, .count = 2},
	    {.function = LINK_WRITE_REGISTERS, .count = 124},
	    {.function = LINK_WRITE_REGISTERS, .count = 0},
	    {.function = LINK_WRITE_REGISTER, .count = 2},
	    {.function = LINK_WRITE_COIL, .count = 1, .words = {2}},
	    {.function = LINK_WRITE_COILS, .count = 1, .words = {0xFF00}},
	    {.function = LINK_IDENTIFY, .address = 256},
	    {.function = LINK_RAW, .pdu_length = 0},
	    {.function = LINK_RAW, .pdu_length = 254},
	    {.function = (enum link_function)7},
	};
	for (size_t i = 0; i < sizeof wrong / sizeof wrong[0]; i++) {
		uint8_t pdu[LINK_PDU_MOST];
		struct err err = {0};
		assert_int_equal(pdu_build(&wrong[i], pdu, &err), -1);
		assert_int_equal(err.code, ERR_STATE);
	}
	const struct link_request most[] = {
	    {.function = LINK_READ_COILS, .count = 2000},
	    {.function = LINK_READ_INPUT_REGISTERS, .address = 65535, .count = 1},
	    {.function = LINK_READ_HOLDING_REGISTERS, .count = 125},
	    {.function = LINK_WRITE_REGISTERS, .count = 123},
	};
	for (size_t i = 0; i < sizeof most / sizeof most[0]; i++) {
		uint8_t pdu[LINK_PDU_MOST];
		assert_true(pdu_build(&most[i], pdu, NULL) > 0);
	}
}

static void checksums_are_those_of_the_standard(void **state)
{
	(void)state;
	const struct {
		size_t length;
		uint8_t bytes[20];
		uint16_t crc; /* as a number: its low byte goes out first */
	} sums[] = {
	    {2, {0x02, 0x07}, 0x1241},
	    {6, {0x01, 0x03, 0x00, 0x6B, 0x00, 0x03}, 0x1774},
	    {6, {0x11, 0x03, 0x00, 0x6B, 0x00, 0x03}, 0x8776},
	    {3, {0x01, 0x83, 0x02}, 0xF1C0},
	    {9, {'1', '2', '3', '4', '5', '6', '7', '8', '9'}, 0x4B37},
	    {17,
	     {0x01, 0x17, 0x00, 0x03, 0x00, 0x06, 0x00, 0x0E, 0x00, 0x03, 0x06, 0x00, 0xFF, 0x00, 0xFF,
	      0x00, 0xFF},
	     0x9146},
	};
	for (size_t i = 0; i < sizeof sums / sizeof sums[0]; i++)
		assert_int_equal(pdu_crc(sums[i].bytes, sums[i].length), sums[i].crc);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(requests_are_the_bytes_of_the_standard),
	    cmocka_unit_test(replies_of_the_standard_are_understood),
	    cmocka_unit_test(any_changed_structural_byte_garbles),
	    cmocka_unit_test(exceptions_are_refusals_with_their_code),
	    cmocka_unit_test(an_identification_object_is_read_by_its_number),
	    cmocka_unit_test(the_basic_identification_stream_has_its_length),
	    cmocka_unit_test(a_raw_request_goes_out_as_it_stands),
	    cmocka_unit_test(what_the_protocol_does_not_have_is_refused),
	    cmocka_unit_test(checksums_are_those_of_the_standard),
	};
	return RUN_GROUP(tests);
}
