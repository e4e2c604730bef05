/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "image/outlines.h"

#include <stdbool.h>
#include <string.h>

typedef struct tracing {
    uf_labels labels;
    int32_t label;
    uf_box box;
    uint8_t *walked; /* of each pixel of the box: a ring has gone along its upper edge */
} tracing;

static bool is_on(const tracing *t, int x, int y)
{
    return x >= t->box.x0 && x < t->box.x1 && y >= t->box.y0 && y < t->box.y1 &&
           uf_labels_row(t->labels, y)[x] == t->label;
}

static uint8_t *walked_at(const tracing *t, int x, int y)
{
    return t->walked + (ptrdiff_t)(y - t->box.y0) * (t->box.x1 - t->box.x0) + (x - t->box.x0);
}

/* ---- how many corners ------------------------------------------------------------------------------ */

/* A ring turns at a corner of a pixel of the label when both pixels beside it there are off, or when both are on and
 * the one across is off. This counts each turn once, at the pixel it goes around or into. */
static size_t turns_at(const tracing *t, int x, int y)
{
    size_t turns = 0;
    for (int dy = -1; dy <= 1; dy += 2)
        for (int dx = -1; dx <= 1; dx += 2) {
            bool beside = is_on(t, x + dx, y), above = is_on(t, x, y + dy);
            turns += (!beside && !above) || (beside && above && !is_on(t, x + dx, y + dy));
        }
    return turns;
}

static size_t count_turns(const tracing *t)
{
    size_t turns = 0;
    for (int y = t->box.y0; y < t->box.y1; y++) {
        const int32_t *row = uf_labels_row(t->labels, y);
        for (int x = t->box.x0; x < t->box.x1; x++)
            if (row[x] == t->label)
                turns += turns_at(t, x, y);
    }
    return turns;
}

/* ---- one ring -------------------------------------------------------------------------------------- */

enum { RIGHT, DOWN, LEFT, UP };

/* The pixels ahead of someone who stands on a corner: the one ahead on the right of heading h is at the corner plus
 * ahead[h], and the one ahead on the left is where the right one is of the heading before. */
static const int ahead[4][2] = {{0, 0}, {-1, 0}, {-1, -1}, {0, -1}};
static const int step[4][2] = {{1, 0}, {0, 1}, {-1, 0}, {0, -1}};

static int next_heading(const tracing *t, uf_corner at, int heading)
{
    const int *right = ahead[heading], *left = ahead[(heading + 3) % 4];
    if (!is_on(t, at.x + right[0], at.y + right[1]))
        return (heading + 1) % 4;
    return is_on(t, at.x + left[0], at.y + left[1]) ? (heading + 3) % 4 : heading;
}

/* Follows the ring that starts along the upper edge of pixel `start`. A ring may pass a corner twice, but each edge
 * of a pixel once only. Returns how many corners it wrote. */
static size_t walk(tracing *t, uf_corner start, uf_corner *corners)
{
    size_t count = 0;
    uf_corner at = start;
    int heading = RIGHT;
    corners[count++] = start;
    for (;;) {
        if (heading == RIGHT)
            *walked_at(t, at.x, at.y) = 1;
        at.x += step[heading][0];
        at.y += step[heading][1];
        int next = next_heading(t, at, heading);
        if (at.x == start.x && at.y == start.y && next == RIGHT)
            return count;
        if (next != heading)
            corners[count++] = at;
        heading = next;
    }
}

/* ---- all rings of a label -------------------------------------------------------------------------- */

/* Every ring has an upper edge, so looking for those that were not walked finds all rings. The first edge found in a
 * run of them is its left end, where the ring turns. */
static void walk_all(tracing *t, uf_rings *rings)
{
    size_t corners = 0;
    rings->count = 0;
    for (int y = t->box.y0; y < t->box.y1; y++) {
        const int32_t *row = uf_labels_row(t->labels, y);
        for (int x = t->box.x0; x < t->box.x1; x++)
            if (row[x] == t->label && !is_on(t, x, y - 1) && !*walked_at(t, x, y)) {
                corners += walk(t, (uf_corner){x, y}, rings->corners + corners);
                rings->ends[rings->count++] = corners;
            }
    }
}

uf_status uf_outline_trace(uf_work *work, uf_labels labels, int32_t label, uf_box box, uf_rings *rings,
                           uf_error *error)
{
    const size_t fewest_turns = 4; /* of a ring */
    *rings = (uf_rings){0};
    if (box.x1 <= box.x0 || box.y1 <= box.y0)
        return UF_OK;
    tracing t = {.labels = labels, .label = label, .box = box};
    size_t turns = count_turns(&t), pixels = (size_t)(box.x1 - box.x0) * (size_t)(box.y1 - box.y0);
    uf_status status = uf_take(work, turns, sizeof *rings->corners, "outlines", &rings->corners, error);
    if (status == UF_OK)
        status = uf_take(work, turns / fewest_turns, sizeof *rings->ends, "outlines", &rings->ends, error);
    if (status != UF_OK)
        return status;
    uf_arena_mark mark = uf_arena_now(&work->arena);
    status = uf_take(work, pixels, 1, "outlines", &t.walked, error);
    if (status == UF_OK) {
        memset(t.walked, 0, pixels);
        walk_all(&t, rings);
    }
    uf_arena_back(&work->arena, mark);
    return status;
}
