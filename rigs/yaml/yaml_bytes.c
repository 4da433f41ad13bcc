/* SPDX-License-Identifier: Apache-2.0 */
/*
 * A pass over the bytes before libyaml sees them: for a bad byte libyaml gives
 * an offset and no line, and it takes U+0085, U+2028 and U+2029 for line ends,
 * which no editor does, so every later line number would be off.
 */
#include "yaml_reading.h"

#include <string.h>

/* What a code point that YAML or this program does not take is called, or NULL. */
static const char *what_is_wrong(unsigned point)
{
	if (point == 0)
		return "a NUL byte; is this a text file?";
	if (point == 0x85 || point == 0x2028 || point == 0x2029)
		return "a line separator that editors do not show; break the line with Enter";
	if (point == 0xFEFF)
		return "a byte order mark inside the file; remove it";
	if (point < 0x20 && point != '\t' && point != '\n' && point != '\r')
		return "a control character; remove it, or write it as an escape in double quotes";
	if (point == 0x7F || (point > 0x7F && point < 0xA0) || point == 0xFFFE || point == 0xFFFF)
		return "a control character; remove it, or write it as an escape in double quotes";
	return NULL;
}

static bool looks_like_utf16(const struct yaml_file *file)
{
	return file->length >= 2 &&
	       (memcmp(file->bytes, "\xFF\xFE", 2) == 0 || memcmp(file->bytes, "\xFE\xFF", 2) == 0);
}

bool yaml_bytes_check(const struct yaml_file *file, struct faults *faults)
{
	struct position at = {file, 1, 1};
	bool good = true;
	int line_with_fault = 0; /* one fault a line is enough */
	for (size_t i = 0; i < file->length;) {
		unsigned point = 0;
		size_t size = text_decode(file->bytes + i, file->length - i, &point);
		const char *wrong = size == 0 ? "" : what_is_wrong(point);
		if (point == '\r' && (i + 1 >= file->length || file->bytes[i + 1] != '\n'))
			wrong = "a carriage return without a line feed; break the line with Enter";
		if (wrong && line_with_fault != at.line) {
			if (size == 0 && looks_like_utf16(file))
				faults_add(faults, at,
				           "the file is not UTF-8 (it looks like UTF-16): save it as "
				           "UTF-8");
			else if (size == 0)
				faults_add(faults, at, "the byte 0x%02x is not UTF-8: save the file as UTF-8",
				           (unsigned)(unsigned char)file->bytes[i]);
			else
				faults_add(faults, at, "U+%04X is %s", point, wrong);
			if (size == 0 && looks_like_utf16(file))
				return false;
			line_with_fault = at.line;
		}
		good = good && !wrong;
		i += size == 0 ? 1 : size;
		at.column++;
		if (point == '\n' && size == 1) {
			at.line++;
			at.column = 1;
		}
	}
	return good;
}
