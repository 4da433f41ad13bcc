/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_MODEL_NOISE_H
#define DRIVETRIAL_MODEL_NOISE_H
/*
 * Random numbers of the modelled bench. Every device has a stream of its own,
 * so that an instrument that is not there does not change the others' noise.
 * Drawn on the model's time grid only, never by a read.
 */
#include <stdint.h>

enum noise_stream {
	NOISE_BUILD = 1, /* how this bench was built: initial angle, instrument errors */
	NOISE_SENSORS,   /* the controller's current sensors */
	NOISE_TRANSDUCER,
	NOISE_ANALYSER,
	NOISE_RELAYS,
};

struct noise {
	uint64_t counter;
};

static inline uint64_t noise_bits(struct noise *noise)
{
	uint64_t z = noise->counter += UINT64_C(0x9E3779B97F4A7C15);
	z = (z ^ (z >> 32)) * UINT64_C(0xD6E8FEB86659FD93);
	z = (z ^ (z >> 32)) * UINT64_C(0xD6E8FEB86659FD93);
	return z ^ (z >> 32);
}

/* Uniform in [0, 1). */
static inline double noise_uniform(struct noise *noise)
{
	return (double)(noise_bits(noise) >> 11) * 0x1p-53;
}

/*
 * About normal: mean 0, variance 1, never beyond 3.47. The sum of four
 * uniform numbers of 16 bits, each of variance 1/12.
 */
static inline double noise_normal(struct noise *noise)
{
	uint64_t z = noise_bits(noise);
	int64_t sum =
	    (int64_t)((z & 0xFFFF) + (z >> 16 & 0xFFFF) + (z >> 32 & 0xFFFF) + (z >> 48 & 0xFFFF));
	/* 1.7320508 = sqrt(12 / 4); the mean of the sum is 4 * 32767.5. */
	return (double)(sum - 131070) * (1.7320508075688772 / 65536);
}

void noise_init(struct noise *noise, uint64_t seed, enum noise_stream stream);

#endif
