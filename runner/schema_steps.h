/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_SCHEMA_STEPS_H
#define DRIVETRIAL_SCHEMA_STEPS_H
/* What rig and suite files share: conditions and steps, as $defs of both schemas. */
#include "schema_table.h"

/* {condition, step, steps} */
json_t *schema_step_defs(bool values);
/* A condition, or a table in whose mapping one stands. */
json_t *schema_condition(const struct schema_maker *maker, const struct field_table *table);
/* A field of a condition that the loader's own code binds. */
json_t *schema_condition_own(const struct field *field);

#endif
