/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "base/work.h"

#include <pthread.h>
#include <stdbool.h>
#include <stdint.h>
#include <stdlib.h>
#include <string.h>

struct uf_pool {
    pthread_mutex_t lock;
    pthread_cond_t wake; /* a job has come, or the end */
    pthread_cond_t done; /* the last task of the job is finished */
    uf_task *task;
    void *context;
    int next, count, unfinished;
    bool ending;
    int helpers, hands_given;
    pthread_t helper[];
};

/* Takes tasks one by one until the job is empty. Called and left with the lock held. */
static void work_off(uf_pool *pool, int hand)
{
    while (pool->next < pool->count) {
        int index = pool->next++;
        uf_task *task = pool->task;
        void *context = pool->context;
        pthread_mutex_unlock(&pool->lock);
        task(context, hand, index);
        pthread_mutex_lock(&pool->lock);
        if (--pool->unfinished == 0)
            pthread_cond_broadcast(&pool->done);
    }
}

static void *helper_main(void *argument)
{
    uf_pool *pool = argument;
    pthread_mutex_lock(&pool->lock);
    int hand = ++pool->hands_given; /* the caller is hand 0 */
    while (!pool->ending) {
        work_off(pool, hand);
        if (!pool->ending)
            pthread_cond_wait(&pool->wake, &pool->lock);
    }
    pthread_mutex_unlock(&pool->lock);
    return NULL;
}

uf_status uf_pool_new(uf_pool **out, int threads, uf_error *error)
{
    int helpers = threads > 1 ? threads - 1 : 0;
    uf_pool *pool = calloc(1, sizeof *pool + (size_t)helpers * sizeof(pthread_t));
    *out = NULL;
    if (!pool)
        return uf_fail_memory(error, "threads");
    pthread_mutex_init(&pool->lock, NULL);
    pthread_cond_init(&pool->wake, NULL);
    pthread_cond_init(&pool->done, NULL);
    for (; pool->helpers < helpers; pool->helpers++) {
        int failed = pthread_create(&pool->helper[pool->helpers], NULL, helper_main, pool);
        if (failed) {
            uf_pool_free(&pool);
            return uf_fail(error, UF_INPUT, "cannot start %d threads (%s); use fewer --threads", threads,
                           strerror(failed));
        }
    }
    *out = pool;
    return UF_OK;
}

void uf_pool_free(uf_pool **pointer)
{
    uf_pool *pool = *pointer;
    if (!pool)
        return;
    pthread_mutex_lock(&pool->lock);
    pool->ending = true;
    pthread_cond_broadcast(&pool->wake);
    pthread_mutex_unlock(&pool->lock);
    for (int k = 0; k < pool->helpers; k++)
        pthread_join(pool->helper[k], NULL);
    pthread_cond_destroy(&pool->done);
    pthread_cond_destroy(&pool->wake);
    pthread_mutex_destroy(&pool->lock);
    free(pool);
    *pointer = NULL;
}

int uf_hands(const uf_work *work)
{
    return work->pool ? work->pool->helpers + 1 : 1;
}

void uf_pool_run(uf_pool *pool, int count, uf_task *task, void *context)
{
    if (!pool || pool->helpers == 0 || count < 2) {
        for (int k = 0; k < count; k++)
            task(context, 0, k);
        return;
    }
    pthread_mutex_lock(&pool->lock);
    pool->task = task;
    pool->context = context;
    pool->next = 0;
    pool->count = pool->unfinished = count;
    pthread_cond_broadcast(&pool->wake);
    work_off(pool, 0);
    while (pool->unfinished > 0)
        pthread_cond_wait(&pool->done, &pool->lock);
    pool->count = pool->next = 0;
    pthread_mutex_unlock(&pool->lock);
}

enum { BAND_ROWS = 64 };

typedef struct banded {
    uf_rows_task *task;
    void *context;
    int height;
} banded;

static void run_band(void *context, int hand, int index)
{
    banded *b = context;
    int y0 = index * BAND_ROWS;
    int y1 = y0 + BAND_ROWS < b->height ? y0 + BAND_ROWS : b->height;
    b->task(b->context, hand, y0, y1);
}

void uf_rows_run(const uf_work *work, int height, uf_rows_task *task, void *context)
{
    banded b = {task, context, height};
    uf_pool_run(work->pool, (height + BAND_ROWS - 1) / BAND_ROWS, run_band, &b);
}

uf_status uf_take(uf_work *work, size_t count, size_t size, const char *what, void *pointer, uf_error *error)
{
    void *taken = size && count > SIZE_MAX / 2 / size ? NULL : uf_arena_take(&work->arena, count * size);
    memcpy(pointer, &taken, sizeof taken);
    return taken ? UF_OK : uf_fail_memory(error, what);
}
