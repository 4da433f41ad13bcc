/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_BIND_H
#define DRIVETRIAL_BIND_H
/*
 * Binds a mapping of a YAML tree to a structure by a field table. Unknown
 * keys, duplicates, missing required fields, wrong kinds, units and ranges
 * become faults with a position, and reading goes on.
 *
 * Kinds that need more than the file (channels, marks, levels, windows,
 * conditions) go to `resolve`, which the caller gives; FIELD_OWN fields are
 * only accepted as known keys here, and bound by the caller with yaml_get().
 */
#include <stdint.h>

#include "field.h"
#include "yaml_tree.h"

struct binder {
	struct arena *arena;
	struct faults *faults;
	/*
	 * Stores the value of a field of one of those kinds at `target`. Returns
	 * false after adding a fault. node NULL: the field is absent (store "none").
	 */
	bool (*resolve)(void *context, const struct field_table *table, const struct field *field,
	                const struct yaml_node *mapping, const struct yaml_node *node, void *target);
	/* Gives the node to read instead of `$name`; NULL where there are no values. */
	const struct yaml_node *(*substitute)(void *context, const struct yaml_node *node);
	void *context;
};

/*
 * target: zeroed by the caller; defaults are applied first. Returns false
 * where a fault was added (the target is then filled as far as it went).
 */
bool bind_mapping(const struct binder *binder, const struct field_table *table,
                  const struct yaml_node *mapping, void *target);
/* The same, but keys in `also` (a second table, bound elsewhere) are known too. */
bool bind_mapping_beside(const struct binder *binder, const struct field_table *table,
                         const struct field_table *also, const struct yaml_node *mapping,
                         void *target);

/* Scalars one by one; each adds a fault and returns false where the node does not fit. */
bool bind_text(const struct binder *binder, const struct yaml_node *node, const char **ret);
bool bind_name(const struct binder *binder, const struct yaml_node *node, const char **ret);
bool bind_yes_no(const struct binder *binder, const struct yaml_node *node, bool *ret);
bool bind_integer(const struct binder *binder, const struct yaml_node *node, int64_t least,
                  int64_t most, int64_t *ret);
bool bind_number(const struct binder *binder, const struct yaml_node *node, double *ret);
bool bind_duration(const struct binder *binder, const struct yaml_node *node, int64_t *ret_ns);
/* bare: the unit of a number without one, or NULL; result as written. */
bool bind_quantity(const struct binder *binder, const struct yaml_node *node,
                   const struct unit *bare, const struct dimension *wanted, struct quantity *ret);
/* "is it a mapping/sequence", with a fault where not. */
bool bind_expect(const struct binder *binder, const struct yaml_node *node, enum yaml_kind kind,
                 const char *what);

#endif
