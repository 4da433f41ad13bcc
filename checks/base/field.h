/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_FIELD_H
#define DRIVETRIAL_FIELD_H
/*
 * One table of fields per mapping of a file. The loader, its messages, the
 * JSON Schema and the reference page are all made from it.
 *
 * A field whose kind is not FIELD_OWN is stored by the loader at `offset` of
 * the structure that the table describes, as the C type named at its kind.
 * FIELD_OWN is bound by code of the loader; the row then still names, orders
 * and explains it.
 */
#include <stddef.h>
#include <stdint.h>

#include "quantity.h"

enum field_kind {
	FIELD_OWN = 0,   /* bound by the loader's own code */
	FIELD_NAME,      /* const char *: [A-Za-z][A-Za-z0-9_-]* */
	FIELD_TEXT,      /* const char *: any text, up to 1000 characters */
	FIELD_YES_NO,    /* bool: yes, no, true, false */
	FIELD_INTEGER,   /* int64_t in [least, most] */
	FIELD_NUMBER,    /* double in [least, most] */
	FIELD_QUANTITY,  /* double, SI; least and most are SI too */
	FIELD_DURATION,  /* int64_t nanoseconds; least and most are nanoseconds */
	FIELD_CHOICE,    /* int: index into choices */
	FIELD_CHANNEL,   /* int: index of a channel of the rig; -1 absent */
	FIELD_CHANNELS,  /* struct int_list: channels */
	FIELD_MARK,      /* int: index of a mark of the test; -1 absent */
	FIELD_LEVEL,     /* double in the unit of the field "channel"; NaN absent */
	FIELD_LEVELS,    /* double[2] in the unit of the field "channel", ascending; NaN absent */
	FIELD_WINDOW,    /* struct window: {from, after, for} */
	FIELD_CONDITION, /* struct condition: {channel, is|above|below|between, for} */
	FIELD_LINE_NAME, /* const char *: the name of a step of the same test (an attempt) */
};

enum field_flags {
	FIELD_REQUIRED = 1,
	FIELD_POSITIVE = 2, /* above zero, whatever `least` says */
	FIELD_COMMAND = 4,  /* FIELD_CHANNEL: a commanded channel; it need not be sampled */
};

struct int_list {
	int *items; /* in the arena of the file */
	size_t count;
};

struct field {
	const char *key;
	enum field_kind kind;
	unsigned flags;
	const struct dimension *dimension; /* FIELD_QUANTITY; NULL: a plain number */
	double least, most;                /* both 0: no bound */
	const char *fallback;              /* default, written as in a file; NULL: none */
	const char *const *choices;        /* FIELD_CHOICE, ends with NULL */
	size_t offset;
	const char *text; /* one line for people */
	/*
	 * FIELD_LEVEL, FIELD_LEVELS: the key of the FIELD_CHANNEL whose unit and
	 * named values apply; NULL: "channel". A value name (encoder_loss) stands
	 * for its number.
	 */
	const char *of;
};

struct field_table {
	const char *name; /* what the mapping is called in messages: "channel" */
	const char *text;
	const struct field *fields;
	size_t count;
};

/* The field of that key, or NULL. Pure. */
const struct field *field_find(const struct field_table *table, const char *key, size_t length);
/* The key nearest to an unknown one, or NULL. */
const char *field_nearest(const struct field_table *table, const char *key, size_t length);
/* Writes "up to 3.5 A, at least 0 A"-like bounds of a field into buffer; "" where none. */
const char *field_bounds_text(const struct field *field, char *buffer, size_t size);

#define FIELD_COUNT(array) (sizeof(array) / sizeof((array)[0]))

#endif
