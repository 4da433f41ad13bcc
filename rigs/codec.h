/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_CODEC_H
#define DRIVETRIAL_CODEC_H
/*
 * Between registers and values. Own code on purpose: libmodbus' float helpers
 * differ between versions and are not each other's inverse.
 *
 * A register is 16 bits, high byte first on the wire. `words` says which
 * register of a value comes first, `bytes` whether the two bytes of every
 * register are swapped. value = raw * scale + zero (then the sign is turned
 * where `reversed`). Values are double: 64-bit integers above 2^53 are
 * refused by codec_decode (NaN), never rounded silently.
 * Pure.
 */
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

enum codec_type {
	CODEC_BIT = 0, /* of a coil or discrete input, or bit `bit` of a register */
	CODEC_UINT16,
	CODEC_INT16,
	CODEC_UINT32,
	CODEC_INT32,
	CODEC_UINT64,
	CODEC_INT64,
	CODEC_FLOAT32,
	CODEC_FLOAT64,
	CODEC_TEXT,
};

struct codec {
	enum codec_type type;
	bool low_word_first, low_byte_first;
	double scale;       /* unit per step; 1 by default */
	double zero;        /* value of raw 0, in the unit */
	bool reversed;      /* the sign is turned */
	uint64_t mask;      /* 0: none; else (raw & mask) >> trailing zeros, unsigned */
	int bit;            /* CODEC_BIT in a register: 0 to 15 */
	int text_registers; /* CODEC_TEXT: length in registers */
};

const char *codec_type_name(enum codec_type type); /* "int16" */
const char *const *codec_type_names(void);         /* ends with NULL, in enum order */
/* Registers that a value takes: 1, 2, 4 or text_registers. */
int codec_registers(const struct codec *codec);

/* words: codec_registers() of them. NaN where it is no value (NaN inside, or above 2^53). */
double codec_decode(const struct codec *codec, const uint16_t *words);
/*
 * 0, or -1 where the value cannot be held (out of range, not finite for an
 * integer; rounding to the nearest step is no error). With a mask or bit the
 * other bits of words are kept. *ret_held (may be NULL) is the value that the
 * words now mean.
 */
int codec_encode(const struct codec *codec, double value, uint16_t *words, double *ret_held);
/* The text of CODEC_TEXT, up to the first NUL, trailing blanks cut; raw bytes. size >= 1. */
void codec_decode_text(const struct codec *codec, const uint16_t *words, char *buffer, size_t size);
/* Smallest and largest value that the coding can hold, in the channel's unit. */
void codec_range(const struct codec *codec, double *ret_least, double *ret_most);
/* One step in the unit; 0 for floats. */
double codec_resolution(const struct codec *codec);

#endif
