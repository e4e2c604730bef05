/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "report/plot_scale.h"

#include <math.h>
#include <string.h>

double uf_plot_step(double range, int most)
{
    static const double steps[] = {1, 2, 5, 10};
    double rough = range / (most < 1 ? 1 : most), power = pow(10, floor(log10(rough)));
    for (int k = 0; k < 4; k++)
        if (steps[k] * power >= rough * (1 - 1e-9))
            return uf_round_digits(steps[k] * power, 12);
    return uf_round_digits(10 * power, 12);
}

static double position(double value, double from, double to, int is_log10)
{
    return is_log10 ? log(value / from) / log(to / from) : (value - from) / (to - from);
}

double uf_plot_x(const uf_plot_frame *f, double x)
{
    return f->box.x0 + position(x, f->x_from, f->x_to, f->x_log10) * (f->box.x1 - 1 - f->box.x0);
}

double uf_plot_y(const uf_plot_frame *f, double y)
{
    return f->box.y1 - 1 - position(y, f->y_from, f->y_to, f->y_log10) * (f->box.y1 - 1 - f->box.y0);
}

/* ---- ranges ---------------------------------------------------------------------------------- */

static void log_range(const uf_plot_axis *axis, double least, double most, double *from, double *to)
{
    double low = isnan(axis->from) ? least : axis->from, high = isnan(axis->to) ? most : axis->to;
    low = low > 0 ? low : 0.1;
    high = high > low ? high : 10 * low;
    *from = isnan(axis->from) ? pow(10, floor(log10(low) + 1e-9)) : low;
    *to = isnan(axis->to) ? pow(10, ceil(log10(high) - 1e-9)) : high;
    if (!(*to > *from))
        *to = 10 * *from;
}

void plot_range(const uf_plot_axis *axis, double least, double most, int pieces, double *from, double *to)
{
    if (axis->log10) {
        log_range(axis, least, most, from, to);
        return;
    }
    double low = isnan(axis->from) ? least : axis->from, high = isnan(axis->to) ? most : axis->to;
    low = isfinite(low) ? low : isfinite(high) ? high - 1 : 0;
    high = isfinite(high) ? high : low + 1;
    if (!(high > low)) { /* one value: a range around it */
        double half = low == 0 ? 1 : fabs(low) / 2;
        low = isnan(axis->from) ? low - half : low;
        high = isnan(axis->to) || high <= low ? low + 2 * half : high;
    }
    double step = uf_plot_step(high - low, pieces);
    *from = isnan(axis->from) ? uf_round_digits(step * floor(low / step + 1e-9), 12) : low;
    *to = isnan(axis->to) ? uf_round_digits(step * ceil(high / step - 1e-9), 12) : high;
}

/* ---- ticks ----------------------------------------------------------------------------------- */

static void add_tick(plot_tick *ticks, int *count, double at, int labelled)
{
    if (*count >= PLOT_TICKS)
        return;
    plot_tick *tick = &ticks[(*count)++];
    *tick = (plot_tick){.at = at, .labelled = labelled};
    uf_format_number(tick->label, at, 8);
}

static int log_ticks(double from, double to, plot_tick *ticks)
{
    int count = 0, first = (int)floor(log10(from) + 1e-9), last = (int)ceil(log10(to) - 1e-9);
    int decades = last - first, every = 1 + (decades - 1) / 8;
    for (int power = first; power <= last; power++)
        for (int digit = 1; digit <= (decades > 6 ? 1 : 9); digit++) {
            double at = uf_round_digits(digit * pow(10, power), 12);
            int labelled = digit == 1 ? (power - first) % every == 0 : decades < 2 && (digit == 2 || digit == 5);
            if (at >= from * (1 - 1e-9) && at <= to * (1 + 1e-9))
                add_tick(ticks, &count, at, labelled);
        }
    return count;
}

int plot_ticks(double from, double to, int is_log10, int pieces, plot_tick *ticks)
{
    if (is_log10)
        return log_ticks(from, to, ticks);
    int count = 0;
    double step = uf_plot_step(to - from, pieces), first = ceil(from / step - 1e-9);
    for (int k = 0; k < PLOT_TICKS && (first + k) * step <= to + 1e-9 * step; k++)
        add_tick(ticks, &count, uf_round_digits((first + k) * step, 10), 1);
    return count;
}
