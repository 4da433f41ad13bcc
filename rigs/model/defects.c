/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The catalogue as a table for people. The list itself is a header, so that
 * the identifiers in the code and the rows of the table cannot part.
 */
#include <string.h>

#include "model_inner.h"

static const struct model_defect ROWS[] = {
#define DEFECT(identifier, row_name, check, line)                                                  \
	{.name = (row_name), .text = (line), .caught_by = (check)},
#include "model_defect_list.h"
#undef DEFECT
};

_Static_assert(DEFECTS <= 64, "a defect is a bit of a 64-bit word");

const struct model_defect *model_defects(size_t *ret_count)
{
	*ret_count = DEFECTS;
	return ROWS;
}

int model_defect_find(const char *name)
{
	for (int i = 0; i < DEFECTS; i++)
		if (strcmp(ROWS[i].name, name) == 0)
			return i;
	return -1;
}

bool model_has_defect(const struct model *model, const char *name)
{
	int row = model_defect_find(name);
	return row >= 0 && defect_in(model->config.defects, (enum defect)row);
}
