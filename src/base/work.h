/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * What a step needs to work: memory and hands. `run` makes one uf_work a worker and passes it down;
 * steps take scratch from its arena and hand rows to its pool. Tasks are cut by the image, never by the
 * number of threads, so results cannot depend on it.
 */
#ifndef UF_BASE_WORK_H
#define UF_BASE_WORK_H

#include "base/arena.h"
#include "base/status.h"

typedef struct uf_pool uf_pool;

typedef struct uf_work {
    uf_arena arena;
    uf_pool *pool; /* NULL: everything runs in the calling thread */
} uf_work;

/* A task gets its index and the number of the hand that does it, 0 .. uf_hands - 1: no two tasks run in one
 * hand at once, so that scratch is needed once a hand. Tasks of one call may run in any order and at once. */
typedef void uf_task(void *context, int hand, int index);

/* How many hands there are: 1 without a pool. */
int uf_hands(const uf_work *work);

/* Starts threads - 1 helpers (the caller is the last hand). UF_INPUT when they cannot be started. */
UF_MUST_USE uf_status uf_pool_new(uf_pool **pool, int threads, uf_error *error);
void uf_pool_free(uf_pool **pool);

/* Runs task(context, hand, 0 .. count-1) and returns when all are done. A NULL pool runs them in order here. */
void uf_pool_run(uf_pool *pool, int count, uf_task *task, void *context);

/* A row task handles rows y0 <= y < y1. */
typedef void uf_rows_task(void *context, int hand, int y0, int y1);

/* Splits `height` rows into bands of a fixed size and runs the task on each. */
void uf_rows_run(const uf_work *work, int height, uf_rows_task *task, void *context);

/* Takes count * size bytes from the arena. */
UF_MUST_USE uf_status uf_take(uf_work *work, size_t count, size_t size, const char *what, void *pointer,
                              uf_error *error);

#endif
