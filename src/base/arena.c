/* SPDX-License-Identifier: GPL-3.0-or-later */
#define _DEFAULT_SOURCE /* madvise */
#include "base/arena.h"

#include <stdint.h>
#include <stdlib.h>
#include <sys/mman.h>

enum { ALIGNMENT = 64, HUGE_PAGE = 2 << 20 };

/* Untouched memory costs address space only, so blocks are generous. */
static const size_t block_bytes = (size_t)64 << 20;

struct uf_arena_block {
    uf_arena_block *next;
    size_t capacity;
    size_t used;
    unsigned char *bytes;
};

static uf_arena_block *new_block(size_t bytes)
{
    size_t capacity = bytes > block_bytes ? bytes : block_bytes;
    capacity = (capacity + HUGE_PAGE - 1) / HUGE_PAGE * HUGE_PAGE;
    uf_arena_block *block = malloc(sizeof *block);
    if (!block)
        return NULL;
    *block = (uf_arena_block){.capacity = capacity, .bytes = aligned_alloc(HUGE_PAGE, capacity)};
    if (!block->bytes) {
        free(block);
        return NULL;
    }
    /* Asking for huge pages saves hundreds of faults for one; a kernel that has none goes on as before. */
    (void)madvise(block->bytes, capacity, MADV_HUGEPAGE);
    return block;
}

/* The blocks after the current one are empty; the first that is large enough serves, else a new one. */
static uf_arena_block *block_with_room(uf_arena *arena, size_t bytes)
{
    uf_arena_block *last = arena->current;
    if (last && last->capacity - last->used >= bytes)
        return last;
    for (uf_arena_block *b = last ? last->next : arena->first; b; b = b->next) {
        if (b->capacity >= bytes)
            return b;
        last = b;
    }
    uf_arena_block *fresh = new_block(bytes);
    if (!fresh)
        return NULL;
    if (last)
        last->next = fresh;
    else
        arena->first = fresh;
    return fresh;
}

void *uf_arena_take(uf_arena *arena, size_t bytes)
{
    if (bytes > SIZE_MAX / 2)
        return NULL;
    bytes = (bytes + ALIGNMENT - 1) / ALIGNMENT * ALIGNMENT;
    if (!bytes)
        bytes = ALIGNMENT;
    uf_arena_block *block = block_with_room(arena, bytes);
    if (!block)
        return NULL;
    arena->current = block;
    void *taken = block->bytes + block->used;
    block->used += bytes;
    return taken;
}

uf_arena_mark uf_arena_now(const uf_arena *arena)
{
    return (uf_arena_mark){arena->current, arena->current ? arena->current->used : 0};
}

void uf_arena_back(uf_arena *arena, uf_arena_mark mark)
{
    uf_arena_block *from = mark.block ? mark.block->next : arena->first;
    for (uf_arena_block *b = from; b; b = b->next)
        b->used = 0;
    if (mark.block)
        mark.block->used = mark.used;
    arena->current = mark.block;
}

void uf_arena_free(uf_arena *arena)
{
    for (uf_arena_block *b = arena->first; b;) {
        uf_arena_block *next = b->next;
        free(b->bytes);
        free(b);
        b = next;
    }
    *arena = (uf_arena){0};
}
