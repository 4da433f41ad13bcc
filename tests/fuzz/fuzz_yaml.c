/* SPDX-License-Identifier: Apache-2.0 */
/* Any bytes as a YAML file: a tree within its bounds, or faults that say where. */
#include <string.h>

#include "fuzz.h"

static void walk(const struct yaml_node *node, int depth)
{
	demand(node->at.line >= 1 && node->at.column >= 1);
	if (node->kind == YAML_SCALAR) {
		demand(strlen(node->text) == node->length);
		return;
	}
	demand(depth <= YAML_DEPTH_MOST); /* levels of collections */
	for (size_t i = 0; i < node->count; i++) {
		if (node->kind == YAML_MAPPING) {
			demand(node->pairs[i].key->kind == YAML_SCALAR);
			demand(yaml_get(node, node->pairs[i].key->text) == node->pairs[i].value);
			walk(node->pairs[i].value, depth + 1);
		} else {
			walk(node->items[i], depth + 1);
		}
	}
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
	struct arena arena;
	struct faults faults = {0};
	struct err err = {0};
	const struct yaml_file *file = NULL;
	struct yaml_node *root = NULL;
	arena_init(&arena, 64 << 20);
	int rc = yaml_load_bytes("input.yaml", (const char *)data, size, &arena, &faults, &file, &root,
	                         &err);
	fuzz_loaded(rc, root, &faults, &err);
	if (rc == 0 && root)
		walk(root, 1);
	arena_release(&arena);
	return 0;
}
