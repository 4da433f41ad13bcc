/* SPDX-License-Identifier: Apache-2.0 */
/* See fuzz.h. A memfd stands for a file: loaders take a path, and nothing is left behind. */
#include "fuzz.h"

#include <string.h>
#include <sys/mman.h>
#include <unistd.h>

int fuzz_file(const uint8_t *data, size_t size, char *ret_path, size_t path_size)
{
	int fd = memfd_create("input", MFD_CLOEXEC);
	demand(fd >= 0);
	for (size_t done = 0; done < size;) {
		ssize_t put = write(fd, data + done, size - done);
		demand(put > 0);
		done += (size_t)put;
	}
	(void)snprintf(ret_path, path_size, "/proc/self/fd/%d", fd);
	return fd;
}

/* Length of the character at `at` where it may be shown, else 0. */
static size_t shown_length(const unsigned char *at)
{
	if (at[0] < 0x80)
		return (at[0] >= 0x20 && at[0] != 0x7F) || at[0] == '\n' || at[0] == '\t';
	size_t length = at[0] >= 0xF0 ? 4 : at[0] >= 0xE0 ? 3 : 2;
	uint32_t code = at[0] & (0xFFu >> (length + 1));
	if (at[0] < 0xC2 || at[0] > 0xF4)
		return 0;
	for (size_t i = 1; i < length; i++) {
		if ((at[i] & 0xC0) != 0x80)
			return 0;
		code = code << 6 | (at[i] & 0x3F);
	}
	static const uint32_t least[] = {0, 0, 0x80, 0x800, 0x10000};
	if (code < least[length] || code > 0x10FFFF || (code >= 0xD800 && code <= 0xDFFF))
		return 0;
	/* C1 controls, and what turns the direction of reading (Unicode 15, Bidi_Control). */
	if (code < 0xA0 || (code >= 0x202A && code <= 0x202E) || (code >= 0x2066 && code <= 0x2069))
		return 0;
	return length;
}

void fuzz_readable(const char *text)
{
	const unsigned char *at = (const unsigned char *)text;
	while (*at) {
		size_t length = shown_length(at);
		if (length == 0) {
			(void)fprintf(stderr, "not readable at byte %td of: %s\n",
			              at - (const unsigned char *)text, text);
			abort();
		}
		at += length;
	}
}

void fuzz_loaded(int rc, const void *loaded, const struct faults *faults, const struct err *err)
{
	struct text out;
	if (rc < 0) {
		demand(err->code == ERR_FILE || err->code == ERR_NOMEM);
		demand(err->message[0] != '\0' && err->file[0] != '\0');
		fuzz_readable(err->message);
	} else {
		demand(!loaded == (faults_total(faults) > 0));
	}
	for (size_t i = 0; i < faults->count; i++) {
		const struct fault *fault = &faults->items[i];
		demand(fault->at.file && fault->at.line >= 1 && fault->at.column >= 1);
		demand(fault->message[0] != '\0');
		fuzz_readable(fault->message);
	}
	text_init(&out, 0);
	faults_print(faults, &out);
	fuzz_readable(text_string(&out));
	text_release(&out);
}

const struct rig *fuzz_rig(const char *path)
{
	static struct arena arena;
	static struct faults faults;
	static const struct rig *rig;
	struct err err = {0};
	if (rig)
		return rig;
	arena_init(&arena, 0);
	demand(rig_load(path, &arena, &faults, &rig, &err) == 0 && rig);
	return rig;
}
