/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_FUZZ_H
#define DRIVETRIAL_FUZZ_H
/*
 * What the fuzz targets share. A target is one file with a fuzz_one(): with
 * clang's libFuzzer it is searched with (tests/fuzz/search), without it every
 * file of its corpus is fed to it once, as an ordinary test (replay.c).
 *
 * demand() states what must hold for every input whatsoever; it aborts, so
 * that both ways see it.
 */
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>

#include "rig.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

#define demand(condition)                                                                          \
	do {                                                                                           \
		if (!(condition)) {                                                                        \
			(void)fprintf(stderr, "%s:%d: does not hold: %s\n", __FILE__, __LINE__, #condition);   \
			abort();                                                                               \
		}                                                                                          \
	} while (0)

/* A file in memory with these bytes; its path, of at least 64 bytes. Close the descriptor. */
int fuzz_file(const uint8_t *data, size_t size, char *ret_path, size_t path_size);

/*
 * What must hold of a load: an error is of a kind that loads have, faults have
 * a position and a text, and where nothing was loaded somebody says why. What
 * is printed holds nothing that a terminal would obey.
 */
void fuzz_loaded(int rc, const void *loaded, const struct faults *faults, const struct err *err);

/* Text for people: UTF-8 without control characters (but tab and line end) and direction overrides.
 */
void fuzz_readable(const char *text);

/* The rig of a golden case, loaded once and kept; NULL never (it aborts). */
const struct rig *fuzz_rig(const char *path);

#endif
