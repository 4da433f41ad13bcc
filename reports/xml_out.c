/* SPDX-License-Identifier: Apache-2.0 */
/* See xml_out.h. Into memory first: only a whole document reaches the folder. */
#include "xml_out.h"

#include <stdarg.h>
#include <stdio.h>
#include <string.h>

#define U(string) ((const xmlChar *)(string))

int xml_out_init(struct xml_out *out, struct err *reterr)
{
	*out = (struct xml_out){.buffer = xmlBufferCreate()};
	if (out->buffer) {
		xmlBufferSetAllocationScheme(out->buffer, XML_BUFFER_ALLOC_DOUBLEIT);
		out->writer = xmlNewTextWriterMemory(out->buffer, 0);
	}
	if (!out->writer) {
		xml_out_release(out);
		return err_set(reterr, ERR_NOMEM, "memory ran out");
	}
	return 0;
}

void xml_out_release(struct xml_out *out)
{
	if (out->writer)
		xmlFreeTextWriter(out->writer);
	if (out->buffer)
		xmlBufferFree(out->buffer);
	*out = (struct xml_out){0};
}

int xml_out_write(struct xml_out *out, const struct run_folder *folder, const char *name,
                  struct err *reterr)
{
	int rc = -1;
	if (xmlTextWriterEndDocument(out->writer) < 0 || xmlTextWriterFlush(out->writer) < 0)
		out->failed = true;
	if (out->failed)
		(void)err_set(reterr, ERR_NOMEM, "memory ran out while %s was made", name);
	else
		rc = run_folder_write(folder, name, (const char *)xmlBufferContent(out->buffer),
		                      (size_t)xmlBufferLength(out->buffer), reterr);
	xml_out_release(out);
	return rc;
}

size_t xml_out_length(struct xml_out *out)
{
	if (xmlTextWriterFlush(out->writer) < 0)
		out->failed = true;
	return (size_t)xmlBufferLength(out->buffer);
}

static void note(struct xml_out *out, int rc)
{
	if (rc < 0)
		out->failed = true;
}

/* Cuts at a boundary of a character, and says so. */
static void clean(struct text *text, const char *bytes, bool one_line)
{
	size_t length = strlen(bytes), taken = length;
	if (length > XML_TEXT_MOST) {
		taken = XML_TEXT_MOST;
		while (taken > 0 && ((unsigned char)bytes[taken] & 0xC0) == 0x80)
			taken--;
	}
	text_init(text, 0);
	text_add_clean(text, bytes, taken);
	if (text->length > XML_TEXT_MOST || length > XML_TEXT_MOST) {
		size_t cut = text->length > XML_TEXT_MOST ? XML_TEXT_MOST : text->length;
		while (cut > 0 && cut < text->length && ((unsigned char)text->data[cut] & 0xC0) == 0x80)
			cut--;
		text->length = cut;
		text->data[cut] = '\0';
		text_puts(text, " [cut]");
	}
	for (size_t i = 0; one_line && i < text->length; i++)
		if (text->data[i] == '\n' || text->data[i] == '\t')
			text->data[i] = ' ';
}

/* Elements before which white space means nothing, so that a page is not one long line. */
static bool is_block(const char *element)
{
	static const char *const blocks[] = {"article", "body",  "dl",    "dt",   "figure",  "h1",
	                                     "h2",      "h3",    "h4",    "head", "header",  "li",
	                                     "main",    "meta",  "ol",    "p",    "section", "svg",
	                                     "table",   "tbody", "thead", "tr",   "ul"};
	for (size_t i = 0; i < sizeof blocks / sizeof *blocks; i++)
		if (strcmp(blocks[i], element) == 0)
			return true;
	return false;
}

void xml_open(struct xml_out *out, const char *element)
{
	if (out->lines && is_block(element))
		note(out, xmlTextWriterWriteString(out->writer, U("\n")));
	note(out, xmlTextWriterStartElement(out->writer, U(element)));
}

void xml_close(struct xml_out *out)
{
	note(out, xmlTextWriterFullEndElement(out->writer));
}

void xml_close_void(struct xml_out *out)
{
	note(out, xmlTextWriterEndElement(out->writer));
}

static void attribute(struct xml_out *out, const char *name, const char *value, bool one_line)
{
	struct text text;
	clean(&text, value, one_line);
	note(out, xmlTextWriterWriteAttribute(out->writer, U(name), U(text_string(&text))));
	out->failed |= text.cut;
	text_release(&text);
}

void xml_attr(struct xml_out *out, const char *name, const char *value)
{
	attribute(out, name, value, false);
}

void xml_attr_name(struct xml_out *out, const char *name, const char *value)
{
	attribute(out, name, value, true);
}

void xml_text(struct xml_out *out, const char *string)
{
	struct text text;
	clean(&text, string, false);
	note(out, xmlTextWriterWriteString(out->writer, U(text_string(&text))));
	out->failed |= text.cut;
	text_release(&text);
}

/* vsnprintf into a text; the caller releases. */
static void formatted(struct text *text, const char *format, va_list args)
{
	char buffer[4096];
	text_init(text, 0);
	int length = vsnprintf(buffer, sizeof buffer, format, args);
	if (length > 0)
		text_add(text, buffer, (size_t)length < sizeof buffer ? (size_t)length : sizeof buffer - 1);
}

void xml_attrf(struct xml_out *out, const char *name, const char *format, ...)
{
	struct text text;
	va_list args;
	va_start(args, format);
	formatted(&text, format, args);
	va_end(args);
	xml_attr(out, name, text_string(&text));
	text_release(&text);
}

void xml_textf(struct xml_out *out, const char *format, ...)
{
	struct text text;
	va_list args;
	va_start(args, format);
	formatted(&text, format, args);
	va_end(args);
	xml_text(out, text_string(&text));
	text_release(&text);
}

void xml_element(struct xml_out *out, const char *element, const char *class, const char *text)
{
	xml_open(out, element);
	if (class)
		xml_attr(out, "class", class);
	xml_text(out, text);
	xml_close(out);
}

void xml_elementf(struct xml_out *out, const char *element, const char *class, const char *format,
                  ...)
{
	struct text text;
	va_list args;
	va_start(args, format);
	formatted(&text, format, args);
	va_end(args);
	xml_element(out, element, class, text_string(&text));
	text_release(&text);
}

void xml_raw(struct xml_out *out, const char *markup)
{
	note(out, xmlTextWriterWriteRaw(out->writer, U(markup)));
}
