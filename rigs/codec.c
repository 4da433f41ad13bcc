/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Registers to values and back, in three steps that are each their own
 * inverse: put the words into one order (highest first, high byte first), join
 * them to one 64-bit pattern, read the pattern as its type. Only shifts and
 * memcpy of the bit pattern are used, so the host's byte order never matters.
 *
 * A scale such as 0.2 or 0.001 is no exact double. Where the scale is the
 * reciprocal of a whole number, values are divided by that number: raw 3 with
 * scale 0.2 is then the double nearest to 0.6, and equal to a limit written so.
 *
 * Rejected: the float helpers of the Modbus library (they differ between
 * versions), and casts of pointers (undefined, and bound to one byte order).
 */
#include "codec.h"

#include <float.h>
#include <math.h>
#include <string.h>

/* Whole numbers up to here are exact in a double. */
#define EXACT_MOST 9007199254740992.0
#define EXACT_BITS (UINT64_C(1) << 53)

static const char *const type_names[] = {
    "bit",   "uint16",  "int16",   "uint32", "int32", "uint64",
    "int64", "float32", "float64", "text",   NULL,
};

const char *codec_type_name(enum codec_type type)
{
	return type_names[type];
}

const char *const *codec_type_names(void)
{
	return type_names;
}

int codec_registers(const struct codec *codec)
{
	switch (codec->type) {
	case CODEC_BIT:
	case CODEC_UINT16:
	case CODEC_INT16:
		return 1;
	case CODEC_UINT32:
	case CODEC_INT32:
	case CODEC_FLOAT32:
		return 2;
	case CODEC_UINT64:
	case CODEC_INT64:
	case CODEC_FLOAT64:
		return 4;
	case CODEC_TEXT:
		break;
	}
	return codec->text_registers;
}

static uint16_t in_order(const struct codec *codec, uint16_t word)
{
	if (codec->low_byte_first)
		return (uint16_t)(word << 8 | word >> 8);
	return word;
}

static uint64_t join(const struct codec *codec, const uint16_t *words)
{
	int count = codec_registers(codec);
	uint64_t pattern = 0;
	for (int i = 0; i < count; i++) {
		int at = codec->low_word_first ? count - 1 - i : i;
		pattern = pattern << 16 | in_order(codec, words[at]);
	}
	return pattern;
}

static void split(const struct codec *codec, uint64_t pattern, uint16_t *words)
{
	int count = codec_registers(codec);
	for (int i = count - 1; i >= 0; i--) {
		int at = codec->low_word_first ? count - 1 - i : i;
		words[at] = in_order(codec, (uint16_t)(pattern & 0xFFFF));
		pattern >>= 16;
	}
}

static bool is_float(const struct codec *codec)
{
	return codec->type == CODEC_FLOAT32 || codec->type == CODEC_FLOAT64;
}

static bool is_masked(const struct codec *codec)
{
	return codec->mask != 0 && !is_float(codec) && codec->type != CODEC_TEXT &&
	       codec->type != CODEC_BIT;
}

/* A codec that says nothing has scale 1. */
static double scale_of(const struct codec *codec)
{
	return codec->scale == 0.0 ? 1.0 : codec->scale;
}

/* The whole number whose reciprocal the scale is, or 0. */
static double divisor_of(double scale)
{
	double inverse = nearbyint(1.0 / scale);
	return fabs(inverse) > 1.0 && 1.0 / inverse == scale ? inverse : 0.0;
}

static double to_unit(const struct codec *codec, double raw)
{
	double scale = scale_of(codec);
	double divisor = divisor_of(scale);
	double value = divisor != 0.0 ? raw / divisor : raw * scale;
	if (codec->zero != 0.0)
		value += codec->zero;
	return codec->reversed ? -value : value;
}

static double from_unit(const struct codec *codec, double value)
{
	double scale = scale_of(codec);
	double divisor = divisor_of(scale);
	if (codec->reversed)
		value = -value;
	if (codec->zero != 0.0)
		value -= codec->zero;
	return divisor != 0.0 ? value * divisor : value / scale;
}

static int trailing_zeros(uint64_t mask)
{
	return __builtin_ctzll(mask);
}

/* The unscaled number in a pattern; NaN where a double cannot hold it. */
static double pattern_number(const struct codec *codec, uint64_t pattern)
{
	float single;
	double number;
	uint32_t low = (uint32_t)pattern;

	if (is_masked(codec)) {
		uint64_t field = (pattern & codec->mask) >> trailing_zeros(codec->mask);
		return field <= EXACT_BITS ? (double)field : (double)NAN;
	}
	switch (codec->type) {
	case CODEC_INT16:
		return (double)(int16_t)(uint16_t)pattern;
	case CODEC_INT32:
		return (double)(int32_t)low;
	case CODEC_INT64:
		/* Compared as integers: the conversion would round 2^53 + 1 to 2^53. */
		if (pattern + EXACT_BITS > 2 * EXACT_BITS)
			return (double)NAN;
		return (double)(int64_t)pattern;
	case CODEC_UINT64:
		return pattern <= EXACT_BITS ? (double)pattern : (double)NAN;
	case CODEC_FLOAT32:
		memcpy(&single, &low, sizeof single);
		return (double)single;
	case CODEC_FLOAT64:
		memcpy(&number, &pattern, sizeof number);
		return number;
	case CODEC_BIT:
	case CODEC_UINT16:
	case CODEC_UINT32:
	case CODEC_TEXT:
		break;
	}
	return (double)pattern;
}

double codec_decode(const struct codec *codec, const uint16_t *words)
{
	if (codec->type == CODEC_TEXT)
		return (double)NAN;
	if (codec->type == CODEC_BIT)
		return (double)(in_order(codec, words[0]) >> codec->bit & 1);
	double value = to_unit(codec, pattern_number(codec, join(codec, words)));
	/* A turned sign makes -0.0 of an integer 0, which would be printed so. */
	return is_float(codec) ? value : value + 0.0;
}

/* Smallest and largest unscaled number. */
static void raw_range(const struct codec *codec, double *ret_least, double *ret_most)
{
	*ret_least = 0.0;
	if (is_masked(codec)) {
		*ret_most = fmin((double)(codec->mask >> trailing_zeros(codec->mask)), EXACT_MOST);
		return;
	}
	switch (codec->type) {
	case CODEC_BIT:
		*ret_most = 1.0;
		return;
	case CODEC_UINT16:
		*ret_most = (double)UINT16_MAX;
		return;
	case CODEC_INT16:
		*ret_least = (double)INT16_MIN;
		*ret_most = (double)INT16_MAX;
		return;
	case CODEC_UINT32:
		*ret_most = (double)UINT32_MAX;
		return;
	case CODEC_INT32:
		*ret_least = (double)INT32_MIN;
		*ret_most = (double)INT32_MAX;
		return;
	case CODEC_INT64:
		*ret_least = -EXACT_MOST;
		*ret_most = EXACT_MOST;
		return;
	case CODEC_UINT64:
		*ret_most = EXACT_MOST;
		return;
	case CODEC_FLOAT32:
		*ret_least = -(double)FLT_MAX;
		*ret_most = (double)FLT_MAX;
		return;
	case CODEC_FLOAT64:
		*ret_least = -DBL_MAX;
		*ret_most = DBL_MAX;
		return;
	case CODEC_TEXT:
		break;
	}
	*ret_least = *ret_most = (double)NAN;
}

/* The pattern of a value as a float type; false where it overflows. */
static bool float_pattern(const struct codec *codec, double value, uint64_t *ret_pattern)
{
	double number = from_unit(codec, value);
	if (isfinite(value) && !isfinite(number))
		return false;
	if (codec->type == CODEC_FLOAT64) {
		memcpy(ret_pattern, &number, sizeof number);
		return true;
	}
	if (isfinite(number) && fabs(number) > (double)FLT_MAX)
		return false;
	float single = (float)number;
	uint32_t low;
	memcpy(&low, &single, sizeof low);
	*ret_pattern = low;
	return true;
}

/* The pattern of a value as an integer type or field, other bits from `before`. */
static bool integer_pattern(const struct codec *codec, double value, uint64_t before,
                            uint64_t *ret_pattern)
{
	double least, most;
	double number = round(from_unit(codec, value));
	raw_range(codec, &least, &most);
	if (!(number >= least && number <= most))
		return false;
	uint64_t pattern = (uint64_t)(int64_t)number;
	if (is_masked(codec)) {
		uint64_t field = pattern << trailing_zeros(codec->mask);
		if (field & ~codec->mask)
			return false; /* it needs a bit that lies in a hole of the mask */
		pattern = (before & ~codec->mask) | field;
	}
	*ret_pattern = pattern;
	return true;
}

static bool encode_bit(const struct codec *codec, double value, uint16_t *word)
{
	value = round(value);
	if (!(value == 0.0 || value == 1.0))
		return false;
	unsigned bit = 1u << codec->bit;
	unsigned before = in_order(codec, *word);
	unsigned after = value == 1.0 ? before | bit : before & ~bit;
	*word = in_order(codec, (uint16_t)after);
	return true;
}

int codec_encode(const struct codec *codec, double value, uint16_t *words, double *ret_held)
{
	if (codec->type == CODEC_TEXT)
		return -1;
	if (codec->type == CODEC_BIT) {
		if (!encode_bit(codec, value, words))
			return -1;
	} else {
		uint64_t before = is_masked(codec) ? join(codec, words) : 0;
		uint64_t pattern;
		if (!(is_float(codec) ? float_pattern(codec, value, &pattern)
		                      : integer_pattern(codec, value, before, &pattern)))
			return -1;
		split(codec, pattern, words);
	}
	if (ret_held)
		*ret_held = codec_decode(codec, words);
	return 0;
}

void codec_decode_text(const struct codec *codec, const uint16_t *words, char *buffer, size_t size)
{
	size_t length = 0;
	for (int i = 0; i < codec->text_registers; i++) {
		uint16_t word = in_order(codec, words[i]);
		char pair[2] = {(char)(word >> 8), (char)(word & 0xFF)};
		for (int j = 0; j < 2 && length + 1 < size; j++)
			buffer[length++] = pair[j];
	}
	buffer[length] = '\0';
	length = strlen(buffer);
	while (length > 0 && buffer[length - 1] == ' ')
		buffer[--length] = '\0';
}

void codec_range(const struct codec *codec, double *ret_least, double *ret_most)
{
	double least, most;
	raw_range(codec, &least, &most);
	if (codec->type != CODEC_BIT) {
		least = to_unit(codec, least) + 0.0;
		most = to_unit(codec, most) + 0.0;
	}
	*ret_least = least > most ? most : least;
	*ret_most = least > most ? least : most;
}

double codec_resolution(const struct codec *codec)
{
	if (is_float(codec) || codec->type == CODEC_TEXT)
		return 0.0;
	return codec->type == CODEC_BIT ? 1.0 : fabs(scale_of(codec));
}
