/* SPDX-License-Identifier: Apache-2.0 */
/*
 * A chain of malloc'ed chunks. Sizes are checked before every addition, since
 * counts come from files. obstack was rejected: it aborts when memory is out.
 */
#include "arena.h"

#include <stdalign.h>
#include <stdarg.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

struct arena_chunk {
	struct arena_chunk *next;
	size_t size, used;
	alignas(max_align_t) unsigned char bytes[];
};

static const size_t CHUNK_BYTES = 64 * 1024;
static long fail_countdown; /* 0: off; 1: this one fails, and it stays at 1 */

void arena_fail_at(long n)
{
	fail_countdown = n;
}

void arena_init(struct arena *arena, size_t most)
{
	*arena = (struct arena){.most = most ? most : (size_t)1 << 30};
}

void arena_clear(struct arena *arena)
{
	struct arena_chunk *chunk = arena->chunk;
	while (chunk) {
		struct arena_chunk *next = chunk->next;
		free(chunk);
		chunk = next;
	}
	arena->chunk = NULL;
	arena->used = 0;
}

void arena_release(struct arena *arena)
{
	if (arena)
		arena_clear(arena);
}

void *arena_alloc(struct arena *arena, size_t size)
{
	const size_t align = alignof(max_align_t);
	if (size == 0)
		size = 1;
	if (size > arena->most || arena->used > arena->most - size || size > SIZE_MAX - align)
		return NULL;
	size = (size + align - 1) / align * align;
	if (fail_countdown > 0) {
		if (fail_countdown == 1)
			return NULL;
		fail_countdown--;
	}
	struct arena_chunk *chunk = arena->chunk;
	if (!chunk || chunk->size - chunk->used < size) {
		size_t bytes = size > CHUNK_BYTES ? size : CHUNK_BYTES;
		chunk = calloc(1, sizeof *chunk + bytes);
		if (!chunk)
			return NULL;
		chunk->size = bytes;
		chunk->next = arena->chunk;
		arena->chunk = chunk;
	}
	void *memory = chunk->bytes + chunk->used;
	chunk->used += size;
	arena->used += size;
	return memory;
}

void *arena_array(struct arena *arena, size_t count, size_t size)
{
	size_t bytes;
	if (__builtin_mul_overflow(count, size, &bytes))
		return NULL;
	return arena_alloc(arena, bytes);
}

char *arena_strndup(struct arena *arena, const char *text, size_t length)
{
	if (length == SIZE_MAX)
		return NULL;
	char *copy = arena_alloc(arena, length + 1);
	if (copy)
		memcpy(copy, text, length);
	return copy;
}

char *arena_strdup(struct arena *arena, const char *text)
{
	return arena_strndup(arena, text, strlen(text));
}

char *arena_printf(struct arena *arena, const char *format, ...)
{
	va_list args, again;
	va_start(args, format);
	va_copy(again, args);
	int length = vsnprintf(NULL, 0, format, args);
	char *text = length < 0 ? NULL : arena_alloc(arena, (size_t)length + 1);
	if (text)
		(void)vsnprintf(text, (size_t)length + 1, format, again);
	va_end(again);
	va_end(args);
	return text;
}
