/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Samples go out in NumPy's format as they come in. The header is as long as
 * it will ever be from the first byte on; its row count is put right after
 * every write of rows, never before, so that whoever reads the file of a run
 * that was killed finds as many rows as the header says (NumPy refuses a file
 * that is shorter than its header promises; our own reader goes by the size).
 *
 * Rejected: Parquet and HDF5 (a library each, and neither can be read after a
 * cut), CSV alone (slow and three times as large), and one file a run (a test
 * then cannot be looked at by itself).
 */
#include "samples_file.h"

#include <errno.h>
#include <fcntl.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "folder.h"

enum {
	BUFFER_SIZE = 1 << 16,
	CSV_ROWS_MOST = 1000000,
	SHAPE_DIGITS = 20,    /* room for any row count */
	STEM_MOST = 40,       /* of a file name; with number and ending below 65 bytes */
	SAME_NAME_MOST = 999, /* tests whose names become the same file name */
	NUMBER_MOST = 32,     /* bytes of one value in the CSV */
};

struct samples_writer {
	const struct run_folder *folder;
	int fd;
	char name[96]; /* "samples/SPD-01.0.npy" */
	const char *base;
	char *header;
	size_t header_size, shape_at; /* shape_at: where the digits of the count stand */
	size_t channel_count, stride;
	char *names; /* the first line of the CSV */
	unsigned char *buffer;
	size_t used, room;
	uint64_t rows; /* in the file */
};

static int writer_fails(const struct samples_writer *writer, const char *what, struct err *reterr)
{
	return folder_cannot(reterr, writer->folder->path, writer->name, what);
}

static void writer_free(struct samples_writer *writer)
{
	if (!writer)
		return;
	if (writer->fd >= 0)
		(void)close(writer->fd);
	free(writer->header);
	free(writer->names);
	free(writer->buffer);
	free(writer);
}

/*
 * Magic, version, length, and a Python literal, padded with blanks to a
 * multiple of 64 bytes: format 1.0; 2.0 where 16 bits do not hold the length.
 */
static int make_header(struct samples_writer *writer, const char *const *channels)
{
	struct text literal, names;
	int rc = -1;
	text_init(&literal, 1 << 20);
	text_init(&names, 1 << 20);
	text_puts(&literal, "{'descr': [('earliest', '<i8'), ('latest', '<i8')");
	text_puts(&names, "earliest,latest");
	for (size_t i = 0; i < writer->channel_count; i++) {
		text_printf(&literal, ", ('%s', '<f8')", channels[i]);
		text_printf(&names, ",%s", channels[i]);
	}
	text_puts(&names, "\n");
	text_puts(&literal, "], 'fortran_order': False, 'shape': (");
	size_t shape = literal.length;
	text_printf(&literal, "%-*d,), }", SHAPE_DIGITS, 0);
	size_t fixed = literal.length > 65000 ? 12 : 10;
	size_t size = (fixed + literal.length + 1 + 63) / 64 * 64;
	if (literal.cut || names.cut || !(writer->header = malloc(size)) ||
	    !(writer->names = strdup(text_string(&names))))
		goto out;
	memset(writer->header, ' ', size);
	memcpy(writer->header, "\x93NUMPY\x01\x00", 8);
	writer->header[6] = fixed == 12 ? 2 : 1;
	size_t length = size - fixed;
	for (size_t i = 8; i < fixed; i++, length >>= 8)
		writer->header[i] = (char)(length & 0xFF);
	memcpy(writer->header + fixed, text_string(&literal), literal.length);
	writer->header[size - 1] = '\n';
	writer->header_size = size;
	writer->shape_at = fixed + shape;
	rc = 0;
out:
	text_release(&literal);
	text_release(&names);
	return rc;
}

/* The first of STEM.N.npy, STEM-2.N.npy ... that does not exist. */
static int create_file(struct samples_writer *writer, const char *test, int block,
                       struct err *reterr)
{
	char stem[STEM_MOST + 1];
	file_name_clean(test, stem, sizeof stem);
	for (int i = 1; i <= SAME_NAME_MOST; i++) {
		struct err err = {0};
		if (i == 1)
			(void)snprintf(writer->name, sizeof writer->name, "samples/%s.%d.npy", stem, block);
		else
			(void)snprintf(writer->name, sizeof writer->name, "samples/%s-%d.%d.npy", stem, i,
			               block);
		if (run_folder_create(writer->folder, writer->name, false, &writer->fd, &err) == 0) {
			writer->base = writer->name + sizeof "samples/" - 1;
			return 0;
		}
		if (errno != EEXIST) {
			if (reterr && reterr->code == ERR_NONE)
				*reterr = err;
			return -1;
		}
	}
	return err_set(reterr, ERR_OUTPUT, "too many tests have a name like '%.40s'", test);
}

int samples_writer_new(const struct run_folder *folder, const char *test, int block,
                       const char *const *channels, size_t channel_count,
                       struct samples_writer **ret_writer, struct err *reterr)
{
	for (size_t i = 0; i < channel_count; i++)
		if (!text_is_name(channels[i], strlen(channels[i])) || !strcmp(channels[i], "earliest") ||
		    !strcmp(channels[i], "latest"))
			return err_set(reterr, ERR_STATE,
			               "'%.64s' cannot be the name of a channel in a samples file",
			               channels[i]);
	struct samples_writer *writer = calloc(1, sizeof *writer);
	if (!writer)
		return err_set(reterr, ERR_NOMEM, "memory ran out");
	writer->folder = folder;
	writer->fd = -1;
	writer->channel_count = channel_count;
	writer->stride = 16 + 8 * channel_count;
	writer->room = writer->stride > BUFFER_SIZE ? writer->stride
	                                            : BUFFER_SIZE / writer->stride * writer->stride;
	writer->buffer = malloc(writer->room);
	if (!writer->buffer || make_header(writer, channels) < 0) {
		(void)err_set(reterr, ERR_NOMEM, "memory ran out");
		goto fail;
	}
	if (create_file(writer, test, block, reterr) < 0)
		goto fail;
	if (file_write_all(writer->fd, writer->header, writer->header_size) < 0) {
		(void)writer_fails(writer, "write", reterr);
		goto fail;
	}
	*ret_writer = writer;
	return 0;
fail:
	writer_free(writer);
	return -1;
}

const char *samples_writer_name(const struct samples_writer *writer)
{
	return writer->base;
}

static int pwrite_all(int fd, const void *bytes, size_t length, off_t at)
{
	const char *next = bytes;
	while (length > 0) {
		ssize_t n = pwrite(fd, next, length, at);
		if (n < 0 && errno == EINTR)
			continue;
		if (n <= 0) {
			if (n == 0)
				errno = EIO;
			return -1;
		}
		next += n;
		at += n;
		length -= (size_t)n;
	}
	return 0;
}

int samples_writer_flush(struct samples_writer *writer, struct err *reterr)
{
	if (writer->used == 0)
		return 0;
	/* At their own place, so that a write that failed half-way is made good by the next. */
	off_t at = (off_t)(writer->header_size + writer->rows * writer->stride);
	if (pwrite_all(writer->fd, writer->buffer, writer->used, at) < 0)
		return writer_fails(writer, "write", reterr);
	uint64_t rows = writer->rows + writer->used / writer->stride;
	char digits[SHAPE_DIGITS + 1];
	(void)snprintf(digits, sizeof digits, "%-*llu", SHAPE_DIGITS, (unsigned long long)rows);
	if (pwrite_all(writer->fd, digits, SHAPE_DIGITS, (off_t)writer->shape_at) < 0)
		return writer_fails(writer, "write", reterr);
	writer->rows = rows;
	writer->used = 0;
	return 0;
}

int samples_writer_add(struct samples_writer *writer, int64_t sent_ns, int64_t received_ns,
                       const double *values, struct err *reterr)
{
	if (writer->used == writer->room && samples_writer_flush(writer, reterr) < 0)
		return -1;
	unsigned char *row = writer->buffer + writer->used;
	memcpy(row, &sent_ns, 8);
	memcpy(row + 8, &received_ns, 8);
	if (writer->channel_count)
		memcpy(row + 16, values, 8 * writer->channel_count);
	writer->used += writer->stride;
	if (writer->used == writer->room)
		return samples_writer_flush(writer, reterr);
	return 0;
}

/* The shorter of two forms that both read back as the same value; NaN is an empty field. */
static size_t csv_number(double value, char *at)
{
	int length;
	if (isnan(value))
		return 0;
	if (value == rint(value) && fabs(value) < 1e15)
		length = snprintf(at, NUMBER_MOST, "%lld", (long long)value);
	else {
		length = snprintf(at, NUMBER_MOST, "%.15g", value);
		if (strtod(at, NULL) != value)
			length = snprintf(at, NUMBER_MOST, "%.17g", value);
	}
	return length < 0 ? 0 : (size_t)length;
}

static size_t csv_row(const unsigned char *row, size_t channel_count, char *line)
{
	int64_t times[2];
	memcpy(times, row, sizeof times);
	size_t used = (size_t)snprintf(line, 64, "%lld,%lld", (long long)times[0], (long long)times[1]);
	for (size_t i = 0; i < channel_count; i++) {
		double value;
		memcpy(&value, row + 16 + 8 * i, sizeof value);
		line[used++] = ',';
		used += csv_number(value, line + used);
	}
	line[used++] = '\n';
	return used;
}

/* Reads the rows back in pieces of one buffer and writes them as text. */
static int csv_rows(struct samples_writer *writer, int fd, char *line, char *out)
{
	size_t used = 0;
	for (uint64_t row = 0; row < writer->rows;) {
		uint64_t some = writer->room / writer->stride;
		if (some > writer->rows - row)
			some = writer->rows - row;
		size_t length = (size_t)some * writer->stride;
		off_t at = (off_t)(writer->header_size + row * writer->stride);
		for (size_t done = 0; done < length;) {
			ssize_t n = pread(writer->fd, writer->buffer + done, length - done, at + (off_t)done);
			if (n < 0 && errno == EINTR)
				continue;
			if (n <= 0)
				return -1;
			done += (size_t)n;
		}
		for (size_t i = 0; i < some; i++) {
			size_t size = csv_row(writer->buffer + i * writer->stride, writer->channel_count, line);
			if (used + size > BUFFER_SIZE) {
				if (file_write_all(fd, out, used) < 0)
					return -1;
				used = 0;
			}
			if (size > BUFFER_SIZE) {
				if (file_write_all(fd, line, size) < 0)
					return -1;
				continue;
			}
			memcpy(out + used, line, size);
			used += size;
		}
		row += some;
	}
	return file_write_all(fd, out, used);
}

static int write_csv(struct samples_writer *writer, struct err *reterr)
{
	char name[sizeof writer->name];
	(void)snprintf(name, sizeof name, "%s", writer->name);
	memcpy(name + strlen(name) - 3, "csv", 3);
	char *line = malloc(64 + (NUMBER_MOST + 1) * (writer->channel_count + 1));
	char *out = malloc(BUFFER_SIZE);
	int rc = -1, fd;
	if (!line || !out) {
		(void)err_set(reterr, ERR_NOMEM, "memory ran out");
		goto done;
	}
	if (run_folder_begin(writer->folder, name, &fd, reterr) < 0)
		goto done;
	bool good = file_write_all(fd, writer->names, strlen(writer->names)) == 0 &&
	            csv_rows(writer, fd, line, out) == 0;
	rc = run_folder_finish(writer->folder, name, fd, good, reterr);
done:
	free(line);
	free(out);
	return rc;
}

int samples_writer_close(struct samples_writer *writer, struct err *reterr)
{
	if (!writer)
		return 0;
	int rc = samples_writer_flush(writer, reterr);
	if (fsync(writer->fd) < 0)
		rc = writer_fails(writer, "write to the disk", reterr);
	if (rc == 0 && writer->rows <= CSV_ROWS_MOST)
		rc = write_csv(writer, reterr);
	writer_free(writer);
	return rc;
}
