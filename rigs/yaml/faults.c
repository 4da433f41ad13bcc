/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Faults of a file, shown as a compiler shows them: where, what, the source
 * line and a caret. The line is rendered cell by cell, since what a column is
 * differs between libyaml (code points) and a terminal (display width), and
 * the bytes come from a file that may hold anything. Printing the raw line was
 * rejected: an escape sequence in a file must not reach a terminal.
 */
#include <stdarg.h>
#include <stdio.h>
#include <string.h>

#include "yaml_tree.h"

enum { TAB_STOP = 4, SHOWN_COLUMNS = 96, SHOWN_CHARACTERS = 40 };

size_t faults_total(const struct faults *faults)
{
	return faults->count + faults->more;
}

static bool is_known(const struct faults *faults, const struct fault *fault)
{
	for (size_t i = 0; i < faults->count; i++) {
		const struct fault *old = &faults->items[i];
		if (old->at.file == fault->at.file && old->at.line == fault->at.line &&
		    old->at.column == fault->at.column && strcmp(old->message, fault->message) == 0)
			return true;
	}
	return false;
}

void faults_add(struct faults *faults, struct position at, const char *format, ...)
{
	struct fault fault = {.at = at};
	va_list args;
	va_start(args, format);
	(void)vsnprintf(fault.message, sizeof fault.message, format, args);
	va_end(args);
	if (is_known(faults, &fault))
		return;
	if (faults->count == FAULTS_MOST) {
		faults->more++;
		return;
	}
	faults->items[faults->count++] = fault;
}

const char *yaml_shown(const char *bytes, size_t length, char buffer[YAML_SHOWN])
{
	struct text out;
	text_init(&out, YAML_SHOWN - 4);
	size_t at = 0;
	for (size_t i = 0; i < SHOWN_CHARACTERS && at < length; i++) {
		unsigned point;
		size_t size = text_decode(bytes + at, length - at, &point);
		if (size == 0)
			size = 1;
		if (bytes[at] == '\n')
			text_puts(&out, "\\n");
		else if (bytes[at] == '\t')
			text_puts(&out, "\\t");
		else
			text_add_clean(&out, bytes + at, size);
		at += size;
	}
	(void)snprintf(buffer, YAML_SHOWN, "%s%s", text_string(&out), at < length ? "..." : "");
	text_release(&out);
	return buffer;
}

/* The bytes of a line (1-based) without its line end. */
static const char *line_of(const struct yaml_file *file, int line, size_t *ret_length)
{
	const char *at = file->bytes, *end = file->bytes + file->length;
	for (int i = 1; i < line; i++) {
		at = memchr(at, '\n', (size_t)(end - at));
		if (!at)
			return NULL;
		at++;
	}
	const char *stop = memchr(at, '\n', (size_t)(end - at));
	if (!stop)
		stop = end;
	if (stop > at && stop[-1] == '\r')
		stop--;
	*ret_length = (size_t)(stop - at);
	return at;
}

/* Renders one character at a column; returns its bytes in the file. */
static size_t render(struct text *cell, const char *bytes, size_t length, size_t column)
{
	unsigned point;
	size_t size = text_decode(bytes, length, &point);
	text_clear(cell);
	if (size == 0)
		size = 1;
	if (bytes[0] == '\t')
		text_printf(cell, "%*s", (int)(TAB_STOP - column % TAB_STOP), "");
	else
		text_add_clean(cell, bytes, size);
	return size;
}

struct cut {
	size_t caret, total; /* display columns */
};

static struct cut measure(const char *line, size_t length, int column, struct text *cell)
{
	struct cut cut = {0};
	int character = 1;
	for (size_t at = 0; at < length; character++) {
		if (character == column)
			cut.caret = cut.total;
		at += render(cell, line + at, length - at, cut.total);
		cut.total += text_columns(text_string(cell), cell->length);
	}
	if (character <= column) /* at or behind the end of the line */
		cut.caret = cut.total;
	return cut;
}

static void print_source(const struct position *at, struct text *out)
{
	size_t length = 0;
	const char *line = line_of(at->file, at->line, &length);
	if (!line)
		return;
	struct text cell;
	text_init(&cell, 64);
	struct cut cut = measure(line, length, at->column, &cell);
	size_t from = 0, to = cut.total;
	if (cut.total > SHOWN_COLUMNS) {
		from = cut.caret > SHOWN_COLUMNS / 2 ? cut.caret - SHOWN_COLUMNS / 2 : 0;
		to = from + SHOWN_COLUMNS;
	}
	text_printf(out, "%6d | %s", at->line, from > 0 ? "..." : "");
	size_t column = 0, dropped = 0;
	for (size_t i = 0; i < length && column < to;) {
		i += render(&cell, line + i, length - i, column);
		size_t width = text_columns(text_string(&cell), cell.length);
		if (column >= from)
			text_puts(out, text_string(&cell));
		else
			dropped = column + width;
		column += width;
	}
	text_printf(out, "%s\n       | %*s^\n", to < cut.total ? "..." : "",
	            (int)(cut.caret - dropped + (from > 0 ? 3 : 0)), "");
	text_release(&cell);
}

static bool is_before(const struct faults *faults, size_t a, size_t b)
{
	const struct position *p = &faults->items[a].at, *q = &faults->items[b].at;
	if (p->file != q->file) {
		/* Files in the order in which their first fault was found. */
		for (size_t i = 0; i < faults->count; i++)
			if (faults->items[i].at.file == p->file || faults->items[i].at.file == q->file)
				return faults->items[i].at.file == p->file;
	}
	if (p->line != q->line)
		return p->line < q->line;
	return p->column < q->column;
}

static void print_fault(const struct fault *fault, struct text *out)
{
	if (fault->at.file) {
		text_add_clean(out, fault->at.file->path, strlen(fault->at.file->path));
		if (fault->at.line > 0)
			text_printf(out, ":%d:%d", fault->at.line, fault->at.column);
		text_puts(out, ": ");
	}
	const char *message = fault->message;
	while (*message) {
		size_t span = strcspn(message, "\n\t");
		text_add_clean(out, message, span);
		message += span;
		if (*message)
			text_puts(out, *message++ == '\n' ? "\\n" : "\\t");
	}
	text_puts(out, "\n");
	if (fault->at.file && fault->at.line > 0)
		print_source(&fault->at, out);
}

void faults_print(const struct faults *faults, struct text *out)
{
	size_t order[FAULTS_MOST];
	for (size_t i = 0; i < faults->count; i++) {
		size_t j = i;
		for (; j > 0 && is_before(faults, i, order[j - 1]); j--)
			order[j] = order[j - 1];
		order[j] = i;
	}
	for (size_t i = 0; i < faults->count; i++)
		print_fault(&faults->items[order[i]], out);
	if (faults->more > 0)
		text_printf(out, "... and %zu more\n", faults->more);
}
