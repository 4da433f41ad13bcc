/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_ERR_H
#define DRIVETRIAL_ERR_H
/*
 * Errors with a position, owned by the caller.
 *
 * A function that can fail returns 0 or -1 and takes a last parameter
 * `struct err *reterr` (NULL is allowed). The first error wins: a second
 * err_set() on the same object changes nothing, so clean-up code cannot hide
 * the cause. Lower layers never print. A limit that is not met is a verdict
 * and never an error.
 *
 *     struct err err = {0};
 *     if (rig_load(path, &rig, &err) < 0) { err_print(stderr...) }
 *
 * Threads: an object belongs to one thread at a time. Nothing blocks.
 */
#include <stdarg.h>

enum err_code {
	ERR_NONE = 0,
	ERR_USAGE,   /* the command line is wrong */
	ERR_FILE,    /* a rig, suite or recorded file is wrong */
	ERR_OUTPUT,  /* something cannot be written */
	ERR_NOMEM,   /* memory ran out */
	ERR_LINK,    /* a link or device cannot be reached or answers wrongly */
	ERR_BUSY,    /* the rig is in use */
	ERR_REFUSED, /* a command that the rig file does not allow */
	ERR_STATE,   /* called at the wrong time, or an internal contradiction */
};

struct err {
	enum err_code code;
	char file[256];    /* empty: no file belongs to it */
	int line, column;  /* 1-based; 0: unknown */
	char message[768]; /* one sentence: what is wrong and what to do */
};

/* Sets *err unless it is set already or NULL. Always returns -1. */
int err_set(struct err *err, enum err_code code, const char *format, ...)
    __attribute__((format(printf, 3, 4)));

/* The same with a position in a file; line and column are 1-based. */
int err_set_at(struct err *err, enum err_code code, const char *file, int line, int column,
               const char *format, ...) __attribute__((format(printf, 6, 7)));

int err_vset(struct err *err, enum err_code code, const char *format, va_list args)
    __attribute__((format(printf, 3, 0)));

#endif
