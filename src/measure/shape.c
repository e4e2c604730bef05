/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "measure/shape.h"

#include <math.h>

#include "base/constants.h"

/* ---- moments --------------------------------------------------------------------------------- */

void uf_shape_ellipse(double variance_x, double variance_y, double covariance, uf_shape *shape)
{
    double half_sum = (variance_x + variance_y) / 2, half_difference = (variance_x - variance_y) / 2;
    double root = hypot(half_difference, covariance);
    shape->axis_long_px = 4 * sqrt(half_sum + root);
    shape->axis_short_px = 4 * sqrt(fmax(0, half_sum - root));
    /* y points down in the image, so the angle's sign is turned to read counter-clockwise. */
    double angle = -0.5 * atan2(2 * covariance, variance_x - variance_y) * 180 / UF_PI;
    shape->orientation_deg = root > 0 ? (angle <= -90 ? angle + 180 : angle) : 0;
}

static void moments(uf_labels labels, int label, uf_box box, uf_shape *shape)
{
    double area = 0, sum_x = 0, sum_y = 0;
    for (int y = box.y0; y < box.y1; y++) {
        const int32_t *row = uf_labels_row(labels, y);
        double row_area = 0, row_x = 0;
        for (int x = box.x0; x < box.x1; x++)
            if (row[x] == label) {
                row_area++;
                row_x += x;
            }
        area += row_area;
        sum_x += row_x;
        sum_y += row_area * y;
    }
    shape->area_px = area;
    shape->x_px = sum_x / area;
    shape->y_px = sum_y / area;
    double xx = 0, yy = 0, xy = 0;
    for (int y = box.y0; y < box.y1; y++) {
        const int32_t *row = uf_labels_row(labels, y);
        double dy = y - shape->y_px;
        for (int x = box.x0; x < box.x1; x++)
            if (row[x] == label) {
                double dx = x - shape->x_px;
                xx += dx * dx;
                yy += dy * dy;
                xy += dx * dy;
            }
    }
    uf_shape_ellipse(xx / area + 1.0 / 12, yy / area + 1.0 / 12, xy / area, shape);
}

/* ---- Crofton --------------------------------------------------------------------------------- */

/* Transitions between pixels and their neighbours to the right, below, and both ways aslant, over all pairs that
 * touch the box: counted for two rows at a time, with the outside of the image as no label. */
typedef struct transitions {
    double straight, aslant;
} transitions;

static int label_at(const int32_t *row, int width, int x, int label)
{
    return row && x >= 0 && x < width && row[x] == label;
}

static transitions count_transitions(uf_labels labels, int label, uf_box box)
{
    transitions t = {0};
    int width = labels.width;
    for (int y = box.y0 - 1; y < box.y1; y++) {
        const int32_t *row = y >= 0 ? uf_labels_row(labels, y) : NULL;
        const int32_t *below = y + 1 < labels.height ? uf_labels_row(labels, y + 1) : NULL;
        int here = 0, under = 0; /* at x - 1, outside the box */
        int64_t straight = 0, aslant = 0;
        for (int x = box.x0; x <= box.x1; x++) {
            int next = label_at(row, width, x, label), next_under = label_at(below, width, x, label);
            straight += (here != next) + (here != under);
            aslant += (here != next_under) + (under != next);
            here = next;
            under = next_under;
        }
        t.straight += (double)straight;
        t.aslant += (double)aslant;
    }
    return t;
}

/* ---- convex hull ----------------------------------------------------------------------------- */

typedef struct point {
    double x, y;
} point;

static double cross(point o, point a, point b)
{
    return (a.x - o.x) * (b.y - o.y) - (a.y - o.y) * (b.x - o.x);
}

/* The two ends of each row's extent, at the pixels' edge midpoints; rows ascend, so points are in order of y. */
static int row_ends(uf_labels labels, int label, uf_box box, point *left, point *right)
{
    int count = 0;
    for (int y = box.y0; y < box.y1; y++) {
        const int32_t *row = uf_labels_row(labels, y);
        int from = box.x0, to = box.x1 - 1;
        while (from < box.x1 && row[from] != label)
            from++;
        while (to > from && row[to] != label)
            to--;
        if (from >= box.x1)
            continue;
        if (!count) { /* the top edge */
            left[count] = (point){from, y - 0.5};
            right[count++] = (point){to, y - 0.5};
        }
        left[count] = (point){from - 0.5, y};
        right[count++] = (point){to + 0.5, y};
    }
    const int32_t *last = uf_labels_row(labels, box.y1 - 1);
    int from = box.x0, to = box.x1 - 1;
    while (from < to && last[from] != label)
        from++;
    while (to > from && last[to] != label)
        to--;
    left[count] = (point){from, box.y1 - 0.5};
    right[count++] = (point){to, box.y1 - 0.5};
    return count;
}

/* One side of the hull by Andrew's monotone chain (1979, Inf. Process. Lett. 9:216); turn is +1 or -1. */
static int chain(const point *points, int count, double turn, point *hull)
{
    int n = 0;
    for (int k = 0; k < count; k++) {
        while (n >= 2 && turn * cross(hull[n - 2], hull[n - 1], points[k]) <= 0)
            n--;
        hull[n++] = points[k];
    }
    return n;
}

static double polygon_area(const point *p, int n)
{
    double sum = 0;
    for (int k = 0; k < n; k++) {
        point a = p[k], b = p[(k + 1) % n];
        sum += a.x * b.y - a.y * b.x;
    }
    return fabs(sum) / 2;
}

/* Largest distance between two hull points, and the smallest width over the directions of the hull's sides:
 * one side of the narrowest strip lies on a side of the hull. */
static void calipers(const point *p, int n, uf_shape *shape)
{
    double longest = 0, narrowest = INFINITY;
    for (int k = 0; k < n; k++) {
        point a = p[k], b = p[(k + 1) % n];
        double length = hypot(b.x - a.x, b.y - a.y), width = 0;
        for (int j = 0; j < n; j++) {
            longest = fmax(longest, hypot(p[j].x - a.x, p[j].y - a.y));
            if (length > 0)
                width = fmax(width, fabs(cross(a, b, p[j])) / length);
        }
        if (length > 0)
            narrowest = fmin(narrowest, width);
    }
    shape->caliper_max_px = longest;
    shape->caliper_min_px = narrowest;
}

static uf_status hull_of(uf_work *work, uf_labels labels, int label, uf_box box, uf_shape *shape, uf_error *error)
{
    uf_arena_mark mark = uf_arena_now(&work->arena);
    size_t places = (size_t)(box.y1 - box.y0) + 2;
    point *left, *right, *hull;
    uf_status status = uf_take(work, places, sizeof *left, "shapes", &left, error);
    if (status == UF_OK)
        status = uf_take(work, places, sizeof *right, "shapes", &right, error);
    if (status == UF_OK)
        status = uf_take(work, 2 * places, sizeof *hull, "shapes", &hull, error);
    if (status == UF_OK) {
        int count = row_ends(labels, label, box, left, right);
        int n = chain(right, count, 1, hull), m = chain(left, count, -1, hull + n);
        for (int k = 0; k < m / 2; k++) { /* down the right side, up the left */
            point swap = hull[n + k];
            hull[n + k] = hull[n + m - 1 - k];
            hull[n + m - 1 - k] = swap;
        }
        shape->hull_area_px = polygon_area(hull, n + m);
        calipers(hull, n + m, shape);
    }
    uf_arena_back(&work->arena, mark);
    return status;
}

uf_status uf_shape_of(uf_work *work, uf_labels labels, int label, uf_box box, uf_shape *shape, uf_error *error)
{
    moments(labels, label, box, shape);
    transitions t = count_transitions(labels, label, box);
    shape->perimeter_px = UF_PI / 8 * (t.straight + t.aslant / sqrt(2.0));
    return hull_of(work, labels, label, box, shape, error);
}
