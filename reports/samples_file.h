/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_SAMPLES_FILE_H
#define DRIVETRIAL_SAMPLES_FILE_H
/*
 * samples/TEST.N.npy: NumPy format 1.0 (a published layout), one structured
 * array per test and block: earliest '<i8', latest '<i8' (request sent, reply
 * received, ns since the start of the run), then '<f8' per channel, in its
 * unit; NaN is missing. N is the number of the block.
 *
 * Written while sampling: the header has a fixed length and first says 0 rows;
 * the count is put right at the end. A reader of a file that was cut takes the
 * whole rows that are there. Memory is bounded by one buffer.
 */
#include "run_folder.h"

struct samples_writer;

int samples_writer_new(const struct run_folder *folder, const char *test, int block,
                       const char *const *channels, size_t channel_count,
                       struct samples_writer **ret_writer, struct err *reterr);
/* One row; values: channel_count of them. */
int samples_writer_add(struct samples_writer *writer, int64_t sent_ns, int64_t received_ns,
                       const double *values, struct err *reterr);
/* Puts buffered rows into the file (not to the disk). */
int samples_writer_flush(struct samples_writer *writer, struct err *reterr);
/* Puts the row count right, syncs, writes the CSV beside it (up to a million rows), frees. */
int samples_writer_close(struct samples_writer *writer, struct err *reterr);

/* A mapped file. rows are {i8, i8, f8...}; names are borrowed from the object. */
struct samples_map {
	const unsigned char *row0;
	size_t rows, stride, channel_count;
	char (*names)[65];
	void *mapping;
	size_t mapped_bytes;
};
/* Errors: ERR_FILE (not such a file: says why). A cut file gives its whole rows. */
int samples_map_open(const char *path, struct samples_map *ret_map, struct err *reterr);
void samples_map_release(struct samples_map *map);

#endif
