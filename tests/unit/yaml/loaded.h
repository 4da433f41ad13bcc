/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_TEST_LOADED_H
#define DRIVETRIAL_TEST_LOADED_H
/* A YAML text as a tree, for the tests of this folder. */
#include "near.h"

#include <string.h>

#include "yaml_tree.h"

struct loaded {
	struct arena arena;
	struct faults faults;
	struct err err;
	const struct yaml_file *file;
	struct yaml_node *root;
	int rc;
};

static inline void loaded_init_bytes(struct loaded *loaded, const char *bytes, size_t length)
{
	memset(loaded, 0, sizeof *loaded);
	arena_init(&loaded->arena, 0);
	loaded->rc = yaml_load_bytes("t.yaml", bytes, length, &loaded->arena, &loaded->faults,
	                             &loaded->file, &loaded->root, &loaded->err);
}

static inline void loaded_init(struct loaded *loaded, const char *text)
{
	loaded_init_bytes(loaded, text, strlen(text));
}

static inline void loaded_release(struct loaded *loaded)
{
	arena_release(&loaded->arena);
}

/* The first fault: where, and a part of what it says. */
#define assert_fault(loaded, at_line, at_column, part)                                             \
	do {                                                                                           \
		assert_int_equal((loaded)->rc, 0);                                                         \
		assert_true((loaded)->faults.count > 0);                                                   \
		assert_int_equal((loaded)->faults.items[0].at.line, at_line);                              \
		assert_int_equal((loaded)->faults.items[0].at.column, at_column);                          \
		if (!strstr((loaded)->faults.items[0].message, part))                                      \
			fail_msg("'%s' does not say '%s'", (loaded)->faults.items[0].message, part);           \
	} while (0)

#endif
