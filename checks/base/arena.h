/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_ARENA_H
#define DRIVETRIAL_ARENA_H
/*
 * Memory that lives and dies together: one arena per loaded file pair, one
 * scratch arena per check. Everything in it is zeroed, aligned for any type,
 * and freed at once by arena_release(). An arena belongs to one thread.
 *
 *     struct arena arena;
 *     arena_init(&arena, 0);
 *     double *column = arena_array(&arena, rows, sizeof *column);
 *     if (!column) goto out;   (NULL: memory ran out, or the maximum is reached)
 *     ...
 * out:
 *     arena_release(&arena);
 */
#include <stddef.h>

struct arena_chunk;
struct arena {
	struct arena_chunk *chunk; /* newest first */
	size_t used;               /* bytes handed out */
	size_t most;               /* bytes that may be handed out */
};

/* most: the declared maximum in bytes; 0 means 1 GiB. */
void arena_init(struct arena *arena, size_t most);
/* Frees everything. Takes a zeroed or released arena too. */
void arena_release(struct arena *arena);
/* Forgets the contents and keeps no memory; the maximum stays. */
void arena_clear(struct arena *arena);

void *arena_alloc(struct arena *arena, size_t size);
/* count * size bytes; NULL also where the product overflows. */
void *arena_array(struct arena *arena, size_t count, size_t size);
/* A copy with a NUL behind it. */
char *arena_strndup(struct arena *arena, const char *text, size_t length);
char *arena_strdup(struct arena *arena, const char *text);
char *arena_printf(struct arena *arena, const char *format, ...)
    __attribute__((format(printf, 2, 3)));

/*
 * Test hook: the n-th allocation from now (1 is the next one) fails, and with
 * it all later ones, in every arena of the process; 0 switches it off.
 */
void arena_fail_at(long n);

#endif
