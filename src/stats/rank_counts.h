/* SPDX-License-Identifier: GPL-3.0-or-later */
/* How many ways ranks can add up. For use inside src/stats. */
#ifndef UF_STATS_RANK_COUNTS_H
#define UF_STATS_RANK_COUNTS_H

#include <stddef.h>

#include "base/status.h"

/* Shares of all choices by their sum: share[s] for s = 0 .. top. Freed by the caller of the function that made it. */
typedef struct uf_rank_shares {
    double *share;
    int top;
} uf_rank_shares;

/* Twice the mean rank of each of `count` values (1-based; ties share), so that all are whole. Returns the sum over
 * ties of t^3 - t. UF_MEMORY is the only failure. */
UF_MUST_USE uf_status uf_double_midranks(const double *values, size_t count, int *ranks, double *ties,
                                         uf_error *error);

/* Sums of `chosen` out of `count` ranks, every choice as likely. */
UF_MUST_USE uf_status uf_shares_of_choices(const int *ranks, size_t count, size_t chosen, uf_rank_shares *shares,
                                           uf_error *error);

/* Sums of any of `count` ranks, each in or out as likely. */
UF_MUST_USE uf_status uf_shares_of_signs(const int *ranks, size_t count, uf_rank_shares *shares, uf_error *error);

/* Share of sums from `low` to `high`, both included. */
double uf_share_between(const uf_rank_shares *shares, double low, double high);

#endif
