/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Register patterns were computed independently with Python's struct.pack
 * (big-endian) and reordered there; nothing here was printed by the codec.
 */
#include "near.h"

#include <string.h>

#include "codec.h"

struct pattern_row {
	enum codec_type type;
	double value;
	int count;
	uint16_t words[4][4]; /* high/high, low word first, low byte first, both */
};

static const struct pattern_row patterns[] = {
    {CODEC_UINT16, 43981, 1, {{0xABCD}, {0xABCD}, {0xCDAB}, {0xCDAB}}},
    {CODEC_INT16, -12345, 1, {{0xCFC7}, {0xCFC7}, {0xC7CF}, {0xC7CF}}},
    {CODEC_UINT32,
     4023233417,
     2,
     {{0xEFCD, 0xAB89}, {0xAB89, 0xEFCD}, {0xCDEF, 0x89AB}, {0x89AB, 0xCDEF}}},
    {CODEC_INT32,
     -19088744,
     2,
     {{0xFEDC, 0xBA98}, {0xBA98, 0xFEDC}, {0xDCFE, 0x98BA}, {0x98BA, 0xDCFE}}},
    {CODEC_UINT64,
     283686952306183,
     4,
     {{0x0001, 0x0203, 0x0405, 0x0607},
      {0x0607, 0x0405, 0x0203, 0x0001},
      {0x0100, 0x0302, 0x0504, 0x0706},
      {0x0706, 0x0504, 0x0302, 0x0100}}},
    {CODEC_INT64,
     -9007199254740991,
     4,
     {{0xFFE0, 0x0000, 0x0000, 0x0001},
      {0x0001, 0x0000, 0x0000, 0xFFE0},
      {0xE0FF, 0x0000, 0x0000, 0x0100},
      {0x0100, 0x0000, 0x0000, 0xE0FF}}},
    {CODEC_FLOAT32,
     -1234.56787109375,
     2,
     {{0xC49A, 0x522C}, {0x522C, 0xC49A}, {0x9AC4, 0x2C52}, {0x2C52, 0x9AC4}}},
    {CODEC_FLOAT32,
     1.401298464324817e-45,
     2,
     {{0x0000, 0x0001}, {0x0001, 0x0000}, {0x0000, 0x0100}, {0x0100, 0x0000}}},
    {CODEC_FLOAT64,
     3.141592653589793,
     4,
     {{0x4009, 0x21FB, 0x5444, 0x2D18},
      {0x2D18, 0x5444, 0x21FB, 0x4009},
      {0x0940, 0xFB21, 0x4454, 0x182D},
      {0x182D, 0x4454, 0xFB21, 0x0940}}},
    {CODEC_FLOAT64,
     -1e-300,
     4,
     {{0x81A5, 0x6E1F, 0xC2F8, 0xF359},
      {0xF359, 0xC2F8, 0x6E1F, 0x81A5},
      {0xA581, 0x1F6E, 0xF8C2, 0x59F3},
      {0x59F3, 0xF8C2, 0x1F6E, 0xA581}}},
};

static struct codec codec_of(enum codec_type type, int order)
{
	return (struct codec){.type = type,
	                      .scale = 1.0,
	                      .low_word_first = (order & 1) != 0,
	                      .low_byte_first = (order & 2) != 0};
}

static void every_type_decodes_and_encodes_in_the_four_orders(void **state)
{
	(void)state;
	for (size_t i = 0; i < sizeof patterns / sizeof patterns[0]; i++) {
		const struct pattern_row *row = &patterns[i];
		for (int order = 0; order < 4; order++) {
			struct codec codec = codec_of(row->type, order);
			uint16_t words[4] = {0};
			double held;
			assert_int_equal(codec_registers(&codec), row->count);
			assert_near(codec_decode(&codec, row->words[order]), row->value, 0, "raw");
			assert_int_equal(codec_encode(&codec, row->value, words, &held), 0);
			assert_memory_equal(words, row->words[order], (size_t)row->count * 2);
			assert_near(held, row->value, 0, "raw");
		}
	}
}

static void every_16_bit_pattern_survives_the_round_trip(void **state)
{
	(void)state;
	const double scales[] = {1, 0.2, 0.01, 0.001, 0.1, 1.0 / 3, 2.5, -0.5, 1e-7, 0.0305};
	for (size_t s = 0; s < sizeof scales / sizeof scales[0]; s++)
		for (int type = CODEC_UINT16; type <= CODEC_INT16; type++)
			for (unsigned raw = 0; raw <= 0xFFFF; raw++) {
				struct codec codec = codec_of((enum codec_type)type, (int)(raw & 3));
				codec.scale = scales[s];
				codec.zero = s % 2 ? 273.15 : 0;
				codec.reversed = s % 3 == 1;
				uint16_t word = (uint16_t)raw, again = 0;
				if (codec_encode(&codec, codec_decode(&codec, &word), &again, NULL) ||
				    again != word)
					fail_msg("scale %g, raw %u became %u", scales[s], raw, again);
			}
}

static void random_32_and_64_bit_patterns_survive_the_round_trip(void **state)
{
	(void)state;
	uint64_t random = 88172645463325252u;
	for (int i = 0; i < 200000; i++) {
		random ^= random << 13;
		random ^= random >> 7;
		random ^= random << 17;
		const enum codec_type types[] = {CODEC_UINT32, CODEC_INT32, CODEC_FLOAT32,
		                                 CODEC_UINT64, CODEC_INT64, CODEC_FLOAT64};
		struct codec codec = codec_of(types[i % 6], i / 6 % 4);
		uint16_t words[4], again[4] = {0};
		memcpy(words, &random, sizeof words);
		double value = codec_decode(&codec, words);
		if (isnan(value))
			continue; /* a NaN, or beyond 2^53: refused, not rounded */
		assert_int_equal(codec_encode(&codec, value, again, NULL), 0);
		assert_memory_equal(words, again, (size_t)codec_registers(&codec) * 2);
	}
}

static void a_decimal_scale_gives_the_nearest_double(void **state)
{
	(void)state;
	struct codec codec = {.type = CODEC_INT16, .scale = 0.2};
	uint16_t word = 3;
	assert_true(codec_decode(&codec, &word) == 0.6); /* 3 * 0.2 is 0.6000000000000001 */
	codec.scale = 0.001;
	word = (uint16_t)-2401;
	assert_true(codec_decode(&codec, &word) == -2.401);
}

static void integers_above_two_to_the_53_are_no_value(void **state)
{
	(void)state;
	struct codec codec = {.type = CODEC_UINT64, .scale = 1};
	const uint16_t exact[4] = {0x0020, 0, 0, 0}, above[4] = {0x0020, 0, 0, 1};
	const uint16_t least[4] = {0xFFE0, 0, 0, 0}, below[4] = {0xFFDF, 0xFFFF, 0xFFFF, 0xFFFF};
	uint16_t words[4];
	assert_near(codec_decode(&codec, exact), 9007199254740992.0, 0, "raw");
	assert_true(isnan(codec_decode(&codec, above)));
	assert_int_equal(codec_encode(&codec, 9007199254740994.0, words, NULL), -1);
	codec.type = CODEC_INT64;
	assert_near(codec_decode(&codec, exact), 9007199254740992.0, 0, "raw");
	assert_true(isnan(codec_decode(&codec, above)));
	assert_near(codec_decode(&codec, least), -9007199254740992.0, 0, "raw");
	assert_true(isnan(codec_decode(&codec, below)));
}

static void what_the_coding_cannot_hold_is_refused(void **state)
{
	(void)state;
	const struct {
		struct codec codec;
		double fits, too_much;
	} rows[] = {
	    {{.type = CODEC_INT16, .scale = 0.2}, 6553.4, 6553.6},
	    {{.type = CODEC_INT16, .scale = 0.2}, -6553.6, -6553.8},
	    {{.type = CODEC_UINT16, .scale = 1}, 0, -1},
	    {{.type = CODEC_UINT16, .scale = 1}, 65535, 65536},
	    {{.type = CODEC_UINT16, .scale = 1}, -0.4, -0.6}, /* rounding is no error */
	    {{.type = CODEC_UINT16, .scale = 1}, 1, (double)NAN},
	    {{.type = CODEC_UINT16, .scale = 1}, 1, (double)INFINITY},
	    {{.type = CODEC_INT32, .scale = 1}, 2147483647, 2147483648},
	    {{.type = CODEC_UINT32, .scale = 1}, 4294967295, 4294967296},
	    {{.type = CODEC_FLOAT32, .scale = 1}, 3.4028234663852886e38, 3.41e38},
	    {{.type = CODEC_FLOAT64, .scale = 0.5}, 1e300, 1.7e308},
	    {{.type = CODEC_UINT16, .mask = 0x00F0, .scale = 1}, 15, 16},
	    {{.type = CODEC_UINT16, .mask = 0x0050, .scale = 1}, 5, 2}, /* a hole in the mask */
	    {{.type = CODEC_BIT, .bit = 3}, 1, 2},
	    {{.type = CODEC_BIT, .bit = 3}, 0, -1},
	    {{.type = CODEC_BIT, .bit = 3}, 0, (double)NAN},
	};
	for (size_t i = 0; i < sizeof rows / sizeof rows[0]; i++) {
		uint16_t words[4] = {0}, untouched[4] = {0};
		assert_int_equal(codec_encode(&rows[i].codec, rows[i].fits, words, NULL), 0);
		assert_int_equal(codec_encode(&rows[i].codec, rows[i].too_much, untouched, NULL), -1);
		assert_int_equal(untouched[0], 0);
	}
}

static void the_range_is_what_can_be_encoded(void **state)
{
	(void)state;
	const struct {
		struct codec codec;
		double least, most, step;
	} rows[] = {
	    {{.type = CODEC_INT16, .scale = 0.2}, -6553.6, 6553.4, 0.2},
	    {{.type = CODEC_INT16, .scale = 0.2, .reversed = true}, -6553.4, 6553.6, 0.2},
	    {{.type = CODEC_UINT16, .scale = 0.1, .zero = -50}, -50, 6503.5, 0.1},
	    {{.type = CODEC_UINT16, .scale = -1}, -65535, 0, 1},
	    {{.type = CODEC_UINT32, .scale = 1}, 0, 4294967295, 1},
	    {{.type = CODEC_UINT16, .mask = 0x0F00, .scale = 2}, 0, 30, 2},
	    {{.type = CODEC_BIT, .bit = 15}, 0, 1, 1},
	};
	for (size_t i = 0; i < sizeof rows / sizeof rows[0]; i++) {
		double least, most;
		uint16_t words[4] = {0};
		codec_range(&rows[i].codec, &least, &most);
		assert_near(least, rows[i].least, 1e-9, "unit");
		assert_near(most, rows[i].most, 1e-9, "unit");
		assert_near(codec_resolution(&rows[i].codec), rows[i].step, 0, "unit");
		assert_int_equal(codec_encode(&rows[i].codec, least, words, NULL), 0);
		assert_int_equal(codec_encode(&rows[i].codec, most, words, NULL), 0);
		assert_int_equal(codec_encode(&rows[i].codec, most + rows[i].step, words, NULL), -1);
		assert_int_equal(codec_encode(&rows[i].codec, least - rows[i].step, words, NULL), -1);
	}
	assert_near(codec_resolution(&(struct codec){.type = CODEC_FLOAT32, .scale = 1}), 0, 0, "");
}

static void a_field_keeps_the_bits_beside_it(void **state)
{
	(void)state;
	struct codec field = {.type = CODEC_UINT16, .scale = 1, .mask = 0x0FF0};
	uint16_t word = 0xA00B;
	double held;
	assert_int_equal(codec_encode(&field, 0x5C, &word, &held), 0);
	assert_int_equal(word, 0xA5CB);
	assert_near(held, 0x5C, 0, "raw");

	struct codec swapped = {.type = CODEC_BIT, .bit = 8, .low_byte_first = true};
	word = 0x1200; /* as a number 0x0012: bit 8 lies in the other byte */
	assert_int_equal(codec_encode(&swapped, 1, &word, &held), 0);
	assert_int_equal(word, 0x1201);
	assert_near(held, 1, 0, "raw");
	assert_int_equal(codec_encode(&swapped, 0, &word, &held), 0);
	assert_int_equal(word, 0x1200);

	struct codec wide = {
	    .type = CODEC_UINT32, .scale = 1, .mask = 0x00FFFF00, .low_word_first = true};
	uint16_t pair[2] = {0x5678, 0x1234};
	assert_near(codec_decode(&wide, pair), 0x3456, 0, "raw");
	assert_int_equal(codec_encode(&wide, 0xBEEF, pair, NULL), 0);
	assert_int_equal(pair[0], 0xEF78);
	assert_int_equal(pair[1], 0x12BE);
}

static void a_register_of_the_standard_reads_as_printed(void **state)
{
	(void)state;
	/* Modbus Application Protocol V1.1b3, 6.3: 02 2B is 555. */
	const uint16_t word = 0x022B;
	assert_near(codec_decode(&(struct codec){.type = CODEC_UINT16, .scale = 1}, &word), 555, 0, "");
}

static void a_reversed_zero_has_no_sign(void **state)
{
	(void)state;
	struct codec codec = {.type = CODEC_INT16, .scale = 0.1, .reversed = true};
	const uint16_t zero = 0, minus = (uint16_t)-15;
	assert_false(signbit(codec_decode(&codec, &zero)));
	assert_near(codec_decode(&codec, &minus), 1.5, 0, "unit");
}

static void nan_and_infinity_of_a_float_are_told(void **state)
{
	(void)state;
	struct codec codec = {.type = CODEC_FLOAT32, .scale = 1};
	const uint16_t nan_words[2] = {0x7FC0, 0}, infinite[2] = {0xFF80, 0};
	assert_true(isnan(codec_decode(&codec, nan_words)));
	assert_true(isinf(codec_decode(&codec, infinite)));
}

static void text_ends_at_nul_and_loses_trailing_blanks(void **state)
{
	(void)state;
	struct codec codec = {.type = CODEC_TEXT, .text_registers = 4};
	char buffer[9];
	const uint16_t padded[4] = {0x322E, 0x342E, 0x3120, 0x2020}; /* "2.4.1   " */
	codec_decode_text(&codec, padded, buffer, sizeof buffer);
	assert_string_equal(buffer, "2.4.1");
	const uint16_t ended[4] = {0x4142, 0x4300, 0x5858, 0x5858}; /* "ABC\0XXXX" */
	codec_decode_text(&codec, ended, buffer, sizeof buffer);
	assert_string_equal(buffer, "ABC");
	codec_decode_text(&codec, ended, buffer, 3);
	assert_string_equal(buffer, "AB");
	codec.low_byte_first = true;
	const uint16_t swapped[4] = {0x4241, 0x4443, 0x4645, 0x4847};
	codec_decode_text(&codec, swapped, buffer, sizeof buffer);
	assert_string_equal(buffer, "ABCDEFGH");
	uint16_t words[4];
	assert_true(isnan(codec_decode(&codec, swapped)));
	assert_int_equal(codec_encode(&codec, 1, words, NULL), -1);
}

static void types_have_their_names(void **state)
{
	(void)state;
	const char *const *names = codec_type_names();
	size_t count = 0;
	while (names[count])
		count++;
	assert_int_equal(count, CODEC_TEXT + 1);
	assert_string_equal(codec_type_name(CODEC_FLOAT64), "float64");
	assert_string_equal(names[CODEC_INT16], "int16");
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(every_type_decodes_and_encodes_in_the_four_orders),
	    cmocka_unit_test(every_16_bit_pattern_survives_the_round_trip),
	    cmocka_unit_test(random_32_and_64_bit_patterns_survive_the_round_trip),
	    cmocka_unit_test(a_decimal_scale_gives_the_nearest_double),
	    cmocka_unit_test(integers_above_two_to_the_53_are_no_value),
	    cmocka_unit_test(what_the_coding_cannot_hold_is_refused),
	    cmocka_unit_test(the_range_is_what_can_be_encoded),
	    cmocka_unit_test(a_field_keeps_the_bits_beside_it),
	    cmocka_unit_test(a_register_of_the_standard_reads_as_printed),
	    cmocka_unit_test(a_reversed_zero_has_no_sign),
	    cmocka_unit_test(nan_and_infinity_of_a_float_are_told),
	    cmocka_unit_test(text_ends_at_nul_and_loses_trailing_blanks),
	    cmocka_unit_test(types_have_their_names),
	};
	return RUN_GROUP(tests);
}
