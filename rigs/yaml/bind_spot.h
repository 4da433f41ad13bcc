/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_BIND_SPOT_H
#define DRIVETRIAL_BIND_SPOT_H
/* Between bind.c and bind_scalar.c: one value that is being read. */
#include "bind.h"

/* Above it a double does not count every whole number. */
#define WHOLE_MOST 9007199254740992.0

/* One value that is being read: where it stands, and its key for messages. */
struct spot {
	const struct binder *binder;
	const struct yaml_node *node;
	const char *label; /* key; NULL: none */
};

/* Adds a fault that names the key; always false. */
bool spot_refuse(const struct spot *spot, const char *format, ...)
    __attribute__((format(printf, 2, 3)));
/* Its text as messages quote it. */
const char *spot_shown(const struct spot *spot, char buffer[YAML_SHOWN]);

/* Each stores what it has read, or returns false after a fault. */
bool spot_text(struct spot spot, const char **ret);
bool spot_name(struct spot spot, const char **ret);
bool spot_yes_no(struct spot spot, bool *ret);
bool spot_integer(struct spot spot, double least, double most, int64_t *ret);
bool spot_choice(struct spot spot, const char *const *choices, int *ret);
/* These leave in *spot what was read instead of `$name`. */
bool spot_number(struct spot *spot, const char *what, double *ret);
bool spot_quantity(struct spot *spot, const struct unit *bare, const struct dimension *wanted,
                   struct quantity *ret);
bool spot_duration(struct spot *spot, int64_t *ret_ns);

#endif
