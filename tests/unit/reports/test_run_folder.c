/* SPDX-License-Identifier: Apache-2.0 */
#include "near.h"

#include "run_folder.h"
#include "scratch.h"

static struct run_folder made(const char *name)
{
	struct run_folder folder;
	struct err err = {0};
	assert_int_equal(
	    run_folder_new(scratch_path(name), "2026-12-01T09:38:17", "bench", &folder, &err), 0);
	return folder;
}

static void write_file(const struct run_folder *folder, const char *name, const char *text)
{
	struct err err = {0};
	assert_int_equal(run_folder_write(folder, name, text, strlen(text), &err), 0);
}

static void a_folder_is_made_with_its_parents_and_never_overwritten(void **state)
{
	(void)state;
	struct err err = {0};
	struct run_folder folder = made("nights/1/run/"), again;
	assert_string_equal(folder.path, scratch_path("nights/1/run"));
	assert_int_equal(run_folder_new(folder.path, "", "bench", &again, &err), -1);
	assert_int_equal(err.code, ERR_OUTPUT);
	assert_non_null(strstr(err.message, "never overwritten"));
	run_folder_close(&folder);
}

static void without_a_path_it_is_named_after_time_and_rig(void **state)
{
	(void)state;
	struct run_folder one, two;
	struct err err = {0};
	char before[512];
	assert_non_null(getcwd(before, sizeof before));
	assert_int_equal(chdir(scratch), 0);
	assert_int_equal(run_folder_new(NULL, "2026-12-01T09:38:17", "model/spm", &one, &err), 0);
	assert_int_equal(run_folder_new(NULL, "2026-12-01T09:38:17Z", "model/spm", &two, &err), 0);
	assert_int_equal(chdir(before), 0);
	assert_string_equal(one.path, "runs/2026-12-01T093817Z-model_spm");
	assert_string_equal(two.path, "runs/2026-12-01T093817Z-model_spm-2");
	run_folder_close(&one);
	run_folder_close(&two);
}

static void names_that_leave_the_folder_or_need_quoting_are_refused(void **state)
{
	(void)state;
	static const char *const names[] = {"",     "/etc/x", "../x",  "a/../x", "a//b",
	                                    "a/",   "./a",    "a b",   "a\nb",   "\xc3\xa4",
	                                    "a\\b", "a*b",    "a/./b", ".."};
	struct run_folder folder = made("names");
	for (size_t i = 0; i < sizeof names / sizeof *names; i++) {
		struct err err = {0};
		assert_int_equal(run_folder_write(&folder, names[i], "x", 1, &err), -1);
		assert_int_equal(err.code, ERR_STATE);
	}
	assert_int_equal(scratch_count(folder.path), 0);
	run_folder_close(&folder);
}

static void any_name_becomes_a_safe_one(void **state)
{
	(void)state;
	static const struct {
		const char *name, *clean;
	} rows[] = {{"SPD-01", "SPD-01"},
	            {"bench/watchdog:x", "bench_watchdog_x"},
	            {"ANG[speed=1500 rpm]", "ANG_speed_1500_rpm_"},
	            {"../..", "_._.."},
	            {"-rf", "_rf"},
	            {"", "_"},
	            {"\xc3\xa4", "__"}};
	char buffer[200], longest[300];
	for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
		file_name_clean(rows[i].name, buffer, sizeof buffer);
		assert_string_equal(buffer, rows[i].clean);
	}
	memset(longest, 'x', sizeof longest - 1);
	longest[sizeof longest - 1] = '\0';
	file_name_clean(longest, buffer, sizeof buffer);
	assert_int_equal(strlen(buffer), 100);
	file_name_clean(longest, buffer, 5);
	assert_string_equal(buffer, "xxxx");
}

static void a_disk_that_is_full_leaves_the_old_file_and_no_half_one(void **state)
{
	(void)state;
	struct run_folder folder = made("full");
	struct err err = {0};
	char *bytes = calloc(1, 100000);
	assert_non_null(bytes);
	write_file(&folder, "junit.xml", "the old one");
	scratch_disk(4096);
	int rc = run_folder_write(&folder, "junit.xml", bytes, 100000, &err);
	int other = run_folder_write(&folder, "new.xml", bytes, 100000, NULL);
	scratch_disk_again();
	free(bytes);
	assert_int_equal(rc, -1);
	assert_int_equal(other, -1);
	assert_int_equal(err.code, ERR_OUTPUT);
	assert_non_null(strstr(err.file, "full/junit.xml"));
	char *old = scratch_read(scratch_path("full/junit.xml"), NULL);
	assert_string_equal(old, "the old one");
	free(old);
	assert_int_equal(scratch_count(folder.path), 1);
	run_folder_close(&folder);
}

static void a_folder_that_is_gone_is_an_error_of_output(void **state)
{
	(void)state;
	struct run_folder folder = made("gone");
	struct err err = {0};
	assert_int_equal(rmdir(folder.path), 0);
	assert_int_equal(run_folder_write(&folder, "junit.xml", "x", 1, &err), -1);
	assert_int_equal(err.code, ERR_OUTPUT);
	run_folder_close(&folder);
}

static void the_sums_are_sorted_and_of_sha256(void **state)
{
	(void)state;
	/* SHA-256 of "abc" and of nothing: FIPS 180-4's examples, from memory; sha256sum agrees. */
	static const char expected[] =
	    "e3b0c44298fc1c149afbf4c8996fb92427ae41e4649b934ca495991b7852b855  a.txt\n"
	    "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad  samples/b.npy\n"
	    "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad  z\n";
	struct run_folder folder = made("sums");
	struct err err = {0};
	write_file(&folder, "z", "abc");
	write_file(&folder, "samples/b.npy", "abc");
	write_file(&folder, "a.txt", "");
	assert_int_equal(run_folder_seal(&folder, &err), 0);
	char *sums = scratch_read(scratch_path("sums/SHA256SUMS"), NULL);
	assert_string_equal(sums, expected);
	free(sums);
	run_folder_close(&folder);
}

static void a_sealed_folder_takes_no_more_files(void **state)
{
	(void)state;
	struct run_folder folder = made("sealed");
	struct err err = {0};
	write_file(&folder, "a", "1");
	assert_int_equal(run_folder_seal(&folder, &err), 0);
	assert_int_equal(run_folder_write(&folder, "b", "2", 1, &err), -1);
	assert_int_equal(err.code, ERR_OUTPUT);
	assert_int_equal(run_folder_seal(&folder, NULL), -1);
	run_folder_close(&folder);
}

static void what_is_no_file_of_the_run_keeps_the_folder_unsealed(void **state)
{
	(void)state;
	struct run_folder folder = made("foreign");
	struct err err = {0};
	assert_int_equal(symlink("/etc/passwd", scratch_path("foreign/link")), 0);
	assert_int_equal(run_folder_seal(&folder, &err), -1);
	assert_int_equal(err.code, ERR_OUTPUT);
	assert_int_equal(access(scratch_path("foreign/SHA256SUMS"), F_OK), -1);
	run_folder_close(&folder);
}

static void verify(const char *path, bool clean, const char *report)
{
	struct text out;
	struct err err = {0};
	bool is_clean = !clean;
	text_init(&out, 0);
	assert_int_equal(run_folder_verify(path, &out, &is_clean, &err), 0);
	assert_int_equal(is_clean, clean);
	assert_string_equal(text_string(&out), report);
	text_release(&out);
}

static void verifying_tells_changed_missing_and_added_files(void **state)
{
	(void)state;
	struct run_folder folder = made("verify");
	struct err err = {0};
	write_file(&folder, "a", "1");
	write_file(&folder, "b", "2");
	write_file(&folder, "samples/c", "3");
	assert_int_equal(run_folder_seal(&folder, &err), 0);
	verify(folder.path, true, "");
	assert_true(scratch_write(scratch_path("verify/SHA256SUMS.sig"), "signature", 9));
	verify(folder.path, true, "");
	assert_true(scratch_write(scratch_path("verify/a"), "7", 1));
	assert_int_equal(unlink(scratch_path("verify/b")), 0);
	assert_true(scratch_write(scratch_path("verify/samples/d"), "4", 1));
	verify(folder.path, false, "changed a\nmissing b\nadded samples/d\n");
	run_folder_close(&folder);
}

static void a_link_put_in_the_place_of_a_file_is_not_followed(void **state)
{
	(void)state;
	struct run_folder folder = made("swapped");
	struct err err = {0};
	write_file(&folder, "a", "1");
	write_file(&folder, "b", "1");
	assert_int_equal(run_folder_seal(&folder, &err), 0);
	assert_int_equal(unlink(scratch_path("swapped/a")), 0);
	assert_int_equal(symlink("b", scratch_path("swapped/a")), 0);
	verify(folder.path, false, "unreadable a\n");
	run_folder_close(&folder);
}

static void a_folder_without_sums_or_with_damaged_ones_is_an_error(void **state)
{
	(void)state;
	static const char *const damaged[] = {
	    "not a hash\n",
	    "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad  ../a\n",
	    "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad  /etc/passwd\n",
	    "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015a  a\n",
	};
	struct run_folder folder = made("damaged");
	struct text out;
	bool clean;
	struct err err = {0};
	text_init(&out, 0);
	assert_int_equal(run_folder_verify(folder.path, &out, &clean, &err), -1);
	assert_int_equal(err.code, ERR_FILE);
	assert_non_null(strstr(err.message, "no SHA256SUMS"));
	for (size_t i = 0; i < sizeof damaged / sizeof *damaged; i++) {
		err = (struct err){0};
		assert_true(
		    scratch_write(scratch_path("damaged/SHA256SUMS"), damaged[i], strlen(damaged[i])));
		assert_int_equal(run_folder_verify(folder.path, &out, &clean, &err), -1);
		assert_int_equal(err.code, ERR_FILE);
	}
	err = (struct err){0};
	assert_int_equal(run_folder_verify(scratch_path("nowhere"), &out, &clean, &err), -1);
	assert_int_equal(err.code, ERR_FILE);
	text_release(&out);
	run_folder_close(&folder);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(a_folder_is_made_with_its_parents_and_never_overwritten),
	    cmocka_unit_test(without_a_path_it_is_named_after_time_and_rig),
	    cmocka_unit_test(names_that_leave_the_folder_or_need_quoting_are_refused),
	    cmocka_unit_test(any_name_becomes_a_safe_one),
	    cmocka_unit_test(a_disk_that_is_full_leaves_the_old_file_and_no_half_one),
	    cmocka_unit_test(a_folder_that_is_gone_is_an_error_of_output),
	    cmocka_unit_test(the_sums_are_sorted_and_of_sha256),
	    cmocka_unit_test(a_sealed_folder_takes_no_more_files),
	    cmocka_unit_test(what_is_no_file_of_the_run_keeps_the_folder_unsealed),
	    cmocka_unit_test(verifying_tells_changed_missing_and_added_files),
	    cmocka_unit_test(a_link_put_in_the_place_of_a_file_is_not_followed),
	    cmocka_unit_test(a_folder_without_sums_or_with_damaged_ones_is_an_error),
	};
	return cmocka_run_group_tests(tests, scratch_make, scratch_remove) != 0;
}
