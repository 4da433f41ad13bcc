/* SPDX-License-Identifier: Apache-2.0 */
/*
 * One builder and one strict parser for all backends. The Modbus library's
 * read and write calls were rejected for this: they cut an address of 70000 to
 * 4464, accept a count of 0, do not compare unit, protocol and length of a TCP
 * reply, lack function 43, and the modelled link needs the bare units anyway.
 */
#include "pdu.h"

#include <stdarg.h>
#include <stdio.h>
#include <string.h>

enum { MEI_DEVICE_IDENTIFICATION = 0x0E, READ_ONE_OBJECT = 0x04 };

static void put16(uint8_t *at, unsigned value)
{
	at[0] = (uint8_t)(value >> 8);
	at[1] = (uint8_t)value;
}

static unsigned get16(const uint8_t *at)
{
	return (unsigned)at[0] << 8 | at[1];
}

void pdu_reply_clear(struct link_reply *reply)
{
	reply->status = LINK_LOST;
	reply->exception = 0;
	reply->count = 0;
	reply->pdu_length = 0;
	reply->sent_ns = reply->received_ns = 0;
	reply->text[0] = reply->message[0] = '\0';
	memset(reply->words, 0, sizeof reply->words);
}

enum link_status reply_set(struct link_reply *reply, enum link_status status, const char *format,
                           ...)
{
	va_list args;
	va_start(args, format);
	(void)vsnprintf(reply->message, sizeof reply->message, format, args);
	va_end(args);
	reply->status = status;
	return status;
}

/* Largest count of a function; 1 where it has none. */
static unsigned most_of(enum link_function function)
{
	switch (function) {
	case LINK_READ_COILS:
	case LINK_READ_DISCRETE_INPUTS:
		return LINK_BITS_MOST;
	case LINK_READ_HOLDING_REGISTERS:
	case LINK_READ_INPUT_REGISTERS:
	case LINK_WRITE_COILS: /* as many as a request has words for */
		return LINK_REGISTERS_MOST;
	case LINK_WRITE_REGISTERS:
		return LINK_WRITE_REGISTERS_MOST;
	default:
		return 1;
	}
}

static int verify(const struct link_request *request, struct err *reterr)
{
	unsigned most = most_of(request->function);
	if (request->function == LINK_RAW) {
		if (request->pdu_length < 1 || request->pdu_length > LINK_PDU_MOST)
			return err_set(reterr, ERR_STATE, "a raw request of %u bytes; 1 to %d are possible",
			               request->pdu_length, LINK_PDU_MOST);
		return 0;
	}
	if (request->function == LINK_IDENTIFY) {
		if (request->address > 0xFF)
			return err_set(reterr, ERR_STATE, "identification object %u; 0 to 255 are possible",
			               request->address);
		return 0;
	}
	/* Functions without a count may leave it 0. */
	if (request->count > most || (most > 1 && request->count < 1))
		return err_set(reterr, ERR_STATE, "a count of %u in function %d; 1 to %u are possible",
		               request->count, (int)request->function, most);
	if ((unsigned)request->address + request->count > 0x10000)
		return err_set(reterr, ERR_STATE, "%u from address %u goes past address 65535",
		               request->count, request->address);
	return 0;
}

static int build_coils(const struct link_request *request, uint8_t *pdu, struct err *reterr)
{
	int bytes = (request->count + 7) / 8;
	pdu[5] = (uint8_t)bytes;
	memset(pdu + 6, 0, (size_t)bytes);
	for (unsigned i = 0; i < request->count; i++) {
		if (request->words[i] > 1)
			return err_set(reterr, ERR_STATE, "a coil is 0 or 1, not %u", request->words[i]);
		pdu[6 + i / 8] |= (uint8_t)(request->words[i] << (i % 8));
	}
	return 6 + bytes;
}

int pdu_build(const struct link_request *request, uint8_t *pdu, struct err *reterr)
{
	if (verify(request, reterr) < 0)
		return -1;
	pdu[0] = (uint8_t)request->function;
	put16(pdu + 1, request->address);
	put16(pdu + 3, request->count);
	switch (request->function) {
	case LINK_READ_COILS:
	case LINK_READ_DISCRETE_INPUTS:
	case LINK_READ_HOLDING_REGISTERS:
	case LINK_READ_INPUT_REGISTERS:
		return 5;
	case LINK_WRITE_COIL:
		if (request->words[0] > 1)
			return err_set(reterr, ERR_STATE, "a coil is 0 or 1, not %u", request->words[0]);
		put16(pdu + 3, request->words[0] ? 0xFF00 : 0);
		return 5;
	case LINK_WRITE_REGISTER:
		put16(pdu + 3, request->words[0]);
		return 5;
	case LINK_WRITE_COILS:
		return build_coils(request, pdu, reterr);
	case LINK_WRITE_REGISTERS:
		pdu[5] = (uint8_t)(2 * request->count);
		for (size_t i = 0; i < request->count; i++)
			put16(pdu + 6 + 2 * i, request->words[i]);
		return 6 + 2 * request->count;
	case LINK_MASK_WRITE:
		put16(pdu + 3, request->words[0]);
		put16(pdu + 5, request->words[1]);
		return 7;
	case LINK_IDENTIFY:
		pdu[1] = MEI_DEVICE_IDENTIFICATION;
		pdu[2] = READ_ONE_OBJECT;
		pdu[3] = (uint8_t)request->address;
		return 4;
	case LINK_RAW:
		memcpy(pdu, request->pdu, request->pdu_length);
		return request->pdu_length;
	}
	return err_set(reterr, ERR_STATE, "function %d is not one of a link", (int)request->function);
}

static void parse_bits(const struct link_request *request, const uint8_t *pdu, size_t length,
                       struct link_reply *reply)
{
	size_t bytes = (request->count + 7u) / 8;
	if (length != 2 + bytes || pdu[1] != bytes) {
		reply_set(reply, LINK_GARBLED, "a reply of %zu bytes to a read of %u bits", length,
		          request->count);
		return;
	}
	for (unsigned i = 0; i < request->count; i++)
		reply->words[i] = pdu[2 + i / 8] >> (i % 8) & 1;
	reply->count = request->count;
	reply->status = LINK_OK;
}

static void parse_registers(const struct link_request *request, const uint8_t *pdu, size_t length,
                            struct link_reply *reply)
{
	if (length != 2 + 2u * request->count || pdu[1] != 2u * request->count) {
		reply_set(reply, LINK_GARBLED, "a reply of %zu bytes to a read of %u registers", length,
		          request->count);
		return;
	}
	for (size_t i = 0; i < request->count; i++)
		reply->words[i] = (uint16_t)get16(pdu + 2 + 2 * i);
	reply->count = request->count;
	reply->status = LINK_OK;
}

/* Writes are answered by the first bytes of their request. */
static void parse_echo(const struct link_request *request, const uint8_t *pdu, size_t length,
                       struct link_reply *reply)
{
	uint8_t sent[LINK_PDU_MOST];
	size_t echoed = request->function == LINK_MASK_WRITE ? 7 : 5;
	if (pdu_build(request, sent, NULL) < 0 || length != echoed || memcmp(pdu, sent, echoed) != 0)
		reply_set(reply, LINK_GARBLED, "the reply to a write does not repeat what was written");
	else
		reply->status = LINK_OK;
}

static void parse_identification(const struct link_request *request, const uint8_t *pdu,
                                 size_t length, struct link_reply *reply)
{
	if (length < 9 || pdu[1] != MEI_DEVICE_IDENTIFICATION || pdu[2] != READ_ONE_OBJECT ||
	    pdu[6] != 1 || pdu[7] != request->address || (size_t)pdu[8] + 9 != length) {
		reply_set(reply, LINK_GARBLED, "a reply of %zu bytes is not identification object %u",
		          length, request->address);
		return;
	}
	memcpy(reply->text, pdu + 9, pdu[8]);
	reply->text[pdu[8]] = '\0';
	reply->status = LINK_OK;
}

void pdu_parse(const struct link_request *request, const uint8_t *pdu, size_t length,
               struct link_reply *reply)
{
	unsigned function =
	    request->function == LINK_RAW ? request->pdu[0] : (unsigned)request->function;

	if (length < 1 || length > LINK_PDU_MOST) {
		reply_set(reply, LINK_GARBLED, "a reply of %zu bytes", length);
		return;
	}
	if (request->function == LINK_RAW) {
		memcpy(reply->pdu, pdu, length);
		reply->pdu_length = (uint16_t)length;
	}
	if (length == 2 && pdu[0] == (function | 0x80) && pdu[1] != 0) {
		reply->status = LINK_EXCEPTION;
		reply->exception = pdu[1];
		return;
	}
	if (pdu[0] != function) {
		reply_set(reply, LINK_GARBLED, "a reply of function %u to function %u", pdu[0], function);
		return;
	}
	switch (request->function) {
	case LINK_READ_COILS:
	case LINK_READ_DISCRETE_INPUTS:
		parse_bits(request, pdu, length, reply);
		return;
	case LINK_READ_HOLDING_REGISTERS:
	case LINK_READ_INPUT_REGISTERS:
		parse_registers(request, pdu, length, reply);
		return;
	case LINK_WRITE_COIL:
	case LINK_WRITE_REGISTER:
	case LINK_WRITE_COILS:
	case LINK_WRITE_REGISTERS:
	case LINK_MASK_WRITE:
		parse_echo(request, pdu, length, reply);
		return;
	case LINK_IDENTIFY:
		parse_identification(request, pdu, length, reply);
		return;
	case LINK_RAW:
		break;
	}
	reply->status = LINK_OK;
}

/* Of a reply of function 43/14: a list of objects, each with its length. */
static int identification_length(const uint8_t *pdu, size_t known)
{
	if (known < 2)
		return 0;
	if (pdu[1] != MEI_DEVICE_IDENTIFICATION)
		return -1;
	if (known < 7)
		return 0;
	size_t length = 7;
	for (unsigned i = 0; i < pdu[6]; i++) {
		if (known < length + 2)
			return 0;
		length += 2u + pdu[length + 1];
	}
	return length <= LINK_PDU_MOST ? (int)length : -1;
}

int pdu_reply_length(const uint8_t *pdu, size_t known)
{
	if (known < 1)
		return 0;
	if (pdu[0] & 0x80)
		return 2;
	switch (pdu[0]) {
	case LINK_READ_COILS:
	case LINK_READ_DISCRETE_INPUTS:
	case LINK_READ_HOLDING_REGISTERS:
	case LINK_READ_INPUT_REGISTERS:
	case 17: /* report server id */
	case 23: /* read and write */
		return known < 2 ? 0 : 2 + pdu[1];
	case LINK_WRITE_COIL:
	case LINK_WRITE_REGISTER:
	case LINK_WRITE_COILS:
	case LINK_WRITE_REGISTERS:
		return 5;
	case LINK_MASK_WRITE:
		return 7;
	case LINK_IDENTIFY:
		return identification_length(pdu, known);
	default:
		return -1;
	}
}

uint16_t pdu_crc(const uint8_t *bytes, size_t length)
{
	unsigned crc = 0xFFFF;
	for (size_t i = 0; i < length; i++) {
		crc ^= bytes[i];
		for (int bit = 0; bit < 8; bit++)
			crc = crc & 1 ? crc >> 1 ^ 0xA001 : crc >> 1;
	}
	return (uint16_t)crc;
}
