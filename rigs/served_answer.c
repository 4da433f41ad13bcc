/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The server side of the Modbus Application Protocol V1.1b3, section 6: what
 * a PDU is answered, in the order of its flow charts (function, counts,
 * addresses, then the values). The library's modbus_reply() was rejected: it
 * ignores the unit, knows no function 43, stalls on unknown functions, and its
 * tables of registers cannot refuse a value.
 */
#include "served_inner.h"

#include <string.h>

#include "link.h"

enum {
	FUNCTION_READ_WRITE = 23,
	READ_WRITE_MOST = 121, /* registers written by function 23 */
	GATEWAY_TARGET_SILENT = 0x0B,
	MEI_DEVICE_IDENTIFICATION = 0x0E,
	CONFORMITY = 0x81, /* basic identification, stream and individual access */
	BASIC_OBJECTS = 3, /* 0 to 2 */
};

struct exchange {
	struct served *served;
	struct served_device *device;
	const uint8_t *pdu;
	size_t length;
	uint8_t *reply;
	size_t reply_length;
};

static unsigned get16(const uint8_t *at)
{
	return (unsigned)at[0] << 8 | at[1];
}

static void put16(uint8_t *at, unsigned value)
{
	at[0] = (uint8_t)(value >> 8);
	at[1] = (uint8_t)value;
}

static void get_words(const uint8_t *at, unsigned count, uint16_t *words)
{
	for (size_t i = 0; i < count; i++)
		words[i] = (uint16_t)get16(at + 2 * i);
}

/* Registers that the device gives in one reply. */
static unsigned most_registers(const struct exchange *x)
{
	int most = x->device->device->max_registers;
	return most >= 1 && most < LINK_REGISTERS_MOST ? (unsigned)most : LINK_REGISTERS_MOST;
}

static int echo(struct exchange *x, size_t length)
{
	memcpy(x->reply, x->pdu, length);
	x->reply_length = length;
	return 0;
}

/* Counts are checked before addresses; an address past 65535 is no address. */
static int verify_range(unsigned address, unsigned count, unsigned most)
{
	if (count < 1 || count > most)
		return MODEL_BAD_VALUE;
	return address + count > 0x10000 ? MODEL_BAD_ADDRESS : 0;
}

static int read_bits(struct exchange *x, enum place place)
{
	uint16_t bits[LINK_BITS_MOST];
	if (x->length != 5)
		return MODEL_BAD_VALUE;
	unsigned address = get16(x->pdu + 1), count = get16(x->pdu + 3);
	int answer = verify_range(address, count, LINK_BITS_MOST);
	if (answer == 0)
		answer = served_read(x->served, x->device, place, address, count, bits);
	if (answer != 0)
		return answer;
	unsigned bytes = (count + 7) / 8;
	x->reply[1] = (uint8_t)bytes;
	memset(x->reply + 2, 0, bytes);
	for (unsigned i = 0; i < count; i++)
		x->reply[2 + i / 8] |= (uint8_t)((bits[i] & 1) << (i % 8));
	x->reply_length = 2 + bytes;
	return 0;
}

/* Puts a read of registers into the reply. */
static int put_registers(struct exchange *x, enum place place, unsigned address, unsigned count)
{
	uint16_t words[LINK_REGISTERS_MOST];
	int answer = served_read(x->served, x->device, place, address, count, words);
	if (answer != 0)
		return answer;
	x->reply[1] = (uint8_t)(2 * count);
	for (size_t i = 0; i < count; i++)
		put16(x->reply + 2 + 2 * i, words[i]);
	x->reply_length = 2 + 2 * count;
	return 0;
}

static int read_registers(struct exchange *x, enum place place)
{
	if (x->length != 5)
		return MODEL_BAD_VALUE;
	unsigned address = get16(x->pdu + 1), count = get16(x->pdu + 3);
	int answer = verify_range(address, count, most_registers(x));
	return answer ? answer : put_registers(x, place, address, count);
}

static int write_coil(struct exchange *x)
{
	if (x->length != 5)
		return MODEL_BAD_VALUE;
	unsigned value = get16(x->pdu + 3);
	if (value != 0 && value != 0xFF00)
		return MODEL_BAD_VALUE;
	const uint16_t bit = value != 0;
	int answer = served_write(x->served, x->device, PLACE_COIL, get16(x->pdu + 1), 1, &bit);
	return answer ? answer : echo(x, 5);
}

static int write_register(struct exchange *x)
{
	if (x->length != 5)
		return MODEL_BAD_VALUE;
	const uint16_t word = (uint16_t)get16(x->pdu + 3);
	int answer =
	    served_write(x->served, x->device, PLACE_HOLDING_REGISTER, get16(x->pdu + 1), 1, &word);
	return answer ? answer : echo(x, 5);
}

static int write_coils(struct exchange *x)
{
	uint16_t bits[LINK_WRITE_BITS_MOST];
	if (x->length < 6)
		return MODEL_BAD_VALUE;
	unsigned address = get16(x->pdu + 1), count = get16(x->pdu + 3);
	int answer = verify_range(address, count, LINK_WRITE_BITS_MOST);
	if (answer != MODEL_BAD_VALUE && (x->pdu[5] != (count + 7) / 8 || x->length != 6u + x->pdu[5]))
		answer = MODEL_BAD_VALUE;
	if (answer != 0)
		return answer;
	for (unsigned i = 0; i < count; i++)
		bits[i] = x->pdu[6 + i / 8] >> (i % 8) & 1;
	answer = served_write(x->served, x->device, PLACE_COIL, address, count, bits);
	return answer ? answer : echo(x, 5);
}

static int write_registers(struct exchange *x)
{
	uint16_t words[LINK_WRITE_REGISTERS_MOST];
	if (x->length < 6)
		return MODEL_BAD_VALUE;
	unsigned address = get16(x->pdu + 1), count = get16(x->pdu + 3);
	int answer = verify_range(address, count, LINK_WRITE_REGISTERS_MOST);
	if (answer != MODEL_BAD_VALUE && (x->pdu[5] != 2 * count || x->length != 6 + 2 * count))
		answer = MODEL_BAD_VALUE;
	if (answer != 0)
		return answer;
	get_words(x->pdu + 6, count, words);
	answer = served_write(x->served, x->device, PLACE_HOLDING_REGISTER, address, count, words);
	return answer ? answer : echo(x, 5);
}

static int mask_write(struct exchange *x)
{
	uint16_t word;
	if (x->length != 7)
		return MODEL_BAD_VALUE;
	unsigned address = get16(x->pdu + 1);
	unsigned keep = get16(x->pdu + 3), set = get16(x->pdu + 5);
	int answer = served_read(x->served, x->device, PLACE_HOLDING_REGISTER, address, 1, &word);
	if (answer != 0)
		return answer;
	word = (uint16_t)((word & keep) | (set & ~keep));
	answer = served_write(x->served, x->device, PLACE_HOLDING_REGISTER, address, 1, &word);
	return answer ? answer : echo(x, 7);
}

/* Function 23: the write is done before the read. */
static int read_write(struct exchange *x)
{
	uint16_t words[READ_WRITE_MOST];
	if (x->length < 10)
		return MODEL_BAD_VALUE;
	unsigned from = get16(x->pdu + 1), wanted = get16(x->pdu + 3);
	unsigned to = get16(x->pdu + 5), written = get16(x->pdu + 7);
	if (wanted < 1 || wanted > most_registers(x) || written < 1 || written > READ_WRITE_MOST ||
	    x->pdu[9] != 2 * written || x->length != 10 + 2 * written)
		return MODEL_BAD_VALUE;
	if (from + wanted > 0x10000 || to + written > 0x10000)
		return MODEL_BAD_ADDRESS;
	get_words(x->pdu + 10, written, words);
	/* A read that must fail is seen before anything is written. */
	int answer = put_registers(x, PLACE_HOLDING_REGISTER, from, wanted);
	if (answer == 0)
		answer = served_write(x->served, x->device, PLACE_HOLDING_REGISTER, to, written, words);
	return answer ? answer : put_registers(x, PLACE_HOLDING_REGISTER, from, wanted);
}

/* Adds an object to the reply; false where it does not fit or does not exist. */
static bool add_object(struct exchange *x, unsigned object)
{
	char text[SERVED_OBJECT_BYTES_MOST + 1];
	int length = served_object(x->served, x->device, object, text);
	if (length < 0 || x->reply_length + 2 + (size_t)length > LINK_PDU_MOST)
		return false;
	x->reply[x->reply_length] = (uint8_t)object;
	x->reply[x->reply_length + 1] = (uint8_t)length;
	memcpy(x->reply + x->reply_length + 2, text, (size_t)length);
	x->reply_length += 2 + (size_t)length;
	x->reply[6]++;
	return true;
}

/* Function 43/14. Codes 1 to 3 give a stream of objects, 4 gives one. */
static int identify(struct exchange *x)
{
	if (x->length < 2 || x->pdu[1] != MEI_DEVICE_IDENTIFICATION)
		return MODEL_BAD_FUNCTION;
	if (x->length != 4 || x->pdu[2] < 1 || x->pdu[2] > 4)
		return MODEL_BAD_VALUE;
	unsigned object = x->pdu[3];
	memcpy(x->reply + 1, x->pdu + 1, 2);
	x->reply[3] = CONFORMITY;
	x->reply[4] = x->reply[5] = x->reply[6] = 0; /* more follows, from which object; how many */
	x->reply_length = 7;
	if (x->pdu[2] == 4)
		return add_object(x, object) ? 0 : MODEL_BAD_ADDRESS;
	if (object >= BASIC_OBJECTS)
		object = 0; /* an unknown object restarts the stream */
	for (; object < BASIC_OBJECTS; object++) {
		if (!add_object(x, object)) {
			x->reply[4] = 0xFF;
			x->reply[5] = (uint8_t)object;
			break;
		}
	}
	return 0;
}

static int answer_function(struct exchange *x)
{
	switch (x->pdu[0]) {
	case LINK_READ_COILS:
		return read_bits(x, PLACE_COIL);
	case LINK_READ_DISCRETE_INPUTS:
		return read_bits(x, PLACE_DISCRETE_INPUT);
	case LINK_READ_HOLDING_REGISTERS:
		return read_registers(x, PLACE_HOLDING_REGISTER);
	case LINK_READ_INPUT_REGISTERS:
		return read_registers(x, PLACE_INPUT_REGISTER);
	case LINK_WRITE_COIL:
		return write_coil(x);
	case LINK_WRITE_REGISTER:
		return write_register(x);
	case LINK_WRITE_COILS:
		return write_coils(x);
	case LINK_WRITE_REGISTERS:
		return write_registers(x);
	case LINK_MASK_WRITE:
		return mask_write(x);
	case FUNCTION_READ_WRITE:
		return read_write(x);
	case LINK_IDENTIFY:
		return identify(x);
	default:
		return MODEL_BAD_FUNCTION;
	}
}

static size_t refuse(const struct served_device *device, const uint8_t *pdu, int exception,
                     uint8_t *reply)
{
	if (device && device->wrong_exception)
		exception = exception == MODEL_BAD_VALUE ? MODEL_BAD_ADDRESS : MODEL_BAD_VALUE;
	reply[0] = pdu[0] | 0x80;
	reply[1] = (uint8_t)exception;
	return 2;
}

static void hear(struct served *served, const struct served_device *device)
{
	for (int i = 0; i < MODEL_DEVICES; i++)
		if (device->heard & 1u << i)
			model_heard(served->model, (enum model_device)i);
}

size_t served_answer(struct served *served, int link, uint8_t unit, const uint8_t *pdu,
                     size_t length, uint8_t *ret_reply)
{
	struct exchange x = {.served = served, .pdu = pdu, .length = length, .reply = ret_reply};

	if (length < 1 || length > LINK_PDU_MOST)
		return 0;
	for (size_t i = 0; i < served->rig->device_count; i++)
		if (served->devices[i].device->link == link && served->devices[i].device->unit == unit)
			x.device = &served->devices[i];
	if (!x.device)
		return served->rig->links[link].config.tcp_host
		           ? refuse(NULL, pdu, GATEWAY_TARGET_SILENT, ret_reply)
		           : 0;
	ret_reply[0] = pdu[0];
	int exception = answer_function(&x);
	if (exception != 0)
		return refuse(x.device, pdu, exception, ret_reply);
	hear(served, x.device);
	return x.reply_length;
}
