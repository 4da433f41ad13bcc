/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_SAMPLES_FILE_H
#define DRIVETRIAL_SAMPLES_FILE_H
/*
 * samples/TEST.N.npy: NumPy format 1.0 (a published layout), one structured
 * array per test and block: earliest '<i8', latest '<i8' (request sent, reply
 * received, ns since the start of the run), then '<f8' per channel, in its
 * unit; NaN is missing. N is the number of the block.
 *
 * TEST is the test's name through file_name_clean(), at most 40 bytes; where
 * that name is taken (a test of another suite, say) it is TEST-2, TEST-3 ...
 *
 * Written while sampling: the header has a fixed length and first says 0 rows;
 * its count is put right after each write of rows, so that NumPy reads the
 * file of a run that was killed. samples_map_open() goes by the size of the
 * file and takes the whole rows that are there. Memory is bounded by one
 * buffer.
 */
#include "run_folder.h"

struct samples_writer;

int samples_writer_new(const struct run_folder *folder, const char *test, int block,
                       const char *const *channels, size_t channel_count,
                       struct samples_writer **ret_writer, struct err *reterr);
/* "SPD-01.0.npy": for `name` of JOURNAL_BLOCK. Borrowed until close. */
const char *samples_writer_name(const struct samples_writer *writer);
/* One row; values: channel_count of them. */
int samples_writer_add(struct samples_writer *writer, int64_t sent_ns, int64_t received_ns,
                       const double *values, struct err *reterr);
/* Puts buffered rows into the file (not to the disk). */
int samples_writer_flush(struct samples_writer *writer, struct err *reterr);
/*
 * Puts the row count right, syncs, writes the CSV beside it (up to a million
 * rows), frees, on failure too. Takes NULL. The CSV: a line of names, times in
 * ns, values that read back as the same double, an empty field for NaN.
 */
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
