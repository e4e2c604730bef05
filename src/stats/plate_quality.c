/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "stats/plate_quality.h"

#include <math.h>

#include "base/constants.h"
#include "fit/distribution.h"
#include "stats/summary.h"

/* Variances over those of a mean and a standard deviation, for normal scatter. */
static const double median_cost = UF_PI / 2, mad_cost = 2.7213;

/* Middle and spread of one control with their variances. */
typedef struct control {
    double middle, spread, middle_variance, spread_variance;
} control;

static control plain(const uf_summary *s)
{
    double n = (double)s->moments.count, variance = s->moments.sd * s->moments.sd;
    return (control){s->moments.mean, s->moments.sd, variance / n, variance / (2 * (n - 1))};
}

static control robust(const uf_summary *s)
{
    double n = (double)s->moments.count, spread = UF_MAD_TO_SD * s->mad, variance = spread * spread;
    return (control){s->median, spread, median_cost * variance / n, mad_cost * variance / (2 * (n - 1))};
}

static const uf_index no_index = {(double)NAN, (double)NAN, (double)NAN};

/* 1 - Z' is a ratio of positive numbers: its logarithm is closer to normal. */
static uf_index z_prime_of(control a, control b, double factor)
{
    double distance = fabs(a.middle - b.middle), spread = a.spread + b.spread, ratio = 3 * spread / distance;
    if (!(distance > 0))
        return no_index;
    if (!(spread > 0))
        return (uf_index){1, (double)NAN, (double)NAN};
    double sd = sqrt((a.spread_variance + b.spread_variance) / (spread * spread) +
                     (a.middle_variance + b.middle_variance) / (distance * distance));
    return (uf_index){1 - ratio, 1 - ratio * exp(factor * sd), 1 - ratio * exp(-factor * sd)};
}

static uf_index ssmd_of(control positive, control negative, double factor)
{
    double sum = positive.spread * positive.spread + negative.spread * negative.spread;
    double value = (positive.middle - negative.middle) / sqrt(sum);
    if (!(sum > 0))
        return no_index;
    double by_spread =
        pow(positive.spread, 2) * positive.spread_variance + pow(negative.spread, 2) * negative.spread_variance;
    double sd =
        sqrt((positive.middle_variance + negative.middle_variance) / sum + value * value * by_spread / (sum * sum));
    return (uf_index){value, value - factor * sd, value + factor * sd};
}

static uf_index signal_window_of(control a, control b, double factor)
{
    control high = a.middle > b.middle ? a : b, low = a.middle > b.middle ? b : a;
    if (!(high.spread > 0))
        return no_index;
    double value = (high.middle - low.middle - 3 * (high.spread + low.spread)) / high.spread;
    double by_high = (value + 3) * (value + 3) * high.spread_variance, by_low = 9 * low.spread_variance;
    double sd = sqrt(by_high + by_low + high.middle_variance + low.middle_variance) / high.spread;
    return (uf_index){value, value - factor * sd, value + factor * sd};
}

static uf_plate_verdict verdict_of(const uf_plate_quality *q)
{
    if (q->n_control < UF_PLATE_WELLS_LEAST || q->n_positive < UF_PLATE_WELLS_LEAST || isnan(q->z_prime.value))
        return UF_PLATE_NO_VERDICT;
    return q->z_prime.value >= 0.5 ? UF_PLATE_GOOD : q->z_prime.value >= 0 ? UF_PLATE_MARGINAL : UF_PLATE_POOR;
}

uf_status uf_plate_quality_of(const double *control_wells, size_t n_control, const double *positive_wells,
                              size_t n_positive, double level, uf_plate_quality *q, uf_error *error)
{
    uf_summary s[2];
    *q = (uf_plate_quality){0, 0, no_index, no_index, no_index, no_index, no_index, UF_PLATE_NO_VERDICT, 0};
    uf_status status = uf_summarize(control_wells, NULL, n_control, &s[0], error);
    if (status == UF_OK)
        status = uf_summarize(positive_wells, NULL, n_positive, &s[1], error);
    if (status != UF_OK)
        return status;
    q->n_control = s[0].moments.count;
    q->n_positive = s[1].moments.count;
    if (q->n_control < UF_PLATE_WELLS_LEAST || q->n_positive < UF_PLATE_WELLS_LEAST)
        q->notes |= UF_NOTE_TOO_FEW;
    if (q->n_control < 2 || q->n_positive < 2)
        return UF_OK;
    double factor = uf_t_factor(level, (double)(q->n_control + q->n_positive) - 2);
    q->z_prime = z_prime_of(plain(&s[0]), plain(&s[1]), factor);
    q->z_prime_robust = z_prime_of(robust(&s[0]), robust(&s[1]), factor);
    q->ssmd = ssmd_of(plain(&s[1]), plain(&s[0]), factor);
    q->ssmd_robust = ssmd_of(robust(&s[1]), robust(&s[0]), factor);
    q->signal_window = signal_window_of(plain(&s[0]), plain(&s[1]), factor);
    q->verdict = verdict_of(q);
    if (!(s[0].moments.sd > 0) || !(s[1].moments.sd > 0))
        q->notes |= UF_NOTE_NO_SPREAD;
    return UF_OK;
}
