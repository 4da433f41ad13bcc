/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_REFERENCE_H
#define DRIVETRIAL_REFERENCE_H
/*
 * What every key, step, check, metric, derived channel and unit is, from the
 * tables that the loaders read. In Markdown, which reads well as plain text.
 */
#include <stdbool.h>

#include "text.h"

/* The whole page. */
void reference_page(struct text *out);
/*
 * One check, step, derived channel, unit, or mapping of a file (channel, link,
 * sample ...). False where there is none of that name; *ret_nearest then is the
 * name nearest to it, or NULL.
 */
bool reference_entry(const char *name, struct text *out, const char **ret_nearest);
/* The names that `help NAME` knows, by group. */
void reference_names(struct text *out);

#endif
