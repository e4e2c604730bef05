/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "scene/cell_shape.h"

#include <math.h>

static const double pi = 3.14159265358979323846;

/* Lengths over which body and arms flow into each other. */
static const double fillet = 0.16;

static double angle_of(int k)
{
    return 2 * pi * k / UF_SHAPE_ANGLES;
}

/* Body ------------------------------------------------------------------------------------------- */

static void draw_ellipse(uf_cell_shape *shape, double aspect)
{
    for (int k = 0; k < UF_SHAPE_ANGLES; k++) {
        double c = cos(angle_of(k)), s = sin(angle_of(k));
        shape->radius[k] = 1 / sqrt(c * c / aspect + s * s * aspect);
    }
}

static void add_harmonics(uf_random *random, uf_cell_shape *shape, int from, int to, double size)
{
    for (int n = from; n <= to; n++) {
        double height = size * uf_random_normal(random) / n;
        double phase = uf_random_between(random, 0, 2 * pi);
        for (int k = 0; k < UF_SHAPE_ANGLES; k++)
            shape->radius[k] *= 1 + height * cos(n * angle_of(k) + phase);
    }
}

/* A broad bulge: flat along its front, falling over a quarter of a radian to either side. */
static void add_lamella(uf_random *random, uf_cell_shape *shape)
{
    double at = uf_random_between(random, 0, 2 * pi);
    double height = uf_random_between(random, 0.15, 0.45);
    double half = uf_random_between(random, 0.25, 0.55);
    for (int k = 0; k < UF_SHAPE_ANGLES; k++) {
        double off = fabs(remainder(angle_of(k) - at, 2 * pi));
        shape->radius[k] *= 1 + height / (1 + exp((off - half) / 0.09));
    }
}

static void close_body(uf_cell_shape *shape)
{
    shape->radius_min = INFINITY;
    shape->radius_max = 0;
    for (int k = 0; k < UF_SHAPE_ANGLES; k++) {
        shape->radius[k] = fmax(shape->radius[k], 0.3);
        shape->radius_min = fmin(shape->radius_min, shape->radius[k]);
        shape->radius_max = fmax(shape->radius_max, shape->radius[k]);
    }
    shape->radius[UF_SHAPE_ANGLES] = shape->radius[0];
}

static double body_radius(const uf_cell_shape *shape, double x, double y)
{
    double turn = atan2(y, x) / (2 * pi);
    double at = (turn < 0 ? turn + 1 : turn) * UF_SHAPE_ANGLES;
    int k = (int)at;
    k = k < UF_SHAPE_ANGLES ? k : UF_SHAPE_ANGLES - 1;
    return shape->radius[k] + (at - k) * (shape->radius[k + 1] - shape->radius[k]);
}

/* Arms ------------------------------------------------------------------------------------------- */

/* An arm roots inside the body and ends `length` beyond its outline, bent a little on the way. */
static void add_arm(uf_random *random, uf_cell_shape *shape, double angle, double length, double root_width,
                    double tip_width)
{
    uf_shape_arm *arm = &shape->arm[shape->arms++];
    double dx = cos(angle), dy = sin(angle);
    double edge = body_radius(shape, dx, dy);
    double along[3] = {0.55 * edge, edge + 0.35 * length, edge + length};
    double aside[3] = {0, 0.12 * length * uf_random_normal(random), 0};
    aside[2] = 0.25 * length * uf_random_normal(random);
    for (int i = 0; i < 3; i++) {
        arm->x[i] = along[i] * dx - aside[i] * dy;
        arm->y[i] = along[i] * dy + aside[i] * dx;
    }
    arm->root_width = root_width;
    arm->tip_width = tip_width;
}

/* Distance from one straight piece of an arm, less the half-width there. */
static double piece_value(double x, double y, const uf_shape_arm *arm, int i)
{
    double ax = x - arm->x[i], ay = y - arm->y[i];
    double bx = arm->x[i + 1] - arm->x[i], by = arm->y[i + 1] - arm->y[i];
    double along = (ax * bx + ay * by) / (bx * bx + by * by);
    along = along < 0 ? 0 : along > 1 ? 1 : along;
    double ex = ax - along * bx, ey = ay - along * by;
    double share = 0.5 * (i + along);
    return sqrt(ex * ex + ey * ey) - (arm->root_width + share * (arm->tip_width - arm->root_width));
}

static double arm_value(double x, double y, const uf_shape_arm *arm)
{
    double first = piece_value(x, y, arm, 0), second = piece_value(x, y, arm, 1);
    return first < second ? first : second;
}

/* The whole ---------------------------------------------------------------------------------------- */

/* Minimum with the corner filled by a parabola of width `fillet` (Quilez, "Smooth minimum", quadratic). */
static double smooth_minimum(double a, double b)
{
    double h = fillet - fabs(a - b);
    return (a < b ? a : b) - (h > 0 ? h * h / (4 * fillet) : 0);
}

/* Whether an arm is so far that joining it with `value` would leave that as it is. */
static bool is_far(double x, double y, double value, const uf_shape_arm *arm)
{
    double dx = x - arm->middle_x, dy = y - arm->middle_y, needed = value + fillet + arm->reach;
    return needed <= 0 || dx * dx + dy * dy >= needed * needed;
}

static bool all_arms_far(const uf_cell_shape *shape, double x, double y, double value)
{
    for (int k = 0; k < shape->arms; k++)
        if (!is_far(x, y, value, &shape->arm[k]))
            return false;
    return true;
}

/* Joining arms only ever lowers the value, so that most points are decided by the body, or by being far from it. */
static bool is_inside(const uf_cell_shape *shape, double x, double y)
{
    double r = sqrt(x * x + y * y);
    if (r < shape->radius_min)
        return true;
    if (r > shape->radius_max && all_arms_far(shape, x, y, r - shape->radius_min))
        return false;
    double value = r - (r < shape->radius_max + 1 ? body_radius(shape, x, y) : shape->radius_max);
    for (int k = 0; k < shape->arms && value >= 0; k++)
        if (!is_far(x, y, value, &shape->arm[k]))
            value = smooth_minimum(value, arm_value(x, y, &shape->arm[k]));
    return value < 0;
}

bool uf_shape_covers(const uf_cell_shape *shape, double x, double y)
{
    return is_inside(shape, x / shape->scale, y / shape->scale);
}

static void bound_arms(uf_cell_shape *shape)
{
    for (int k = 0; k < shape->arms; k++) {
        uf_shape_arm *arm = &shape->arm[k];
        arm->middle_x = (arm->x[0] + arm->x[1] + arm->x[2]) / 3;
        arm->middle_y = (arm->y[0] + arm->y[1] + arm->y[2]) / 3;
        arm->reach = 0;
        for (int i = 0; i < 3; i++)
            arm->reach = fmax(arm->reach, hypot(arm->x[i] - arm->middle_x, arm->y[i] - arm->middle_y));
        arm->reach += fmax(arm->root_width, arm->tip_width);
    }
}

/* Area by counting on a grid: 0.5 % is plenty for a size. */
static void measure_shape(uf_cell_shape *shape)
{
    const double step = 0.04;
    double reach = shape->radius_max;
    for (int k = 0; k < shape->arms; k++)
        for (int i = 1; i < 3; i++)
            reach = fmax(reach, hypot(shape->arm[k].x[i], shape->arm[k].y[i]) + shape->arm[k].root_width);
    reach += fillet / 4 * shape->arms;
    int half = (int)ceil(reach / step);
    double inside = 0;
    for (int j = -half; j <= half; j++)
        for (int i = -half; i <= half; i++)
            inside += is_inside(shape, i * step, j * step);
    shape->scale = sqrt(pi / (inside * step * step));
    shape->reach = reach * shape->scale;
}

/* Drawn out along the first axis, an arm at each end. */
static void draw_spindle(uf_random *random, double thinnest, uf_cell_shape *shape)
{
    draw_ellipse(shape, uf_random_between(random, 1.7, 2.5));
    add_harmonics(random, shape, 2, 6, 0.18);
    close_body(shape);
    for (int end = 0; end < 2; end++) {
        double angle = pi * end + 0.2 * uf_random_normal(random);
        double length = uf_random_between(random, 0.3, 0.8);
        double width = uf_random_between(random, 0.16, 0.26);
        add_arm(random, shape, angle, length, width, fmax(0.06, thinnest));
    }
}

/* Lamellae to some sides, and arms pulled out between them. */
static void draw_spread(uf_random *random, double thinnest, uf_cell_shape *shape)
{
    draw_ellipse(shape, uf_random_between(random, 1.05, 1.5));
    add_harmonics(random, shape, 2, 5, 0.22);
    int lamellae = uf_random_whole(random, 1, 3);
    for (int k = 0; k < lamellae; k++)
        add_lamella(random, shape);
    add_harmonics(random, shape, 9, 17, 0.15);
    close_body(shape);
    int arms = uf_random_whole(random, 1, 3);
    for (int k = 0; k < arms; k++) {
        double angle = uf_random_between(random, 0, 2 * pi);
        double length = uf_random_between(random, 0.2, 0.55);
        double width = uf_random_between(random, 0.14, 0.24);
        add_arm(random, shape, angle, length, width, fmax(0.05, thinnest));
    }
}

static void add_filopodia(uf_random *random, double thinnest, uf_cell_shape *shape)
{
    int room = UF_SHAPE_ARMS - shape->arms;
    int wanted = uf_random_whole(random, 1, 4);
    for (int k = 0; k < wanted && k < room; k++) {
        double angle = uf_random_between(random, 0, 2 * pi);
        double length = uf_random_between(random, 0.12, 0.4);
        add_arm(random, shape, angle, length, fmax(0.07, thinnest), thinnest);
    }
}

/* Cells lie in all directions: the body is turned by shifting its table, and the arms with it. */
static void turn_shape(uf_random *random, uf_cell_shape *shape)
{
    double angle = uf_random_between(random, 0, 2 * pi), c = cos(angle), s = sin(angle);
    double turned[UF_SHAPE_ANGLES];
    for (int k = 0; k < UF_SHAPE_ANGLES; k++)
        turned[k] = body_radius(shape, cos(angle_of(k) - angle), sin(angle_of(k) - angle));
    for (int k = 0; k < UF_SHAPE_ANGLES; k++)
        shape->radius[k] = turned[k];
    shape->radius[UF_SHAPE_ANGLES] = turned[0];
    for (int k = 0; k < shape->arms; k++) {
        uf_shape_arm *arm = &shape->arm[k];
        for (int i = 0; i < 3; i++) {
            double x = arm->x[i], y = arm->y[i];
            arm->x[i] = c * x - s * y;
            arm->y[i] = s * x + c * y;
        }
    }
}

void uf_shape_draw(uf_random *random, double thinnest, uf_cell_shape *shape)
{
    *shape = (uf_cell_shape){.scale = 1};
    if (uf_random_uniform(random) < 0.3)
        draw_spindle(random, thinnest, shape);
    else
        draw_spread(random, thinnest, shape);
    add_filopodia(random, thinnest, shape);
    turn_shape(random, shape);
    bound_arms(shape);
    measure_shape(shape);
}
