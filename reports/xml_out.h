/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_XML_OUT_H
#define DRIVETRIAL_XML_OUT_H
/*
 * libxml2's text writer with a sanitiser before it: the library writes control
 * characters and bad UTF-8 as they come and says nothing. Every text passes
 * text_add_clean() and is cut after XML_TEXT_MOST bytes, so that one field
 * cannot make a report unreadable. A failure is remembered until the end.
 * Private to this folder; single-threaded.
 *
 *     struct xml_out out;
 *     if (xml_out_init(&out, reterr) < 0) return -1;
 *     xml_open(&out, "p"); xml_attr(&out, "class", "note"); xml_text(&out, text); xml_close(&out);
 *     rc = xml_out_write(&out, folder, "x.html", reterr);     writes the file and frees
 */
#include <libxml/xmlwriter.h>

#include "run_folder.h"

enum { XML_TEXT_MOST = 20000 };

struct xml_out {
	xmlTextWriterPtr writer;
	xmlBufferPtr buffer;
	bool failed;
	bool lines; /* blocks of HTML each begin a line */
};

int xml_out_init(struct xml_out *out, struct err *reterr);
void xml_out_release(struct xml_out *out);
/* Ends the document, writes it whole into the folder, releases; on failure too. */
int xml_out_write(struct xml_out *out, const struct run_folder *folder, const char *name,
                  struct err *reterr);
/* Bytes so far. */
size_t xml_out_length(struct xml_out *out);

void xml_open(struct xml_out *out, const char *element);
/* Always with an end tag: <td/> is not what HTML readers take it for. */
void xml_close(struct xml_out *out);
/* <meta/>, <hr/>: elements that HTML keeps empty. */
void xml_close_void(struct xml_out *out);
void xml_attr(struct xml_out *out, const char *name, const char *value);
/* The same for names: tabs and line ends become blanks. */
void xml_attr_name(struct xml_out *out, const char *name, const char *value);
void xml_attrf(struct xml_out *out, const char *name, const char *format, ...)
    __attribute__((format(printf, 3, 4)));
void xml_text(struct xml_out *out, const char *text);
void xml_textf(struct xml_out *out, const char *format, ...) __attribute__((format(printf, 2, 3)));
/* An element with text only; class NULL: none. */
void xml_element(struct xml_out *out, const char *element, const char *class, const char *text);
void xml_elementf(struct xml_out *out, const char *element, const char *class, const char *format,
                  ...) __attribute__((format(printf, 4, 5)));
/* Markup of this program's own, as it stands: <!DOCTYPE html>. */
void xml_raw(struct xml_out *out, const char *markup);

#endif
