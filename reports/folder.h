/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_FOLDER_H
#define DRIVETRIAL_FOLDER_H
/* What run_folder.c and run_sums.c share. Private to this folder. */
#include "run_folder.h"

#define FOLDER_SUMS "SHA256SUMS"

enum { FOLDER_NAME_MOST = 512 };

/* Relative, of [A-Za-z0-9._/-], no empty part, no "." or "..". */
bool folder_name_safe(const char *name);
/* ERR_OUTPUT "cannot WHAT: " and errno, with the path FOLDER/NAME. Always -1. */
int folder_cannot(struct err *reterr, const char *folder, const char *name, const char *what);

#endif
