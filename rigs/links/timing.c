/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Bits and silences of a transaction. RTU follows Modbus over Serial Line
 * V1.02, section 2.5.1.1: the device knows that it has the whole request only
 * after 3.5 character times of silence, so that silence belongs to the request
 * and a second one follows the reply.
 *
 * TCP is counted as frames of 100 Mbit/s Ethernet (preamble, header, check
 * sequence and gap 38 bytes, IP 20, TCP 20, MBAP 7): few microseconds beside
 * the turnaround. Measured tables per device were rejected until a rig says
 * its own; what a bench really does is measured by the run itself.
 */
#include "timing.h"

#include "link.h"

enum {
	RTU_FRAME_BYTES = 3, /* unit, two of CRC */
	TCP_FRAME_BYTES = 7 + 20 + 20 + 38,
	NS_PER_BYTE_100_MBIT = 80,
	FIXED_T35_NS = 1750000, /* above 19200 baud */
	FIXED_T35_ABOVE_BAUD = 19200,
	IDENTIFY_TEXT_BYTES = 32, /* a usual length of an identification object */
};

struct timing timing_tcp(void)
{
	return (struct timing){
	    .bits_per_character = 8,
	    .turnaround_ns = 120000,
	    .jitter_ns = 30000,
	    .per_register_ns = 300,
	};
}

struct timing timing_rtu(int baud, int bits_per_character)
{
	return (struct timing){
	    .serial = true,
	    .baud = baud,
	    .bits_per_character = bits_per_character,
	    .turnaround_ns = 1000000,
	    .jitter_ns = 200000,
	    .per_register_ns = 1000,
	};
}

/* Rounded up: a silence must not be too short. */
static int64_t bits_ns(const struct timing *timing, int64_t bits)
{
	return (bits * 1000000000 + timing->baud - 1) / timing->baud;
}

int64_t timing_t35_ns(const struct timing *timing)
{
	if (!timing->serial)
		return 0;
	if (timing->baud > FIXED_T35_ABOVE_BAUD)
		return FIXED_T35_NS;
	return (bits_ns(timing, 7 * (int64_t)timing->bits_per_character) + 1) / 2;
}

int timing_request_bytes(int function, int count)
{
	switch (function) {
	case LINK_WRITE_COILS:
		return 6 + (count + 7) / 8;
	case LINK_WRITE_REGISTERS:
		return 6 + 2 * count;
	case LINK_MASK_WRITE:
		return 7;
	case LINK_IDENTIFY:
		return 4;
	case LINK_RAW:
		return count; /* a raw request says its length there */
	default:
		return 5; /* reads and single writes */
	}
}

int timing_reply_bytes(int function, int count)
{
	switch (function) {
	case LINK_READ_COILS:
	case LINK_READ_DISCRETE_INPUTS:
		return 2 + (count + 7) / 8;
	case LINK_READ_HOLDING_REGISTERS:
	case LINK_READ_INPUT_REGISTERS:
		return 2 + 2 * count;
	case LINK_MASK_WRITE:
		return 7;
	case LINK_IDENTIFY:
		return 9 + IDENTIFY_TEXT_BYTES;
	case LINK_RAW:
		return 2; /* it is there to be refused */
	default:
		return 5; /* the echo of a write */
	}
}

static int64_t frame_ns(const struct timing *timing, int pdu_bytes)
{
	if (timing->serial)
		return bits_ns(timing, (int64_t)(pdu_bytes + RTU_FRAME_BYTES) * timing->bits_per_character);
	return (int64_t)(pdu_bytes + TCP_FRAME_BYTES) * NS_PER_BYTE_100_MBIT;
}

/* Registers that the device handles; 16 bits are one. */
static int64_t registers_of(int function, int count)
{
	switch (function) {
	case LINK_READ_COILS:
	case LINK_READ_DISCRETE_INPUTS:
	case LINK_WRITE_COILS:
		return (count + 15) / 16;
	case LINK_READ_HOLDING_REGISTERS:
	case LINK_READ_INPUT_REGISTERS:
	case LINK_WRITE_REGISTERS:
		return count;
	default:
		return 1;
	}
}

int64_t timing_request_ns(const struct timing *timing, int function, int count)
{
	return frame_ns(timing, timing_request_bytes(function, count)) + timing_t35_ns(timing);
}

int64_t timing_reply_ns(const struct timing *timing, int function, int count)
{
	return timing->turnaround_ns + timing->per_register_ns * registers_of(function, count) +
	       frame_ns(timing, timing_reply_bytes(function, count));
}

int64_t timing_transaction_ns(const struct timing *timing, int function, int count)
{
	int64_t silence = timing_t35_ns(timing);
	if (silence < timing->minimum_pause_ns)
		silence = timing->minimum_pause_ns;
	return timing_request_ns(timing, function, count) + timing_reply_ns(timing, function, count) +
	       silence;
}
