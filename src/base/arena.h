/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * Memory for images. The first touch of a fresh page costs more than most work done on it, so each
 * worker has one arena and uses it again for every field: taking moves a mark up, giving back moves it
 * down, and the pages stay.
 */
#ifndef UF_BASE_ARENA_H
#define UF_BASE_ARENA_H

#include <stddef.h>

typedef struct uf_arena_block uf_arena_block;

/* Zeroed it is empty and may be freed. */
typedef struct uf_arena {
    uf_arena_block *first;
    uf_arena_block *current;
} uf_arena;

typedef struct uf_arena_mark {
    uf_arena_block *block;
    size_t used;
} uf_arena_mark;

/* `bytes` of memory aligned to 64 bytes, contents undefined; NULL when the machine refuses. Zero bytes
 * give a valid pointer. It lives until the arena goes back to an earlier mark. */
void *uf_arena_take(uf_arena *arena, size_t bytes);

/* Where the arena stands now, and going back there: what was taken since must not be used again. */
uf_arena_mark uf_arena_now(const uf_arena *arena);
void uf_arena_back(uf_arena *arena, uf_arena_mark mark);

void uf_arena_free(uf_arena *arena);

#endif
