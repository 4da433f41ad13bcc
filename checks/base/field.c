/* SPDX-License-Identifier: Apache-2.0 */
/* Look-ups in field tables. The tables are short: a linear search is enough. */
#include "field.h"

#include <stdio.h>
#include <string.h>

#include "text.h"

enum { KEYS_MOST = 64 };

const struct field *field_find(const struct field_table *table, const char *key, size_t length)
{
	for (size_t i = 0; i < table->count; i++)
		if (strlen(table->fields[i].key) == length &&
		    memcmp(table->fields[i].key, key, length) == 0)
			return &table->fields[i];
	return NULL;
}

const char *field_nearest(const struct field_table *table, const char *key, size_t length)
{
	const char *keys[KEYS_MOST];
	char word[65];
	if (length >= sizeof word)
		return NULL;
	memcpy(word, key, length);
	word[length] = '\0';
	size_t count = table->count < KEYS_MOST ? table->count : KEYS_MOST;
	for (size_t i = 0; i < count; i++)
		keys[i] = table->fields[i].key;
	return text_nearest(word, keys, count);
}

const char *field_bounds_text(const struct field *field, char *buffer, size_t size)
{
	buffer[0] = '\0';
	if (field->least == 0 && field->most == 0) {
		if (field->flags & FIELD_POSITIVE)
			(void)snprintf(buffer, size, "above 0");
		return buffer;
	}
	double scale = 1;
	const char *unit = "";
	if (field->kind == FIELD_DURATION) {
		char low[32], high[32];
		(void)snprintf(buffer, size, "between %s and %s",
		               duration_text((int64_t)field->least, low, sizeof low),
		               duration_text((int64_t)field->most, high, sizeof high));
		return buffer;
	}
	if (field->kind == FIELD_QUANTITY && field->dimension &&
	    dimension_agrees(*field->dimension, DIM_NUMBER)) { /* a share */
		scale = unit_percent()->scale;
		unit = unit_percent()->name;
	} else if (field->kind == FIELD_QUANTITY && field->dimension &&
	           unit_default(*field->dimension)) {
		scale = unit_default(*field->dimension)->scale;
		unit = unit_default(*field->dimension)->name;
	}
	(void)snprintf(buffer, size, "between %g and %g%s%s", field->least / scale, field->most / scale,
	               *unit ? " " : "", unit);
	return buffer;
}
