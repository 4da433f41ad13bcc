/* SPDX-License-Identifier: Apache-2.0 */
/*
 * A counter stepped by an odd constant and mixed by multiplications: two
 * multiplications a draw, no state but the counter, and streams that start
 * far apart. rand() was rejected: its numbers are the C library's own affair,
 * and a seed has to give the same run on every machine. Box and Muller's
 * transform was rejected for the normal numbers: it costs a logarithm and a
 * cosine in the innermost loop, for tails that no sensor has.
 */
#include "model_noise.h"

void noise_init(struct noise *noise, uint64_t seed, enum noise_stream stream)
{
	noise->counter = seed * UINT64_C(0xBF58476D1CE4E5B9) + (uint64_t)stream;
	/* Neighbouring seeds and streams are torn apart by mixing once. */
	noise->counter = noise_bits(noise);
}
