/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The table of checks, made from check_list.h, so that a kind is named in one
 * place only. Registration at start-up was rejected: its order would depend
 * on the linker.
 */
#include <string.h>

#include "check.h"

#define CHECK(name) extern const struct check_kind check_##name;
#include "check_list.h"
#undef CHECK

static const struct check_kind *const kinds[] = {
#define CHECK(name) &check_##name,
#include "check_list.h"
#undef CHECK
};

const struct check_kind *const *check_table(size_t *ret_count)
{
	*ret_count = FIELD_COUNT(kinds);
	return kinds;
}

const struct check_kind *check_find(const char *name, size_t length)
{
	for (size_t i = 0; i < FIELD_COUNT(kinds); i++)
		if (strlen(kinds[i]->name) == length && memcmp(kinds[i]->name, name, length) == 0)
			return kinds[i];
	return NULL;
}
