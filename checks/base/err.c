/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Fixed-size error objects: an error must be reportable when memory has run
 * out, so nothing here allocates. A thread-local "last error" was rejected:
 * it goes stale, and two links fail at the same time.
 */
#include "err.h"

#include <stdio.h>

int err_vset(struct err *err, enum err_code code, const char *format, va_list args)
{
	if (!err || err->code != ERR_NONE)
		return -1;
	err->code = code;
	(void)vsnprintf(err->message, sizeof err->message, format, args);
	return -1;
}

int err_set(struct err *err, enum err_code code, const char *format, ...)
{
	va_list args;
	va_start(args, format);
	(void)err_vset(err, code, format, args);
	va_end(args);
	return -1;
}

int err_set_at(struct err *err, enum err_code code, const char *file, int line, int column,
               const char *format, ...)
{
	if (!err || err->code != ERR_NONE)
		return -1;
	va_list args;
	va_start(args, format);
	(void)err_vset(err, code, format, args);
	va_end(args);
	(void)snprintf(err->file, sizeof err->file, "%s", file ? file : "");
	err->line = line;
	err->column = column;
	return -1;
}
