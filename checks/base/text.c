/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Own code, since it must be libc only, locale-free and bounded: iswprint and
 * wcwidth depend on the user's locale, and reports must not.
 */
#include "text.h"

#include <stdarg.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

void text_init(struct text *text, size_t most)
{
	*text = (struct text){.most = most ? most : (size_t)16 << 20};
}

void text_release(struct text *text)
{
	if (!text)
		return;
	free(text->data);
	text->data = NULL;
	text->length = text->room = 0;
}

void text_clear(struct text *text)
{
	text->length = 0;
	text->cut = false;
	if (text->data)
		text->data[0] = '\0';
}

static bool text_reserve(struct text *text, size_t more)
{
	if (more > text->most || text->length > text->most - more) {
		text->cut = true;
		return false;
	}
	size_t needed = text->length + more + 1;
	if (needed <= text->room)
		return true;
	size_t room = text->room < 128 ? 128 : text->room * 2;
	if (room < needed)
		room = needed;
	char *data = realloc(text->data, room);
	if (!data) {
		text->cut = true;
		return false;
	}
	text->data = data;
	text->room = room;
	return true;
}

void text_add(struct text *text, const char *bytes, size_t length)
{
	if (length == 0 || !text_reserve(text, length))
		return;
	memcpy(text->data + text->length, bytes, length);
	text->length += length;
	text->data[text->length] = '\0';
}

void text_puts(struct text *text, const char *string)
{
	text_add(text, string, strlen(string));
}

void text_printf(struct text *text, const char *format, ...)
{
	va_list args, again;
	va_start(args, format);
	va_copy(again, args);
	int length = vsnprintf(NULL, 0, format, args);
	if (length > 0 && text_reserve(text, (size_t)length)) {
		(void)vsnprintf(text->data + text->length, (size_t)length + 1, format, again);
		text->length += (size_t)length;
	}
	va_end(again);
	va_end(args);
}

const char *text_string(const struct text *text)
{
	return text->data ? text->data : "";
}

size_t text_decode(const char *bytes, size_t length, unsigned *ret_code_point)
{
	if (length == 0)
		return 0;
	unsigned lead = (unsigned char)bytes[0];
	static const unsigned least[5] = {0, 0, 0x80, 0x800, 0x10000};
	size_t size;
	unsigned point;
	if (lead < 0x80) {
		*ret_code_point = lead;
		return 1;
	} else if (lead >= 0xC2 && lead < 0xE0) {
		size = 2;
		point = lead & 0x1F;
	} else if (lead >= 0xE0 && lead < 0xF0) {
		size = 3;
		point = lead & 0x0F;
	} else if (lead >= 0xF0 && lead < 0xF5) {
		size = 4;
		point = lead & 0x07;
	} else {
		return 0;
	}
	if (length < size)
		return 0;
	for (size_t i = 1; i < size; i++) {
		unsigned next = (unsigned char)bytes[i];
		if ((next & 0xC0) != 0x80)
			return 0;
		point = point << 6 | (next & 0x3F);
	}
	if (point < least[size] || point > 0x10FFFF || (point >= 0xD800 && point <= 0xDFFF))
		return 0;
	*ret_code_point = point;
	return size;
}

static bool is_bidi_control(unsigned point)
{
	return point == 0x061C || point == 0x200E || point == 0x200F ||
	       (point >= 0x202A && point <= 0x202E) || (point >= 0x2066 && point <= 0x2069);
}

void text_add_clean(struct text *text, const char *bytes, size_t length)
{
	for (size_t i = 0; i < length;) {
		unsigned point;
		size_t size = text_decode(bytes + i, length - i, &point);
		if (size == 0) {
			text_puts(text, "\xEF\xBF\xBD");
			i++;
			continue;
		}
		if ((point < 0x20 && point != '\t' && point != '\n') || (point >= 0x7F && point < 0xA0))
			text_printf(text, "\\x%02x", point);
		else if (is_bidi_control(point) || point == 0x2028 || point == 0x2029 || point == 0xFEFF ||
		         (point & 0xFFFE) == 0xFFFE)
			text_printf(text, "\\u%04x", point);
		else
			text_add(text, bytes + i, size);
		i += size;
	}
}

void text_add_line(struct text *text, const char *bytes, size_t length)
{
	size_t begin = text->length;
	text_add_clean(text, bytes, length);
	for (size_t i = begin; i < text->length; i++)
		if (text->data[i] == '\n' || text->data[i] == '\t')
			text->data[i] = ' ';
}

/* Ranges from Unicode's EastAsianWidth (W and F) and general category Mn, coarse. */
static bool is_wide(unsigned p)
{
	return (p >= 0x1100 && p <= 0x115F) || (p >= 0x2E80 && p <= 0xA4CF) ||
	       (p >= 0xAC00 && p <= 0xD7A3) || (p >= 0xF900 && p <= 0xFAFF) ||
	       (p >= 0xFE30 && p <= 0xFE6F) || (p >= 0xFF00 && p <= 0xFF60) ||
	       (p >= 0xFFE0 && p <= 0xFFE6) || (p >= 0x1F300 && p <= 0x1FAFF) ||
	       (p >= 0x20000 && p <= 0x3FFFD);
}

static bool is_combining(unsigned p)
{
	return (p >= 0x0300 && p <= 0x036F) || (p >= 0x0483 && p <= 0x0489) ||
	       (p >= 0x0591 && p <= 0x05BD) || (p >= 0x064B && p <= 0x065F) ||
	       (p >= 0x1AB0 && p <= 0x1AFF) || (p >= 0x1DC0 && p <= 0x1DFF) ||
	       (p >= 0x200B && p <= 0x200F) || (p >= 0x20D0 && p <= 0x20FF) ||
	       (p >= 0xFE00 && p <= 0xFE0F) || (p >= 0xFE20 && p <= 0xFE2F);
}

size_t text_columns(const char *bytes, size_t length)
{
	size_t columns = 0;
	for (size_t i = 0; i < length;) {
		unsigned point;
		size_t size = text_decode(bytes + i, length - i, &point);
		if (size == 0) {
			size = 1;
			columns++;
		} else if (!is_combining(point)) {
			columns += is_wide(point) ? 2 : 1;
		}
		i += size;
	}
	return columns;
}

#define WORD_MOST 64

size_t text_distance(const char *a, const char *b)
{
	size_t na = strlen(a), nb = strlen(b);
	if (na > WORD_MOST || nb > WORD_MOST)
		return na > nb ? na : nb;
	/* Three rows of the dynamic programme: two back, one back, this one. */
	size_t rows[3][WORD_MOST + 1];
	for (size_t j = 0; j <= nb; j++)
		rows[0][j] = j;
	for (size_t i = 1; i <= na; i++) {
		size_t *now = rows[i % 3], *last = rows[(i + 2) % 3], *before = rows[(i + 1) % 3];
		now[0] = i;
		for (size_t j = 1; j <= nb; j++) {
			size_t best = last[j - 1] + (a[i - 1] != b[j - 1]);
			if (last[j] + 1 < best)
				best = last[j] + 1;
			if (now[j - 1] + 1 < best)
				best = now[j - 1] + 1;
			if (i > 1 && j > 1 && a[i - 1] == b[j - 2] && a[i - 2] == b[j - 1] &&
			    before[j - 2] + 1 < best)
				best = before[j - 2] + 1;
			now[j] = best;
		}
	}
	return rows[na % 3][nb];
}

const char *text_nearest(const char *word, const char *const *candidates, size_t count)
{
	size_t length = strlen(word);
	size_t best = length / 3 < 1 ? 2 : length / 3 + 1;
	const char *nearest = NULL;
	for (size_t i = 0; i < count; i++) {
		size_t distance = text_distance(word, candidates[i]);
		if (distance < best) {
			best = distance;
			nearest = candidates[i];
		}
	}
	return nearest;
}

const char *text_article(const char *word)
{
	return word[0] && strchr("aeioAEIO", word[0]) ? "an" : "a";
}

static bool is_letter(char c)
{
	return (c >= 'a' && c <= 'z') || (c >= 'A' && c <= 'Z');
}

bool text_is_name(const char *bytes, size_t length)
{
	if (length == 0 || length > WORD_MOST || !is_letter(bytes[0]))
		return false;
	for (size_t i = 1; i < length; i++) {
		char c = bytes[i];
		if (!is_letter(c) && !(c >= '0' && c <= '9') && c != '_' && c != '-')
			return false;
	}
	return true;
}
