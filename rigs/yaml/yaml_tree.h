/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_YAML_TREE_H
#define DRIVETRIAL_YAML_TREE_H
/*
 * A YAML file as a tree with positions, through libyaml's event API.
 *
 * Plain YAML 1.2 core data: no anchors, aliases, tags, merge keys, complex
 * keys, second documents; at most 1 MiB and 64 levels, checked while reading.
 * Scalars stay text: the field they stand in types them.
 *
 * Everything lives in the caller's arena. Faults go to a struct faults, so
 * that a reader sees all of them (up to FAULTS_MOST) in one go.
 */
#include <stdbool.h>
#include <stddef.h>

#include "arena.h"
#include "err.h"
#include "text.h"

enum { YAML_BYTES_MOST = 1 << 20, YAML_DEPTH_MOST = 64, FAULTS_MOST = 20 };

struct yaml_file {
	const char *path; /* as given by the user, for messages */
	const char *bytes;
	size_t length;
};

/* A place in a file. line and column are 1-based; column counts code points. */
struct position {
	const struct yaml_file *file;
	int line, column;
};

enum yaml_kind { YAML_SCALAR, YAML_SEQUENCE, YAML_MAPPING };

struct yaml_node {
	enum yaml_kind kind;
	struct position at;
	const char *text; /* scalar: NUL-terminated, may hold NUL inside never */
	size_t length;
	bool quoted;              /* a quoted or block scalar: text, never a number or yes/no */
	struct yaml_pair *pairs;  /* mapping, in the order of the file */
	struct yaml_node **items; /* sequence */
	size_t count;
};

struct yaml_pair {
	struct yaml_node *key; /* a scalar */
	struct yaml_node *value;
};

struct fault {
	struct position at;
	char message[512];
};

/*
 * Collected faults; past FAULTS_MOST they are only counted. The same message at
 * the same place is added once, since sweeps read a node many times.
 */
struct faults {
	struct fault items[FAULTS_MOST];
	size_t count;
	size_t more;
};

void faults_add(struct faults *faults, struct position at, const char *format, ...)
    __attribute__((format(printf, 3, 4)));
/* All that were added, those past FAULTS_MOST too: compare before and after. */
size_t faults_total(const struct faults *faults);
/*
 * Writes all of them, by file and position:
 *   rig.yaml:12:9: unknown key 'tiemout' in a link; did you mean 'reply_timeout'?
 *      12 |   drive_wire: {tcp: "127.0.0.1:15020", tiemout: 100 ms}
 *         |                                        ^
 */
void faults_print(const struct faults *faults, struct text *out);

/*
 * Reads a file. *ret_root is NULL where there were faults. Returns -1 only
 * for ERR_FILE (cannot be opened or is too large) and ERR_NOMEM.
 */
int yaml_load(const char *path, struct arena *arena, struct faults *faults,
              const struct yaml_file **ret_file, struct yaml_node **ret_root, struct err *reterr);
/* The same from memory; path is for messages. */
int yaml_load_bytes(const char *path, const char *bytes, size_t length, struct arena *arena,
                    struct faults *faults, const struct yaml_file **ret_file,
                    struct yaml_node **ret_root, struct err *reterr);

/* The value of a key of a mapping, or NULL. */
struct yaml_node *yaml_get(const struct yaml_node *mapping, const char *key);
/* "a mapping", "a list", "text". */
const char *yaml_kind_name(enum yaml_kind kind);
/* Text of a file as a message quotes it: at most 40 characters, visible escapes, "..." where cut.
 */
enum { YAML_SHOWN = 200 };
const char *yaml_shown(const char *bytes, size_t length, char buffer[YAML_SHOWN]);

#endif
