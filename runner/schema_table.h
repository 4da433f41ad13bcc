/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_SCHEMA_TABLE_H
#define DRIVETRIAL_SCHEMA_TABLE_H
/*
 * JSON Schema 2020-12 from the field tables. What a schema cannot say (names
 * that must exist, units that must fit a channel, steps against limits) is left
 * to the loaders: a file that a loader takes is never refused by its schema.
 *
 * All functions give a new reference, or NULL where memory ran out; jansson's
 * setters pass a NULL on as a failure.
 */
#include <jansson.h>

#include "field.h"

/* The schema of a field that the loader's own code binds; NULL: anything goes. */
typedef json_t *schema_own(const struct field_table *table, const struct field *field);

/* values: scalars may be `$name` (suites). */
struct schema_maker {
	schema_own *own;
	bool values;
};

json_t *schema_of_field(const struct schema_maker *maker, const struct field_table *table,
                        const struct field *field);
/* A mapping: additionalProperties false. also: NULL, or a second table in the same mapping. */
json_t *schema_of_table(const struct schema_maker *maker, const struct field_table *table,
                        const struct field_table *also);

json_t *schema_name(void);
json_t *schema_scalar(void); /* text, number, or yes and no */
json_t *schema_integer(double least, double most);
json_t *schema_duration(bool values);
json_t *schema_duration_positive(bool values);
/* Adds to a mapping: exactly one of the keys (NULL ends) must be there. */
void schema_exactly_one(json_t *schema, const char *const *keys);
/* A number with a unit of that dimension. */
json_t *schema_quantity(const struct dimension *dimension, bool values);
json_t *schema_ref(const char *name);                     /* #/$defs/NAME */
json_t *schema_list(json_t *items, int least, int most);  /* most 0: any */
json_t *schema_map(json_t *values);                       /* names to values */
json_t *schema_either(json_t *a, json_t *b);              /* anyOf */
json_t *schema_head(const char *title, const char *text); /* $schema, title, description */

/* The three. */
json_t *schema_rig(void);
json_t *schema_suite(void);
json_t *schema_results(void);

#endif
