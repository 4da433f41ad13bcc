/* SPDX-License-Identifier: Apache-2.0 */
#include "near.h"

#include "samples_file.h"
#include "scratch.h"

static const char *const NAMES[] = {"speed", "current_q"};

static struct run_folder made(const char *name)
{
	struct run_folder folder;
	struct err err = {0};
	assert_int_equal(run_folder_new(scratch_path(name), "", "bench", &folder, &err), 0);
	return folder;
}

static struct samples_writer *writer_of(const struct run_folder *folder, const char *test)
{
	struct samples_writer *writer;
	struct err err = {0};
	assert_int_equal(samples_writer_new(folder, test, 0, NAMES, 2, &writer, &err), 0);
	return writer;
}

static void add(struct samples_writer *writer, int row)
{
	struct err err = {0};
	const double values[2] = {row * 0.1, row % 5 == 4 ? (double)NAN : -row};
	assert_int_equal(samples_writer_add(writer, row * 1000, row * 1000 + 7, values, &err), 0);
}

static void close_writer(struct samples_writer *writer)
{
	struct err err = {0};
	assert_int_equal(samples_writer_close(writer, &err), 0);
}

/* Row `row` as it was added. */
static void assert_row(const struct samples_map *map, size_t row)
{
	int64_t times[2];
	double values[2];
	memcpy(times, map->row0 + row * map->stride, sizeof times);
	memcpy(values, map->row0 + row * map->stride + 16, sizeof values);
	assert_int_equal(times[0], (int64_t)row * 1000);
	assert_int_equal(times[1], (int64_t)row * 1000 + 7);
	assert_true(values[0] == (int)row * 0.1);
	if (row % 5 == 4)
		assert_true(isnan(values[1]));
	else
		assert_true(values[1] == -(int)row);
}

static void rows_come_back_as_they_were_added(void **state)
{
	(void)state;
	struct run_folder folder = made("round");
	struct samples_writer *writer = writer_of(&folder, "SPD-01[speed=1500 rpm]");
	struct samples_map map;
	struct err err = {0};
	assert_string_equal(samples_writer_name(writer), "SPD-01_speed_1500_rpm_.0.npy");
	for (int i = 0; i < 10000; i++)
		add(writer, i);
	close_writer(writer);
	assert_int_equal(
	    samples_map_open(scratch_path("round/samples/SPD-01_speed_1500_rpm_.0.npy"), &map, &err),
	    0);
	assert_int_equal(map.rows, 10000);
	assert_int_equal(map.channel_count, 2);
	assert_int_equal(map.stride, 32);
	assert_string_equal(map.names[0], "speed");
	assert_string_equal(map.names[1], "current_q");
	for (size_t i = 0; i < map.rows; i++)
		assert_row(&map, i);
	samples_map_release(&map);
	run_folder_close(&folder);
}

static void the_csv_has_a_line_a_row_and_nothing_for_nan(void **state)
{
	(void)state;
	struct run_folder folder = made("csv");
	struct samples_writer *writer = writer_of(&folder, "A");
	for (int i = 0; i < 6; i++)
		add(writer, i);
	close_writer(writer);
	char *csv = scratch_read(scratch_path("csv/samples/A.0.csv"), NULL);
	assert_string_equal(csv, "earliest,latest,speed,current_q\n"
	                         "0,7,0,0\n"
	                         "1000,1007,0.1,-1\n"
	                         "2000,2007,0.2,-2\n"
	                         "3000,3007,0.30000000000000004,-3\n"
	                         "4000,4007,0.4,\n"
	                         "5000,5007,0.5,-5\n");
	free(csv);
	run_folder_close(&folder);
}

static void a_file_cut_at_any_byte_gives_its_whole_rows(void **state)
{
	(void)state;
	struct run_folder folder = made("cut");
	struct samples_writer *writer = writer_of(&folder, "A");
	size_t length = 0;
	for (int i = 0; i < 20; i++)
		add(writer, i);
	close_writer(writer);
	char *bytes = scratch_read(scratch_path("cut/samples/A.0.npy"), &length);
	size_t header = length - 20 * 32;
	assert_int_equal(header % 64, 0);
	for (size_t cut = 0; cut < length; cut++) {
		struct samples_map map;
		struct err err = {0};
		assert_true(scratch_write(scratch_path("cut/part.npy"), bytes, cut));
		int rc = samples_map_open(scratch_path("cut/part.npy"), &map, &err);
		if (cut < header) {
			assert_int_equal(rc, -1);
			assert_int_equal(err.code, ERR_FILE);
			continue;
		}
		assert_int_equal(rc, 0);
		assert_int_equal(map.rows, (cut - header) / 32);
		if (map.rows)
			assert_row(&map, map.rows - 1);
		samples_map_release(&map);
	}
	free(bytes);
	run_folder_close(&folder);
}

/* What a reader of NumPy's format sees of a run that is killed: never more rows than there are. */
static void the_header_never_promises_rows_that_are_not_there(void **state)
{
	(void)state;
	struct run_folder folder = made("lag");
	struct samples_writer *writer = writer_of(&folder, "A");
	struct err err = {0};
	for (int i = 0; i < 12000; i++) {
		add(writer, i);
		if (i % 997 == 0)
			assert_int_equal(samples_writer_flush(writer, &err), 0);
		if (i % 97 != 0)
			continue;
		size_t length;
		char *bytes = scratch_read(scratch_path("lag/samples/A.0.npy"), &length);
		size_t header = 10 + (unsigned char)bytes[8] + 256 * (size_t)(unsigned char)bytes[9];
		const char *shape = strstr(bytes + 10, "'shape': (");
		assert_non_null(shape);
		size_t promised = strtoull(shape + 10, NULL, 10);
		assert_true(header + promised * 32 <= length);
		if (i % 997 == 0)
			assert_int_equal(promised, i + 1);
		free(bytes);
	}
	close_writer(writer);
	run_folder_close(&folder);
}

static void tests_of_the_same_name_get_files_of_their_own(void **state)
{
	(void)state;
	struct run_folder folder = made("same");
	struct samples_writer *one = writer_of(&folder, "A[x=1]");
	struct samples_writer *two = writer_of(&folder, "A(x:1)");
	assert_string_equal(samples_writer_name(one), "A_x_1_.0.npy");
	assert_string_equal(samples_writer_name(two), "A_x_1_-2.0.npy");
	close_writer(one);
	close_writer(two);
	run_folder_close(&folder);
}

static void names_that_are_none_or_double_are_refused(void **state)
{
	(void)state;
	static const char *const bad[] = {"a'b", "", "earliest", "latest", "1x", "a,b"};
	struct run_folder folder = made("bad");
	for (size_t i = 0; i < sizeof bad / sizeof *bad; i++) {
		struct samples_writer *writer;
		struct err err = {0};
		assert_int_equal(samples_writer_new(&folder, "A", 0, &bad[i], 1, &writer, &err), -1);
		assert_int_equal(err.code, ERR_STATE);
	}
	assert_int_equal(scratch_count(folder.path), 0);
	run_folder_close(&folder);
}

static void a_full_disk_is_told_and_what_was_written_stays_readable(void **state)
{
	(void)state;
	struct run_folder folder = made("full");
	struct samples_writer *writer = writer_of(&folder, "A");
	struct samples_map map;
	struct err err = {0}, closing = {0};
	int rc = 0;
	scratch_disk(100000);
	const double values[2] = {1, 2};
	for (int i = 0; i < 10000 && rc == 0; i++)
		rc = samples_writer_add(writer, i * 1000, i * 1000 + 7, values, &err);
	int closed = samples_writer_close(writer, &closing);
	scratch_disk_again();
	assert_int_equal(rc, -1);
	assert_int_equal(err.code, ERR_OUTPUT);
	assert_int_equal(closed, -1);
	assert_int_equal(closing.code, ERR_OUTPUT);
	assert_int_equal(access(scratch_path("full/samples/A.0.csv"), F_OK), -1);
	assert_int_equal(samples_map_open(scratch_path("full/samples/A.0.npy"), &map, &err), 0);
	assert_true(map.rows >= 2048);
	samples_map_release(&map);
	run_folder_close(&folder);
}

static void files_of_another_layout_are_refused_with_the_reason(void **state)
{
	(void)state;
	static const struct {
		const char *name, *find, *put, *why;
	} rows[] = {
	    {"magic", "NUMPY", "NUMPX", "NumPy"},
	    {"order", "False", "True ", "columns"},
	    {"type", "'<f8'), ('current", "'<f4'), ('current", "columns"},
	    {"first", "earliest", "earliesT", "earliest"},
	    {"quote", "'speed'", "'sp'ed'", "columns"},
	    {"shape", "'shape': (0", "'shape': (x", "row count"},
	};
	struct run_folder folder = made("other");
	close_writer(writer_of(&folder, "A"));
	size_t length = 0;
	char *bytes = scratch_read(scratch_path("other/samples/A.0.npy"), &length);
	for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
		struct samples_map map;
		struct err err = {0};
		char *copy = malloc(length);
		assert_non_null(copy);
		memcpy(copy, bytes, length);
		char *at = memmem(copy, length, rows[i].find, strlen(rows[i].find));
		assert_non_null(at);
		memcpy(at, rows[i].put, strlen(rows[i].put));
		assert_true(scratch_write(scratch_path("other/bad.npy"), copy, length));
		assert_int_equal(samples_map_open(scratch_path("other/bad.npy"), &map, &err), -1);
		assert_int_equal(err.code, ERR_FILE);
		assert_non_null(strstr(err.message, rows[i].why));
		free(copy);
	}
	free(bytes);
	struct samples_map map;
	assert_int_equal(samples_map_open(scratch_path("other/none.npy"), &map, NULL), -1);
	assert_int_equal(samples_map_open(scratch_path("other/samples"), &map, NULL), -1);
	run_folder_close(&folder);
}

/* More channels than 64 KiB of header hold: format 2.0. */
static void a_block_of_many_coils_has_a_longer_header(void **state)
{
	(void)state;
	enum { COUNT = 2000 };
	static char names[COUNT][64];
	const char *pointers[COUNT];
	static double values[COUNT];
	struct run_folder folder = made("many");
	struct samples_writer *writer;
	struct samples_map map;
	struct err err = {0};
	for (int i = 0; i < COUNT; i++) {
		(void)snprintf(names[i], sizeof names[i], "a_rather_long_name_of_a_coil_number_%d", i);
		pointers[i] = names[i];
		values[i] = i;
	}
	assert_int_equal(samples_writer_new(&folder, "A", 0, pointers, COUNT, &writer, &err), 0);
	for (int i = 0; i < 10; i++)
		assert_int_equal(samples_writer_add(writer, i, i, values, &err), 0);
	close_writer(writer);
	assert_int_equal(samples_map_open(scratch_path("many/samples/A.0.npy"), &map, &err), 0);
	assert_int_equal(map.channel_count, COUNT);
	assert_int_equal(map.rows, 10);
	assert_string_equal(map.names[COUNT - 1], names[COUNT - 1]);
	samples_map_release(&map);
	run_folder_close(&folder);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(rows_come_back_as_they_were_added),
	    cmocka_unit_test(the_csv_has_a_line_a_row_and_nothing_for_nan),
	    cmocka_unit_test(a_file_cut_at_any_byte_gives_its_whole_rows),
	    cmocka_unit_test(the_header_never_promises_rows_that_are_not_there),
	    cmocka_unit_test(tests_of_the_same_name_get_files_of_their_own),
	    cmocka_unit_test(names_that_are_none_or_double_are_refused),
	    cmocka_unit_test(a_full_disk_is_told_and_what_was_written_stays_readable),
	    cmocka_unit_test(files_of_another_layout_are_refused_with_the_reason),
	    cmocka_unit_test(a_block_of_many_coils_has_a_longer_header),
	};
	return cmocka_run_group_tests(tests, scratch_make, scratch_remove) != 0;
}
