/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_TEXT_H
#define DRIVETRIAL_TEXT_H
/*
 * Text that comes from files and devices, and text that goes out.
 *
 * A struct text grows up to a declared maximum; past it, or when memory runs
 * out, it keeps what it has and `cut` becomes true. Its data always end in a
 * NUL. Functions are pure but for the object that they are given.
 */
#include <stdbool.h>
#include <stddef.h>

struct text {
	char *data; /* NULL until something was added */
	size_t length, room, most;
	bool cut;
};

/* most: largest length in bytes; 0 means 16 MiB. */
void text_init(struct text *text, size_t most);
void text_release(struct text *text);
void text_clear(struct text *text);
void text_add(struct text *text, const char *bytes, size_t length);
void text_puts(struct text *text, const char *string);
void text_printf(struct text *text, const char *format, ...) __attribute__((format(printf, 2, 3)));
/* The contents, never NULL. Borrowed until the next call that changes it. */
const char *text_string(const struct text *text);

/*
 * Decodes the code point at bytes[0..length). Returns how many bytes it takes
 * (1 to 4), or 0 where they are not UTF-8 (overlong forms, surrogates and
 * anything above U+10FFFF included). length 0 gives 0.
 */
size_t text_decode(const char *bytes, size_t length, unsigned *ret_code_point);

/*
 * Adds `bytes` made safe for terminals, XML and JSON: bad UTF-8 becomes
 * U+FFFD; control characters (C0 but tab and line feed, DEL, C1) and the
 * bidirectional controls become a visible escape such as \x1b or \u202e.
 */
void text_add_clean(struct text *text, const char *bytes, size_t length);
/* The same on one line: line feeds and tabs become spaces, so that a title cannot forge a line. */
void text_add_line(struct text *text, const char *bytes, size_t length);

/* Terminal columns of a UTF-8 text: combining marks 0, wide East Asian 2. */
size_t text_columns(const char *bytes, size_t length);

/* Damerau-Levenshtein distance (optimal string alignment) of two ASCII words. */
size_t text_distance(const char *a, const char *b);

/*
 * The candidate nearest to `word`, or NULL where none is near enough to be
 * worth suggesting (distance above a third of the word's length, at least 1).
 * candidates: `count` borrowed strings.
 */
const char *text_nearest(const char *word, const char *const *candidates, size_t count);

/* "a" or "an", as it stands before an English word. Static. */
const char *text_article(const char *word);

/* True for [A-Za-z][A-Za-z0-9_-]*, at most 64 bytes. */
bool text_is_name(const char *bytes, size_t length);

#endif
